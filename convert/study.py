"""One run end to end: Plant -> Study (tables, findings, proof, provenance), and its files."""

from __future__ import annotations

import datetime
import platform
import tempfile
from collections.abc import Callable, Sequence
from dataclasses import asdict, dataclass, field, replace
from functools import cached_property
from importlib.metadata import PackageNotFoundError, version
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from . import chain, checks, entries, expectation, filecheck, folder, proof, unitsheet
from .errors import BranchwrightError, Finding, Severity
from .plant import Plant, Table
from .quantity import show
from .standards import formula_text

CAUTION = (
    "Calculated from the data supplied: not a test, not a certificate. For study use; a competent "
    "person checks source and result against the equipment, under the codes and licensing of the "
    "place, which come first. Never set protection, switch, parallel or energise on these numbers "
    "alone; fault-level and arc-energy studies use their own standard."
)
#: which step makes which column, for a reader who follows a number back
COLUMNS = {
    "branches.csv r_pu, x_pu": "z_system, real and imaginary part",
    "branches.csv g_pu, b_pu": "y_system, real and imaginary part",
    "branches.csv ratio_pu": "ratio",
    "units.csv uk_percent, ur_percent, ux_percent": "z_sc of the state, on the row's rating",
    "units.csv i0_percent, p0_w": "y_oc, p0",
    "units.csv pk_w, ohmic_hv_w, ohmic_lv_w, stray_w": "pk, p_hv, p_lv, p_stray of the state",
    "units.csv r_own_pu, x_own_pu": "z_t of the state: the circuit's, not the test's",
    "units.csv g_own_pu, b_own_pu": "y_m of the state: the circuit's, not the test's",
    "network files vk_percent, vkr_percent": "100 |z_t_study|, 100 Re z_t_study",
    "network files i0_percent, pfe_kw": "100 |y_m_study|, Re y_m_study times the rating",
    "retest.csv expected": "the reading, or for the study state test_volts and test_watts",
    "regulation.csv hand_percent": "regulation_phasor, regulation_ieee, drop_iec",
}
#: a study of more units than this is a fleet: one load point, notes one row a rule, and networks
#: are written on request only
FLEET = 1000
#: one refusal of every unit; also what --strict makes of any
NOTHING_LEFT = "no unit could be reduced: nothing was written"


@dataclass
class Study:
    """What a run gives: every table of the contract as a DataFrame, and the networks.

    Attributes
    ----------
    branches, units, losses, retest, regulation : DataFrame
        As in the CSV files of the same names.
    problems : list of Finding
        What findings.csv holds; `findings` is the same as a DataFrame.
    left_out : list of str
        Units with an error, which are in no branch and no network.
    network_texts : dict
        Text of network.json and single_phase.json, as proven.
    """

    plant: Plant
    model: str
    branches: pd.DataFrame
    units: pd.DataFrame
    losses: pd.DataFrame
    retest: pd.DataFrame
    regulation: pd.DataFrame
    problems: list[Finding]
    left_out: list[str]
    network_texts: dict[str, str]
    steps: list[dict[str, str]]
    options: dict[str, Any] = field(default_factory=dict)

    @property
    def findings(self) -> pd.DataFrame:
        """The findings as a table, columns as in findings.csv."""
        return findings_table(self.problems)

    @property
    def passed(self) -> bool:
        """Whether every verdict of the proof is a pass."""
        done, total = proof.verdicts(self.retest, self.regulation)
        return done == total

    @cached_property
    def network(self) -> Any:
        """The balanced pandapower network, or None without a three-phase unit."""
        return self._load("network.json")

    @cached_property
    def single_phase(self) -> Any:
        """The pandapower network of single-phase islands, or None without such a unit."""
        return self._load("single_phase.json")

    def _load(self, name: str) -> Any:
        if name not in self.network_texts:
            return None
        import pandapower as pp

        return pp.from_json_string(self.network_texts[name])

    def tables(self) -> dict[str, pd.DataFrame]:
        """Return the tables by the stem of their file."""
        return {
            "branches": self.branches,
            "units": self.units,
            "losses": self.losses,
            "retest": self.retest,
            "regulation": self.regulation,
            "findings": self.findings,
        }

    def write(self, target: Path, *, network: bool = True, force: bool = False) -> list[str]:
        """Write the contract's files into a folder; returns their names.

        Raises
        ------
        BranchwrightError
            The folder is not empty and `force` is not given.
        """
        files = {f"{name}.csv": folder.csv_text(table) for name, table in self.tables().items()}
        if network:
            files |= self.network_texts
        ordered = {name: files[name] for name in folder.CONTRACT if name in files}
        folder.write(Path(target), ordered, self.record(), force)
        return [*ordered, folder.RECORD]

    def record(self) -> dict[str, Any]:
        """Return what record.json holds, but for the hashes of the outputs."""
        system = self.plant.system
        return {
            "program": "branchwright",
            "date": datetime.datetime.now(datetime.UTC).isoformat(timespec="seconds"),
            "versions": versions(),
            "inputs": [asdict(source) for source in self.plant.sources],
            "options": self.options,
            "system": {
                "base_power": show(system.base_power, "apparent_power"),
                "frequency": show(system.frequency, "frequency"),
                "model": self.model,
            },
            "left_out": self.left_out,
            "proof": proof.summary(self.retest, self.regulation),
            "steps": self.steps,
            "columns": COLUMNS,
            "caution": CAUTION,
        }


def one_note_a_rule(findings: Sequence[Finding]) -> list[Finding]:
    """Return findings with the notes of each rule drawn together: the first, and how many."""
    notes: dict[str, list[Finding]] = {}
    for finding in findings:
        if finding.severity is Severity.NOTE:
            notes.setdefault(finding.rule, []).append(finding)
    drawn = [replace(alike[0], units=sum(note.units for note in alike)) for alike in notes.values()]
    return [*(f for f in findings if f.severity is not Severity.NOTE), *drawn]


def findings_table(findings: Sequence[Finding]) -> pd.DataFrame:
    """Return findings as a table, columns as in findings.csv."""
    rows = [{**asdict(finding), "severity": finding.severity.value} for finding in findings]
    return pd.DataFrame(rows, columns=list(Finding.__dataclass_fields__))


def versions() -> dict[str, str]:
    """Return the versions that a result rests on."""
    found = {"python": platform.python_version()}
    for name in ("branchwright", "numpy", "pandas", "pandapower"):
        try:
            found[name] = version(name)
        except PackageNotFoundError:
            found[name] = "not installed as a package"
    return found


def examine(plant: Plant, model: str = "T") -> tuple[Table, list[Finding], list[str]]:
    """Reduce a plant and check it, without networks.

    Returns
    -------
    units : Table
        The reduced units.
    findings : list of Finding
        Errors of the units left out, and findings on the rest.
    left_out : list of str
        Names of the units with an error.
    """
    units, errors = chain.run(plant, model)
    found = checks.run(plant, units, model)
    failed = [finding.subject for finding in found if finding.severity is Severity.ERROR]
    units = units.take(np.flatnonzero(~np.isin(units.text["name"].astype(str), failed)))
    findings = [*errors, *found]
    position = {name: at for at, name in enumerate(plant.transformers.text["name"])}
    findings.sort(key=lambda f: position.get(f.subject, len(position)))
    kept = set(units.text["name"])
    return units, findings, [name for name in plant.transformers.text["name"] if name not in kept]


def build(
    plant: Plant,
    *,
    model: str = "T",
    strict: bool = False,
    options: dict[str, Any] | None = None,
    progress: Callable[[str], None] = lambda _: None,
) -> Study:
    """Build the branches of a plant, write its networks to a scratch folder and prove them.

    Parameters
    ----------
    plant : Plant
        From `read`.
    model : str
        `T`: the exact circuit of both tests. `cantilever`: z_sc and y_oc as they stand, the shunt
        at the from terminals.
    strict : bool
        Refuse the whole study when one unit has an error.
    options : dict, optional
        Kept in the record.
    progress : callable
        Told what is being done.

    Returns
    -------
    Study

    Raises
    ------
    BranchwrightError
        Every unit has an error, or one has and `strict` is given.
    """
    if model not in chain.MODELS:
        raise BranchwrightError([f"model: read {model!r}; expected {' or '.join(chain.MODELS)}"])
    progress("reducing the readings")
    units, findings, left_out = examine(plant, model)
    if left_out and (strict or not units.n):
        errors = [f for f in findings if f.severity is Severity.ERROR]
        last = "--strict: nothing was written" if units.n else NOTHING_LEFT
        raise BranchwrightError([*map(error_line, errors), last])
    branches = pd.DataFrame(entries.branch_table(plant, units, model))
    table = pd.DataFrame(unitsheet.table(plant, units))
    expected = pd.DataFrame(expectation.retest(plant, units, model))
    fleet = units.n > FLEET
    system = expectation.one_point(plant.system) if fleet else plant.system
    points = pd.DataFrame(expectation.regulation_points(system, units))
    losses = pd.DataFrame(expectation.losses(plant.system, units))
    texts, sources = _networks(plant, units)
    progress("loading the load-flow library")
    with tempfile.TemporaryDirectory(prefix="branchwright-") as scratch:
        for name, text in texts.items():
            (Path(scratch) / name).write_text(text, encoding="utf-8")
        retest, regulation, failures = proof.prove(
            Path(scratch), branches, table, expected, points, progress
        )
    position = {name: at for at, name in enumerate(plant.transformers.text["name"])}
    findings = [*findings, *sources, *failures]
    findings = one_note_a_rule(findings) if fleet else findings
    findings.sort(key=lambda f: position.get(f.subject, len(position)))
    return Study(
        plant, model, branches, table, losses, retest, regulation, findings, left_out, texts,
        _steps(units), options or {},
    )  # fmt: skip


def _steps(units: Table) -> list[dict[str, str]]:
    """Return every formula that made a number of this study, once, with its source."""
    logged = [
        (step.out, step.formula, ", ".join(f"{name} = {column}" for name, column in step.columns))
        for step in units.steps
    ]
    by_hand = [(formula.__name__, formula, "per load point") for formula in expectation.HAND]
    return [
        {
            "out": out,
            "formula": formula_text(formula),
            "with": arguments,
            "source": str(getattr(formula, "source", "")),
        }
        for out, formula, arguments in [*logged, *by_hand]
    ]


def error_line(finding: Finding) -> str:
    """Return a finding as the one line that is printed for it."""
    parts = [f"{finding.subject}: {finding.reading}: read {finding.found}"]
    parts.append(f"expected {finding.expected}")
    parts += [f"effect: {finding.effect}"] if finding.effect else []
    parts += [f"likely cause: {finding.likely_cause}"] if finding.likely_cause else []
    return "; ".join(parts)


def _networks(plant: Plant, units: Table) -> tuple[dict[str, str], list[Finding]]:
    """Return the network files' texts, and a note for each source that was added."""
    names = plant.busbars.text["name"]
    title = "branchwright study"
    balanced, added = entries.three_phase_network(plant, units, title)
    single = entries.single_phase_network(plant, units, f"{title}, single-phase units")
    texts = {}
    if balanced is not None:
        texts["network.json"] = entries.network_text(balanced)
    if single is not None:
        texts["single_phase.json"] = entries.network_text(single)
    findings = [
        Finding(
            Severity.NOTE, str(names[at]), "source-assumed", "busbars source_voltage",
            "no source in this connected set of busbars", "a source_voltage",
            "an external grid at nominal volts is assumed here, so that the network runs", "",
            "assumed by the program",
        )
        for at in added
    ]  # fmt: skip
    if single is not None:
        count = int((units["phases"] == 1).sum())
        findings.append(
            Finding(
                Severity.NOTE, "single_phase.json", "single-phase-islands", "phases: 1",
                f"{count} single-phase units", "three-phase units in a balanced network",
                "one island each on its own volts and rating, fed at nominal volts from its HV "
                "side; multiply *_ka results by sqrt(3)", "", "pandapower is per phase of three",
                count,
            )
        )  # fmt: skip
    return texts, findings


#: columns of each table that the proof reads: text, numbers
_PROVEN = {
    "branches": (
        ("name", "from_busbar", "to_busbar", "model"),
        ("phases", "base_mva", "base_kv_from", "base_kv_to", "rated_kv_from", "rated_kv_to",
         "rated_mva", "r_pu", "x_pu", "g_pu", "b_pu", "ratio_pu", "shift_deg", "r_share_from",
         "x_share_from"),
    ),
    "units": (
        ("name", "state"),
        ("rated_mva", "r_own_pu", "x_own_pu", "g_own_pu", "b_own_pu"),
    ),
    "retest": (("name", "state", "test", "quantity", "unit", "certificate"), ("expected",)),
    "regulation": (
        ("name", "sense", "method"),
        ("load_fraction", "power_factor", "hand_percent", "bound_points"),
    ),
}  # fmt: skip


def _table(path: Path, texts: Sequence[str], numbers: Sequence[str]) -> pd.DataFrame:
    """Read a table of an output folder, refusing one whose columns cannot be what build wrote."""
    try:
        table = folder.read_csv(path)
    except (OSError, ValueError) as error:
        raise BranchwrightError([f"{path}: cannot be read: {error}"]) from None
    for name in (*texts, *numbers):
        if name not in table:
            raise BranchwrightError([f"{path}: has no column {name}"])
    for name in numbers:
        if table[name].dtype == object:
            raise BranchwrightError([f"{path}: column {name}: read text; expected numbers"])
    return table


def prove(
    target: Path, *, edited: bool = False, progress: Callable[[str], None] = lambda _: None
) -> tuple[pd.DataFrame, pd.DataFrame, list[Finding]]:
    """Repeat the proof of a folder from its files alone.

    Parameters
    ----------
    target : Path
        A folder that `build` wrote, with its network files.
    edited : bool
        Prove the files as they are, although they differ from the record's hashes.
    progress : callable
        Told what is being solved.

    Returns
    -------
    retest, regulation : DataFrame
    findings : list of Finding
        An error for each unit that failed.

    Raises
    ------
    BranchwrightError
        The folder is no output of `build`, or its files were changed.
    """
    target = Path(target)
    folder.read_record(target, edited)
    if not any((target / name).exists() for name in proof.FILES):
        raise BranchwrightError([f"{target}: holds no network file; build with --network"])
    branches, units, retest, regulation = (
        _table(target / f"{name}.csv", *columns) for name, columns in _PROVEN.items()
    )
    lacking = set(branches["name"]) - (set(retest["name"]) & set(regulation["name"]))
    if lacking:
        listed = ", ".join(sorted(map(str, lacking)))
        raise BranchwrightError([f"{target}: no expected readings or regulation of {listed}"])
    expected = retest[[*proof.KEYS, "unit", "certificate", "correction", "expected"]]
    made_here = (expected["unit"] == "count") | (expected["test"] == filecheck.BRANCH_TABLE)
    expected = expected[~made_here].reset_index(drop=True)
    points = regulation.drop(columns=["flow_percent", "difference_points", "verdict"])
    return proof.prove(target, branches, units, expected, points, progress)
