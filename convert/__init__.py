"""Transformer test certificates to proven per-unit branches and pandapower entries.

>>> from convert import build, read                                   # doctest: +SKIP
>>> study = build(read("cases/substation/station.yaml"))              # doctest: +SKIP
>>> study.branches, study.findings, study.network                     # doctest: +SKIP

The names below load their parts when first used, so that `branchwright --help` stays light.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from .basechange import rebase
    from .errors import BranchwrightError, Finding
    from .intake.sheet import read
    from .plant import Plant
    from .study import Study, build, prove

_HOME = {
    "BranchwrightError": ".errors",
    "Finding": ".errors",
    "Plant": ".plant",
    "Study": ".study",
    "build": ".study",
    "prove": ".study",
    "read": ".intake.sheet",
    "rebase": ".basechange",
}
__all__ = ["BranchwrightError", "Finding", "Plant", "Study", "build", "prove", "read", "rebase"]


def __getattr__(name: str) -> Any:
    if name not in _HOME:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    return getattr(import_module(_HOME[name], __name__), name)


def __dir__() -> list[str]:
    return __all__
