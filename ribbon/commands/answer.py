"""What the computing verbs share: deliver a table, and say whether it can be trusted."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

from ribbon.commands.output import emit, json_text, note, write_texts
from ribbon.errors import NotCertified

if TYPE_CHECKING:
    from ribbon.study.result import StudyResult
    from ribbon.study.ribbonfile import RibbonFile
    from ribbon.study.tables import Table

__all__ = ["deliver", "heading", "judge", "known", "load", "trust"]


def load(file: Path, overrides: Sequence[str] | None) -> RibbonFile:
    """Read the ribbon file of a command line."""
    from ribbon.study.ribbonfile import read_study

    return read_study(file, overrides=overrides or ())


def known(work: Callable[[], StudyResult]) -> tuple[StudyResult, NotCertified | None]:
    """Run, and keep what is known when the answer could not be certified."""
    try:
        return work(), None
    except NotCertified as doubt:
        if not hasattr(doubt.partial, "cases"):
            raise
        return doubt.partial, doubt  # type: ignore[return-value]  # a StudyResult, by its cases


def deliver(
    table: Table,
    story: Mapping[str, Any],
    *,
    files: Mapping[Path, Table],
    as_json: bool,
    quiet: bool,
) -> None:
    """Write ``files``; then print the whole story as JSON, or ``table`` if it went to no file."""
    write_texts({path: entry.to_csv() for path, entry in files.items()})
    if as_json:
        emit(json_text(story))
    elif table not in files.values():
        emit(table.to_csv())
    # only now, so that a failure above is the one line on stderr
    for path in files:
        note(f"{path} is written", quiet=quiet)
    for line in story["notes"]:
        note(f"note: {line}", quiet=quiet)


def heading(result: StudyResult) -> dict[str, Any]:
    """What a JSON answer begins with."""
    return {"title": result.title, "unit": result.file.hopping.unit}


def trust(result: StudyResult) -> dict[str, Any]:
    """What a JSON answer ends with."""
    return {"checks": result.checks, "notes": result.notes}


def judge(result: StudyResult, doubt: NotCertified | None) -> None:
    """Raise `NotCertified` when the answer that was just written cannot be vouched for."""
    if doubt is not None:
        raise doubt
    failed = [check for check in result.checks if not check.passed]
    if failed:
        worst = "; ".join(f"{c.name} ({c.value:.3g} above {c.limit:.3g})" for c in failed)
        raise NotCertified(f"{len(failed)} of {len(result.checks)} checks failed: {worst}", result)
