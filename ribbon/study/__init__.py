"""The study room: ribbon files, runs, stored results, figures and the report."""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from ribbon.study.folder import write_folder
    from ribbon.study.result import Case, Check, StudyResult
    from ribbon.study.ribbonfile import RibbonFile, read_study
    from ribbon.study.run import run_study
    from ribbon.study.store import read_results

_HOME = {
    "Case": "result",
    "Check": "result",
    "RibbonFile": "ribbonfile",
    "StudyResult": "result",
    "read_results": "store",
    "read_study": "ribbonfile",
    "run_study": "run",
    "write_folder": "folder",
}

__all__ = [
    "Case",
    "Check",
    "RibbonFile",
    "StudyResult",
    "read_results",
    "read_study",
    "run_study",
    "write_folder",
]


def __getattr__(name: str) -> object:
    """Load a public name from its module when it is first asked for."""
    if name not in _HOME:
        raise AttributeError(f"module 'ribbon.study' has no attribute {name!r}")
    return getattr(import_module(f"ribbon.study.{_HOME[name]}"), name)
