"""The report: one HTML page that holds everything and asks for nothing from outside."""

from __future__ import annotations

import json
import re
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from importlib.resources import files
from typing import TYPE_CHECKING, Any

import numpy as np

from ribbon.study.captions import caption
from ribbon.study.meaning import meaning
from ribbon.study.numbers import number
from ribbon.study.ribbonfile import complete_toml
from ribbon.study.state_tables import continuum_shift_table, continuum_table, edges_table
from ribbon.study.tables import (
    Table,
    checks_table,
    harmonics_table,
    levels_table,
    shift_table,
    topology_table,
    totals_table,
)
from ribbon.study.wording import comparison, conventions, facts, subtitle

if TYPE_CHECKING:
    from markupsafe import Markup

    from ribbon.study.result import Case, StudyResult

__all__ = ["inline_svg", "render_report"]

QUIET = 1e-12
"""Numbers below this part of the largest of their column are rounding and shown as 0."""

MOST_ROWS = 40
"""A table of the page shows so many rows at most; the CSV file holds all."""


@dataclass(frozen=True)
class _Shown:
    """A table as the page shows it."""

    name: str
    about: str
    heads: tuple[str, ...]
    rows: tuple[tuple[str, ...], ...]
    note: str
    csv: str


def render_report(result: StudyResult, figures: Mapping[str, str]) -> str:
    """Write the page; ``figures`` maps the name of each figure to its SVG text.

    Texts from the study are escaped; only the drawings go in as they are, without their
    metadata and with identifiers of their own.
    """
    from jinja2 import Environment, StrictUndefined

    source = files("ribbon.study").joinpath("report.html.j2").read_text(encoding="utf-8")
    page = Environment(
        autoescape=True, trim_blocks=True, lstrip_blocks=True, undefined=StrictUndefined
    ).from_string(source)
    return page.render(
        title=result.title,
        subtitle=subtitle(result),
        facts=facts(result),
        meaning=meaning(result),
        comparison=comparison(result),
        conventions=conventions(result),
        figures=[_figure(name, svg, result) for name, svg in figures.items()],
        tables=list(_tables(result)),
        checks=_shown(checks_table(result.checks), limit=len(result.checks), quiet=0.0),
        passed=sum(check.passed for check in result.checks),
        notes=result.notes,
        input=complete_toml(result.file),
        facts_of_run=_provenance(result),
        colours=_colours(),
    )


def _figure(name: str, svg: str, result: StudyResult) -> dict[str, Any]:
    said = caption(name, result)
    return {"name": name, "caption": said, "svg": inline_svg(svg, name, said.alternative)}


def inline_svg(svg: str, name: str, alternative: str) -> Markup:
    """An SVG file made fit to stand inside a page.

    The prologue, the metadata and the fixed size go; identifiers get ``name`` in front, so that
    several drawings do not share one; colours become variables, so that a dark page can turn
    them.
    """
    from markupsafe import Markup, escape

    body = svg[svg.index("<svg") :]
    body = re.sub(r"<metadata>.*?</metadata>", "", body, flags=re.DOTALL)
    body = re.sub(r"<!--.*?-->\n?", "", body, flags=re.DOTALL)
    body = re.sub(r'(?<=[\s"])id="', f'id="{name}-', body)
    body = re.sub(r'href="#', f'href="#{name}-', body)
    body = body.replace("url(#", f"url(#{name}-")
    body = re.sub(r"#[0-9a-f]{6}\b", _variable, body)
    head, rest = body.split(">", 1)
    head = re.sub(r'\s(width|height)="[^"]*"', "", head)
    return Markup(f'{head} role="img" aria-label="{escape(alternative)}">{rest}')


def _variable(found: re.Match[str]) -> str:
    colour = found.group()
    return f"var(--c{colour[1:]},{colour})" if colour in dict(_colours()) else colour


def _colours() -> list[tuple[str, str]]:
    """Colours of the drawings on paper and on a dark page."""
    from ribbon.study.figures.look import DARK

    return list(DARK.items())


def _tables(result: StudyResult) -> Iterator[_Shown]:
    unit = result.ribbon.levels.unit
    yield _shown(topology_table(result.cases))
    control = result.nearest_control
    if control is not None:
        yield _near_gap(shift_table(result.ribbon, control), "from_gap", 0.0)
    for case in result.cases:
        filled = case.electrons / case.spin - 0.5
        yield _near_gap(levels_table(case, unit), "level", filled)
    for case in result.cases:
        yield from _response_tables(case, unit)
    for case in result.cases:
        filled = case.electrons / case.spin - 0.5
        if case.edges is not None:
            yield _near_gap(edges_table(case), "level", filled)
        if case.continuum is not None and case.continuum.holds.any():
            yield _shown(_where_it_holds(case))
    for control in result.controls:
        if control.continuum_shift is not None:
            yield _shown(continuum_shift_table(result.ribbon, control))


def _where_it_holds(case: Case) -> Table:
    """Rows of the continuum table for which the formula is meant, and there are any."""
    table = continuum_table(case)
    chosen = np.asarray(table.columns["holds"])
    columns = {name: np.asarray(values)[chosen] for name, values in table.columns.items()}
    return Table(table.name, columns, table.units, table.about)


def _response_tables(case: Case, unit: str) -> Iterator[_Shown]:
    if case.response is not None and case.response.totals is not None:
        yield _shown(totals_table(case, unit))
    if case.harmonics is not None:
        yield _shown(harmonics_table(case, unit))


def _near_gap(table: Table, column: str, middle: float) -> _Shown:
    """The rows nearest to the gap, in their order."""
    distance = np.abs(np.asarray(table.columns[column], dtype=float) - middle)
    near = np.sort(np.argsort(distance, kind="stable")[:MOST_ROWS])
    columns = {name: np.asarray(values)[near] for name, values in table.columns.items()}
    part = Table(table.name, columns, table.units, table.about)
    return _shown(part, total=table.rows, which="nearest to the gap")


def _shown(
    table: Table, *, limit: int = MOST_ROWS, total: int | None = None, which: str = "the first",
    quiet: float = QUIET,
) -> _Shown:  # fmt: skip
    part = table.head(limit)
    total = table.rows if total is None else total
    note = f"All rows and digits: tables/{table.name}.csv"
    if part.rows < total:
        note = f"{part.rows} of {total:,} rows, {which}. {note}"
    heads = tuple(
        f"{_plain_words(name)} ({table.units[name]})"
        if table.units.get(name)
        else _plain_words(name)
        for name in part.columns
    )
    columns = [_texts(values, quiet) for values in part.columns.values()]
    rows = tuple(zip(*columns, strict=True))
    return _Shown(table.name, table.about, heads, rows, note, part.to_csv())


def _plain_words(name: str) -> str:
    return name.replace("_", " ")


def _texts(column: Any, quiet: float) -> list[str]:
    """A column as texts; floats below the part ``quiet`` of its largest are rounding: 0."""
    values = np.asarray(column).tolist()
    size = max((abs(v) for v in values if isinstance(v, float) and np.isfinite(v)), default=0.0)
    return ["0" if isinstance(v, float) and abs(v) < quiet * size else _text(v) for v in values]


def _text(value: object) -> str:
    if value is None or (isinstance(value, float) and np.isnan(value)):
        return ""
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, float):
        return number(value, 6)
    return str(value).replace("-", "−") if isinstance(value, int) else str(value)


def _provenance(result: StudyResult) -> list[tuple[str, str]]:
    """What is known of the run, as pairs of texts."""
    rows = []
    for key, value in result.provenance.items():
        if isinstance(value, Mapping):
            rows += [(f"{_plain_words(str(inner))}", str(entry)) for inner, entry in value.items()]
        elif isinstance(value, str | int | float):
            rows.append((_plain_words(str(key)), str(value)))
        elif key != "checks":
            rows.append((_plain_words(str(key)), json.dumps(value, default=str)))
    rows += [(f"time for {name}", f"{spent:.2f} s") for name, spent in result.seconds.items()]
    return rows
