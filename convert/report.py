"""What is printed: plain tables of at most 100 columns, and the same as data."""

from __future__ import annotations

import json
import math
import textwrap
from collections.abc import Iterator, Mapping, Sequence
from pathlib import Path
from typing import Any

import pandas as pd

from . import filecheck, proof
from .errors import Finding, Severity
from .study import CAUTION, Study, error_line

WIDTH = 100
#: more units than this are summed up rather than listed
MOST_LISTED = 12


def study_text(study: Study, target: Path | None, written: Sequence[str]) -> str:
    """Return the page printed after a build."""
    system = study.plant.system
    blocks = [
        f"{len(study.branches)} branches on {system.base_power / 1e6:g} MVA, "
        f"{system.frequency:g} Hz, circuit {study.model}"
    ]
    blocks += [branch_text(study.branches)] if len(study.branches) <= MOST_LISTED else []
    blocks.append(findings_text(study.problems))
    blocks.append(proof_text(study.retest, study.regulation))
    blocks.append(f"Findings: {_counts(study.problems)}; read them before use.")
    if target is not None:
        blocks.append(_wrap(f"Files in {target}: " + ", ".join(written)))
    blocks.append(_wrap(CAUTION))
    blocks += _left_out(study.left_out)
    return "\n\n".join(blocks)


def branch_text(branches: pd.DataFrame) -> str:
    """Return the branch table: where it runs, and its per-unit values."""
    ends = [
        (_short(b.name, 16), _short(b.from_busbar, 16), _short(b.to_busbar, 16),
         f"{b.rated_mva:g}", f"{b.rated_kv_from:g}/{b.rated_kv_to:g}", f"{b.shift_deg:g}", b.status)
        for b in _rows(branches)
    ]  # fmt: skip
    values = [
        (_short(b.name, 16), f"{b.base_mva:g}", _number(b.r_pu), _number(b.x_pu), _number(b.g_pu),
         _number(b.b_pu), _number(b.ratio_pu), f"{b.winding_temp_degc:g}")
        for b in _rows(branches)
    ]  # fmt: skip
    return "\n".join(
        [
            *grid(("unit", "from", "to", "rated MVA", "rated kV", "shift °", "status"), ends),
            "",
            *grid(("unit", "base MVA", "r pu", "x pu", "g pu", "b pu", "ratio pu", "°C"), values),
        ]
    )


def proof_text(retest: pd.DataFrame, regulation: pd.DataFrame) -> str:
    """Return the proof: the re-run of the tests, regulation, and the verdict."""
    lines = ["Tests re-run on the network read back from its file:", *_retest_lines(retest)]
    lines += ["", *_regulation_lines(regulation), "", verdict_line(retest, regulation)]
    return "\n".join(lines)


def _retest_lines(retest: pd.DataFrame) -> Iterator[str]:
    """Expected and re-run readings unit by unit, then the plain load flow of each file."""
    flows = retest["unit"] == "count"
    shown = retest["name"].isin(_first(retest["name"])) | (retest["verdict"] == "fail")
    # what drives a test, and the branch table, are shown where they fail
    given = retest["quantity"].str.endswith("applied") | (retest["test"] == filecheck.BRANCH_TABLE)
    given &= retest["verdict"] == "pass"
    listed = _rows(retest[shown & ~flows & ~given])
    head, *body = grid(
        ("state", "test", "quantity", "certificate", "expected", "re-run", "diff %", "verdict"),
        [
            (r.state, r.test, r.quantity, _short(r.certificate, 12),
             _reading(r.expected, r.unit), _reading(r.retest, r.unit),
             f"{r.difference_percent:.0e}", r.verdict)
            for r in listed
        ],
    )  # fmt: skip
    yield head
    unit = None
    for row, line in zip(listed, body, strict=False):
        if row.name != unit:
            unit = row.name
            yield f"{unit}:"
        yield line
    for row in _rows(retest[flows]):
        yield f"{row.name}: plain load flow, {row.retest:g} busbars without volts: {row.verdict}"


def _regulation_lines(regulation: pd.DataFrame) -> Iterator[str]:
    """Full-load regulation by hand beside the load flow's; every point is in regulation.csv."""
    top = regulation["load_fraction"].max()
    full = (regulation["load_fraction"] == top) & regulation["name"].isin(
        _first(regulation["name"])
    )
    shown = regulation[full | (regulation["verdict"] == "fail")]
    yield f"Regulation and drop in % at {100 * top:g} % load, by hand and by load flow:"
    rows = [
        (_short(r.name, 14), f"{r.power_factor:g} {r.sense}" + _load(r.load_fraction, top),
         r.method, f"{r.hand_percent:.6f}", f"{r.flow_percent:.6f}", f"{r.difference_points:+.1e}",
         f"{r.bound_points:.1e}", r.verdict)
        for r in _rows(shown)
    ]  # fmt: skip
    yield from grid(
        ("unit", "cosφ", "method", "hand", "load flow", "difference", "bound", "verdict"), rows
    )
    rest = len(regulation) - len(rows)
    if rest > 0:
        yield f"{rest} more points in regulation.csv"


def _load(fraction: float, top: float) -> str:
    """The load of a row that is not at the heading's."""
    return "" if fraction == top else f" {100 * fraction:g} %"


def verdict_line(retest: pd.DataFrame, regulation: pd.DataFrame) -> str:
    """Return the proof in one sentence."""
    worst = proof.summary(retest, regulation)
    read, reads = proof.verdicts(retest)
    held, points = proof.verdicts(regulation)
    use = ", ".join(
        f"{name.removeprefix('bound_use_')} {100 * value:.2g} %"
        for name, value in worst.items()
        if name.startswith("bound_use")
    )
    verdict = "PASS" if (read, held) == (reads, points) else "FAIL"
    return _wrap(
        f"Proof {verdict}: {read} of {reads} checks agree, worst difference "
        f"{worst['retest_worst_percent']:.1e} % (limit {100 * filecheck.TOLERANCE:.0e} %); "
        f"{held} of {points} regulation points within their bound (largest use: {use})."
    )


def findings_text(findings: Sequence[Finding]) -> str:
    """Return the findings, the worst kind first, each a wrapped paragraph."""
    if not findings:
        return "No findings."
    lines = []
    for severity in Severity:
        for finding in findings:
            if finding.severity is severity:
                text = f"{severity.value}: {finding.rule}: {error_line(finding)}"
                source = f" [{finding.source}]" if finding.source else ""
                lines.append(_wrap(text + source, hang="    "))
    return "\n".join(lines)


def check_text(findings: Sequence[Finding], units: int, left_out: Sequence[str]) -> str:
    """Return what `check` prints."""
    can = f"{units} unit{'s' * (units != 1)} can be built: {_counts(findings)}."
    blocks = [findings_text(findings), can, *_left_out(left_out)]
    return "\n\n".join(blocks)


def _counts(findings: Sequence[Finding]) -> str:
    """Return how many findings there are of each severity."""
    counts = {s: sum(f.severity is s for f in findings) for s in Severity}
    return ", ".join(f"{n} {severity.value}{'s' * (n != 1)}" for severity, n in counts.items())


def _left_out(names: Sequence[str]) -> list[str]:
    if not names:
        return []
    more = f" and {len(names) - MOST_LISTED} more" if len(names) > MOST_LISTED else ""
    return [_wrap(f"Left out, see the errors above: {', '.join(names[:MOST_LISTED])}{more}")]


def table_text(table: pd.DataFrame) -> str:
    """Return any table, its columns in blocks that fit the width, the first column in each."""
    cells = {name: [_short(_cell(value), 40) for value in table[name]] for name in table.columns}
    first, *others = cells
    lead = max(len(first), *(len(text) for text in cells[first]), 0)
    blocks: list[list[str]] = [[]]
    room = WIDTH - lead
    for name in others:
        size = 2 + max(len(name), *(len(text) for text in cells[name]), 0)
        if size > room and blocks[-1]:
            blocks.append([])
            room = WIDTH - lead
        blocks[-1].append(name)
        room -= size
    texts = [
        "\n".join(
            grid((first, *names), list(zip(*(cells[n] for n in (first, *names)), strict=True)))
        )
        for names in blocks
    ]
    return "\n\n".join(texts)


def json_text(data: Mapping[str, Any]) -> str:
    """Return data as JSON; tables become lists of rows, a number that is none becomes null."""
    return json.dumps(
        {key: _data(value) for key, value in data.items()}, ensure_ascii=False, indent=1
    )


def study_data(study: Study) -> dict[str, Any]:
    """Return what `build --format json` prints."""
    return {**study.tables(), "proof": proof_data(study.retest, study.regulation),
            "left_out": study.left_out, "caution": CAUTION}  # fmt: skip


def proof_data(retest: pd.DataFrame, regulation: pd.DataFrame) -> dict[str, Any]:
    """Return the proof's verdict and residuals."""
    passed, total = proof.verdicts(retest, regulation)
    verdict = "pass" if passed == total else "fail"
    return {"verdict": verdict, "passed": passed, "rows": total,
            **proof.summary(retest, regulation)}  # fmt: skip


def _data(value: Any) -> Any:
    if isinstance(value, pd.DataFrame):
        return [
            {str(key): _data(cell) for key, cell in row.items()}
            for row in value.to_dict(orient="records")
        ]
    if isinstance(value, dict):
        return {key: _data(cell) for key, cell in value.items()}
    if isinstance(value, float) and not math.isfinite(value):
        return None
    return value


def grid(head: Sequence[str], rows: Sequence[Sequence[str]]) -> list[str]:
    """Return aligned lines: columns of numbers to the right, text to the left."""
    if not rows:
        return ["  ".join(head).rstrip()]
    columns = list(zip(*rows, strict=True))
    right = [all(_is_number(cell) for cell in column) for column in columns]
    sizes = [max(len(h), *map(len, column)) for h, column in zip(head, columns, strict=True)]
    lines = []
    for row in (head, *rows):
        cells = [
            cell.rjust(size) if to_right else cell.ljust(size)
            for cell, size, to_right in zip(row, sizes, right, strict=True)
        ]
        lines.append("  ".join(cells).rstrip())
    return lines


def _is_number(cell: str) -> bool:
    try:
        float(cell)
    except ValueError:
        return cell == ""
    return True


def _rows(table: pd.DataFrame) -> list[Any]:
    return list(table.itertuples(index=False))


def _first(names: pd.Series[Any]) -> list[Any]:
    return list(dict.fromkeys(names))[:MOST_LISTED]


def _short(text: str, size: int) -> str:
    return text if len(text) <= size else text[: size - 1] + "…"


def _number(value: float, digits: int = 6) -> str:
    return f"{value:.{digits}g}"


def _reading(value: float, unit: str) -> str:
    return f"{value:.4f} {unit}" if unit == "deg" else f"{_number(value, 7)} {unit}"


def _cell(value: Any) -> str:
    if isinstance(value, float):
        return "" if math.isnan(value) else _number(value)
    return str(value)


def _wrap(text: str, hang: str = "") -> str:
    return textwrap.fill(text, WIDTH, subsequent_indent=hang, break_on_hyphens=False)
