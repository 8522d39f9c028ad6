"""branches.csv read by its published description alone: the 2x2 nodal admittance of every row.

Shares no line with the project. A row is an ideal transformer t at the from terminals, whose other
side carries a T of legs and shunt, or for `cantilever` the shunt and then r + jx; all in per unit
of base_mva and base_kv_to. `to` lags `from` by t's angle.
"""

import csv
from cmath import pi, rect
from pathlib import Path
from typing import NamedTuple


class Branch(NamedTuple):
    """A row: name, busbars, base [MVA; kV from, to], and Y in per unit (from, to)."""

    name: str
    ends: tuple[str, str]
    base: tuple[float, float, float]
    y: list[list[complex]]


def admittance(row: dict[str, str]) -> list[list[complex]]:
    r, x, g, b = (float(row[f"{part}_pu"]) for part in "rxgb")
    shares = [float(row["r_share_from"]), float(row["x_share_from"])]
    if row["model"] == "cantilever":
        shares = [0.0, 0.0]
    z_from = complex(r * shares[0], x * shares[1])
    z_to = complex(r, x) - z_from
    y_m = complex(g, b)
    # V1 = A V2 + B I2, I1 = C V2 + D I2 of the T; AD - BC = 1 gives the transfer admittance
    a, d = 1 + z_from * y_m, 1 + z_to * y_m
    transfer = 1 / (z_from + z_to + z_from * z_to * y_m)
    t = rect(float(row["ratio_pu"]), pi * float(row["shift_deg"]) / 180)
    return [
        [d * transfer / abs(t) ** 2, -transfer / t.conjugate()],
        [-transfer / t, a * transfer],
    ]


def read(path: Path) -> list[Branch]:
    with path.open(encoding="utf-8", newline="") as handle:
        rows = list(csv.DictReader(handle))
    return [
        Branch(
            row["name"],
            (row["from_busbar"], row["to_busbar"]),
            (float(row["base_mva"]), float(row["base_kv_from"]), float(row["base_kv_to"])),
            admittance(row),
        )
        for row in rows
    ]
