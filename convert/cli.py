"""The commands: parse, call, print, exit code. click is all that is loaded until one runs.

Exit codes: 0 good; 1 a unit has an error or its proof failed, the rest was written; 2 input that
cannot be used, nothing written.
"""

from __future__ import annotations

import sys
from collections.abc import Callable
from functools import wraps
from pathlib import Path
from typing import Any

import click

PATH = click.Path(path_type=Path)
CAUTION = (
    "Results are for study use: verify them against the equipment; local codes and licensed "
    "practice come first."
)


class _Quantity(click.ParamType[float]):
    """A number with a unit, such as "100 MVA", turned into SI."""

    name = "quantity"

    def __init__(self, dimension: str) -> None:
        self.dimension = dimension

    def convert(self, value: Any, param: Any, ctx: Any) -> float:
        from .quantity import QuantityError, parse

        try:
            quantity = parse(value, self.dimension)
            if quantity.value <= 0 and self.dimension != "temperature":
                raise QuantityError("a value above zero")
        except QuantityError as error:
            mend = f"; {error.mend}" if error.mend else ""
            self.fail(f"read {value!r}; expected {error.expected}{mend}", param, ctx)
        return quantity.value


def _guarded(command: Callable[..., int]) -> Callable[..., None]:
    """Turn the command's answer into an exit code, and bad input into its lines and code 2."""

    @wraps(command)
    def run(**options: Any) -> None:
        from .errors import BranchwrightError

        try:
            code = command(**options)
        except BranchwrightError as error:
            for line in error.problems:
                click.echo(line, err=True)
            code = 2
        except OSError as error:
            where = f"{error.filename}: " if error.filename else ""
            click.echo(f"{where}{error.strerror or error}; nothing was written", err=True)
            code = 2
        except (KeyboardInterrupt, RuntimeError) as error:
            if not _interrupted(error):
                raise
            click.echo("interrupted; no new file was kept", err=True)
            code = 130
        sys.exit(code)

    return run


def _interrupted(error: BaseException | None) -> bool:
    """Return whether Ctrl-C is behind an error: one that falls into an import comes out wrapped."""
    while error is not None and not isinstance(error, KeyboardInterrupt):
        error = error.__cause__ or error.__context__
    return error is not None


def _progress(text: str) -> None:
    """Say what is being done, on a terminal only."""
    if sys.stderr.isatty():
        click.echo(f"… {text}", err=True)


def _print(text: str, data: Callable[[], dict[str, Any]], form: str) -> None:
    from .report import json_text

    click.echo(json_text(data()) if form == "json" else text)


_format = click.option("--format", "form", type=click.Choice(["text", "json"]), default="text",
                       help="Print tables, or the same as data.")  # fmt: skip
_force = click.option("--force", is_flag=True, help="Replace files of an earlier run.")
_inputs = click.argument("inputs", nargs=-1, required=True, type=PATH)
_study_options = (
    click.option("--base-power", type=_Quantity("apparent_power"),
                 help='System base power in place of the sheets\', such as "100 MVA".'),
    click.option("--frequency", type=_Quantity("frequency"),
                 help='Frequency in place of the sheets\', such as "50 Hz".'),
    click.option("--temperature", type=_Quantity("temperature"),
                 help='Winding temperature of the study, such as "75 °C".'),
    click.option("--stage", help="Cooling stage that the study uses, for every unit with stages."),
    click.option("--model", type=click.Choice(["T", "cantilever"]), default="T",
                 help="Exact T of both tests, or the simplified circuit with its shunt at the "
                      "from terminals."),
)  # fmt: skip


def _with_study_options(command: Callable[..., Any]) -> Callable[..., Any]:
    for option in reversed(_study_options):
        command = option(command)
    return command


def _read(inputs: tuple[Path, ...], options: dict[str, Any]) -> Any:
    from .intake.sheet import read

    names = ("base_power", "frequency", "temperature", "stage")
    return read(*inputs, **{name: options[name] for name in names})


@click.group(epilog=CAUTION)
@click.version_option(package_name="branchwright")
def main() -> None:
    """Turn transformer test certificates into proven per-unit branches.

    A station sheet (YAML) holds the readings of the tests; `start` drafts one, `check` examines
    it, `build` makes the branches and a pandapower network and proves them.
    """


@main.command(epilog=CAUTION)
@_inputs
@click.option("--out", required=True, type=PATH, help="Folder for the results; new or empty.")
@_with_study_options
@click.option("--network/--no-network", default=None,
              help="Write the network files, or not; above 1,000 units only if asked.")  # fmt: skip
@click.option("--strict", is_flag=True, help="Write nothing if any unit has an error.")
@_force
@_format
@_guarded
def build(inputs: tuple[Path, ...], out: Path, **options: Any) -> int:
    """Build branches and networks from station sheets, and prove them."""
    from . import folder, study
    from .report import study_data, study_text

    folder.check_target(out, options["force"])
    plant = _read(inputs, options)
    shown = {key: value for key, value in options.items() if key not in ("force", "form")}
    result = study.build(
        plant, model=options["model"], strict=options["strict"], options=shown, progress=_progress
    )
    wanted = options["network"]
    network = len(result.branches) <= study.FLEET if wanted is None else wanted
    written = result.write(out, network=network, force=options["force"])
    _print(study_text(result, out, written), lambda: study_data(result), options["form"])
    return 0 if result.passed and not result.left_out else 1


@main.command(epilog=CAUTION)
@_inputs
@_with_study_options
@_format
@_guarded
def check(inputs: tuple[Path, ...], **options: Any) -> int:
    """Examine station sheets: readings, plates, assumptions. Writes nothing."""
    from .report import check_text
    from .study import examine, findings_table

    units, findings, left_out = examine(_read(inputs, options), options["model"])
    _print(
        check_text(findings, units.n, left_out),
        lambda: {"findings": findings_table(findings), "left_out": left_out},
        options["form"],
    )
    return 1 if left_out else 0


@main.command(epilog=CAUTION, short_help="Repeat the proof of a folder from its files.")
@click.argument("folder", type=PATH)
@click.option("--edited", is_flag=True, help="Prove the files although they were changed.")
@_format
@_guarded
def prove(folder: Path, edited: bool, form: str) -> int:
    """Repeat the proof of a folder that build wrote, from its files alone."""
    from .report import findings_text, proof_data, proof_text
    from .study import findings_table
    from .study import prove as prove_folder

    retest, regulation, findings = prove_folder(folder, edited=edited, progress=_progress)
    text = proof_text(retest, regulation)
    _print(
        f"{text}\n\n{findings_text(findings)}" if findings else text,
        lambda: {"retest": retest, "regulation": regulation, "findings": findings_table(findings),
                 "proof": proof_data(retest, regulation)},
        form,
    )  # fmt: skip
    return 1 if findings else 0


@main.command(epilog=CAUTION, short_help="Carry a branch table to another base.")
@click.argument("branches", type=PATH)
@click.option("--base-power", type=_Quantity("apparent_power"),
              help='New system base power, such as "100 MVA".')  # fmt: skip
@click.option("--busbars", type=PATH,
              help="CSV with the columns busbar, nominal_voltage (new) and, where only "
                   "single-phase branches end, was (old).")  # fmt: skip
@click.option("--add", multiple=True, type=click.Choice(["own", "ohm", "percent"]),
              help="Add own-base, ohm or percent columns; may be repeated.")  # fmt: skip
@click.option("--out", type=PATH, help="Write the table as CSV instead of printing it.")
@_force
@_format
@_guarded
def rebase(
    branches: Path,
    base_power: float | None,
    busbars: Path | None,
    add: tuple[str, ...],
    out: Path | None,
    force: bool,
    form: str,
) -> int:
    """Carry a branch table to another system base and other busbar voltages."""
    from . import basechange as room
    from . import folder
    from .report import table_text

    table = room.read_branches(branches)
    volts = room.read_busbars(busbars) if busbars else None
    result = room.rebase(table, base_power, volts, add)
    if out is not None:
        folder.write_file(out, folder.csv_text(result), force)
        click.echo(f"{len(result)} branches written to {out}")
    else:
        _print(table_text(result), lambda: {"branches": result}, form)
    return 0


@main.command(short_help="Print a sheet to begin with.")
@click.argument("kind", type=click.Choice(["station", "sample", "feeder"]))
@click.option("--out", type=PATH, help="Write the sheet to this file instead of printing it.")
@_force
@_guarded
def start(kind: str, out: Path | None, force: bool) -> int:
    """Print a sheet to begin with.

    station: a commented sheet; sample: the sample substation; feeder: the sample feeder, with
    single-phase units.
    """
    from . import folder
    from .intake import fields, template

    folders = {"sample": "substation", "feeder": "feeder"}
    text = template.station()
    if kind in folders:
        sample = fields.resource("cases", folders[kind], "station.yaml")
        text = sample.read_text(encoding="utf-8")
    if out is None:
        click.echo(text, nl=False)
        return 0
    folder.write_file(out, text, force)
    click.echo(f"{out} written; replace its values, then: branchwright build {out} --out FOLDER")
    return 0
