"""Brasscap: reduce, adjust, test and diagnose survey networks from plain tables.

The public names are loaded when they are first used, so that importing the package costs nothing.
"""

from __future__ import annotations

TYPE_CHECKING = False  # typing itself would take longer to load than --help runs; checkers know the name

__version__ = "0.1.0"
__all__ = ["Job", "Judgement", "Network", "Solution", "__version__", "assess", "check", "read", "solve", "write"]

_HOME = {
    "read": "adjust.book.read", "Job": "adjust.book.job", "Network": "adjust.network",
    "solve": "adjust.judge.solved", "check": "adjust.judge.check", "Solution": "adjust.solver.solution",
    "assess": "adjust.judge.assess", "Judgement": "adjust.judge.assess", "write": "adjust.record.write",
}  # fmt: skip

if TYPE_CHECKING:
    from typing import Any

    from adjust.book.job import Job
    from adjust.book.read import read
    from adjust.judge.assess import Judgement, assess
    from adjust.judge.check import check
    from adjust.judge.solved import solve
    from adjust.network import Network
    from adjust.record.write import write
    from adjust.solver.solution import Solution


def __getattr__(name: str) -> Any:
    if name not in _HOME:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    import importlib

    value = getattr(importlib.import_module(_HOME[name]), name)
    globals()[name] = value
    return value


def __dir__() -> list[str]:
    return sorted(__all__)
