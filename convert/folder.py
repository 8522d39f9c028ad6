"""The output folder: the contract's files, written whole or not at all, and read back."""

from __future__ import annotations

import hashlib
import json
import os
import shutil
import tempfile
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import pandas as pd

from .errors import BranchwrightError

RECORD = "record.json"
#: every file that a run may write, in the order of the contract
CONTRACT = (
    "branches.csv", "units.csv", "taps.csv", "zero_sequence.csv", "losses.csv", "network.json",
    "single_phase.json", "retest.csv", "regulation.csv", "findings.csv", RECORD,
)  # fmt: skip
_FORMULA_STARTS = ("=", "+", "-", "@", "\t", "'")


def csv_text(table: pd.DataFrame) -> str:
    """Return a table as CSV whose numbers read back as the same floats.

    Text that a spreadsheet would take for a formula gets an apostrophe in front.
    """
    escaped = table.copy()
    for column in escaped.select_dtypes(object).columns:
        escaped[column] = [
            _escaped(cell) if isinstance(cell, str) else cell for cell in escaped[column]
        ]
    return str(escaped.to_csv(index=False, lineterminator="\n"))


def _escaped(cell: str) -> str:
    """Mark text that a program would take for a formula, and keep it on one line."""
    cell = cell.replace("\r", " ")
    return f"'{cell}" if cell.startswith(_FORMULA_STARTS) else cell


def read_csv(path: Path) -> pd.DataFrame:
    """Read a table that `csv_text` wrote, text and floats as they were."""
    text = {"name", "from_busbar", "to_busbar", "certificate", "correction", "stage", "tap"}
    table = pd.read_csv(path, float_precision="round_trip", keep_default_na=False,
                        na_values={}, dtype=dict.fromkeys(text, str))  # fmt: skip
    for column in table.columns:
        if table[column].dtype == object and column not in text:
            table[column] = _numbers(table[column])
        if table[column].dtype == object:
            table[column] = table[column].str.replace(r"^'(?=[=+\-@\t'])", "", regex=True)
    return table


def _numbers(column: pd.Series[Any]) -> pd.Series[Any]:
    """Turn a column of numbers and empty cells into floats; leave text alone."""
    filled = column.replace("", None)
    try:
        return pd.Series([None if cell is None else float(cell) for cell in filled], dtype=float)
    except ValueError:
        return column


def sha256(path: Path) -> str:
    """Return the SHA-256 of a file."""
    return hashlib.sha256(path.read_bytes()).hexdigest()


def check_target(folder: Path, force: bool) -> None:
    """Refuse a folder that holds something, unless forced; nothing is changed."""
    if folder.exists() and not folder.is_dir():
        raise BranchwrightError([f"{folder}: is a file; name a folder for the output"])
    above = next(parent for parent in folder.resolve().parents if parent.exists())
    if not above.is_dir():
        raise BranchwrightError([f"{folder}: {above} is a file; nothing was written"])
    if folder.exists() and any(folder.iterdir()) and not force:
        raise BranchwrightError(
            [f"{folder}: is not empty; name another folder, or add --force to replace the "
             "files of an earlier run"]
        )  # fmt: skip


def write(folder: Path, files: Mapping[str, str], record: Mapping[str, Any], force: bool) -> None:
    """Write the files of a run.

    A new folder appears by one rename. In one that exists the contract's files are replaced by
    one rename each, record.json removed first and written last, so that a folder with a record
    is a whole one. After an error or an interrupt no new file is kept.
    """
    check_target(folder, force)
    folder = folder.resolve()
    fresh = not folder.exists()
    folder.parent.mkdir(parents=True, exist_ok=True)
    home = folder.parent if fresh else folder
    partial = Path(tempfile.mkdtemp(prefix=f".{folder.name}.partial-", dir=home))
    placed: list[Path] = []
    try:
        for name, text in files.items():
            (partial / name).write_text(text, encoding="utf-8", newline="\n")
        hashes = {name: sha256(partial / name) for name in files}
        body = json.dumps({**record, "outputs": hashes}, ensure_ascii=False, indent=1)
        (partial / RECORD).write_text(body + "\n", encoding="utf-8", newline="\n")
        partial.chmod(0o755)
        if fresh:
            partial.rename(folder)
        else:
            _replace(partial, folder, files, placed)
    except BaseException:
        for path in placed:
            path.unlink(missing_ok=True)
        raise
    finally:
        shutil.rmtree(partial, ignore_errors=True)


def _replace(partial: Path, folder: Path, files: Mapping[str, str], placed: list[Path]) -> None:
    """Move the files into a folder that exists, noting those that stand where none was."""
    (folder / RECORD).unlink(missing_ok=True)
    for name in (*CONTRACT[:-1], RECORD):
        if name in files or name == RECORD:
            if not (folder / name).exists():
                placed.append(folder / name)
            (partial / name).replace(folder / name)
        else:
            (folder / name).unlink(missing_ok=True)


def write_file(path: Path, text: str, force: bool) -> None:
    """Write one file by a temporary one and a rename; an existing one only if forced."""
    if path.exists() and not force:
        raise BranchwrightError([f"{path}: exists; name another file, or add --force"])
    if not path.parent.is_dir():
        raise BranchwrightError([f"{path}: the folder {path.parent} does not exist"])
    handle, partial = tempfile.mkstemp(prefix=f".{path.name}.partial-", dir=path.parent)
    try:
        with os.fdopen(handle, "w", encoding="utf-8", newline="\n") as out:
            out.write(text)
        Path(partial).chmod(0o644)
        Path(partial).replace(path)
    finally:
        Path(partial).unlink(missing_ok=True)


def read_record(folder: Path, edited: bool) -> dict[str, Any]:
    """Read record.json and hold the files against its hashes, unless they may be edited."""
    path = folder / RECORD
    try:
        record: dict[str, Any] = json.loads(path.read_text(encoding="utf-8"))
        outputs = dict(record["outputs"])
    except FileNotFoundError:
        raise BranchwrightError(
            [f"{path}: not found; name a folder that build has written"]
        ) from None
    except (OSError, ValueError, KeyError, TypeError):
        raise BranchwrightError([f"{path}: is no record that build has written"]) from None
    unnamed = [name for name in CONTRACT[:-1] if name not in outputs and (folder / name).exists()]
    if unnamed and not edited:
        raise BranchwrightError([f"{folder / name}: {RECORD} does not name it" for name in unnamed])
    missing = [name for name in outputs if not (folder / name).is_file()]
    if missing:
        raise BranchwrightError(
            [f"{folder / name}: missing, though {RECORD} names it" for name in missing]
        )
    changed = [name for name, digest in outputs.items() if sha256(folder / name) != digest]
    if changed and not edited:
        raise BranchwrightError(
            [f"{folder / name}: changed since it was written (SHA-256 differs from {RECORD}); "
             "build again, or add --edited to prove the files as they are" for name in changed]
        )  # fmt: skip
    return record
