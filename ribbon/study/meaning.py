"""What the numbers of a study say, in plain sentences."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from ribbon.analysis.levels import tolerance
from ribbon.study.findings import state_sentences
from ribbon.study.numbers import quantity
from ribbon.study.wording import brim, energy_text, filling_text, gap_size, peak_current

if TYPE_CHECKING:
    from ribbon.analysis import HalfQuantum
    from ribbon.study.result import Case, StudyResult

__all__ = ["meaning"]

ALIKE = 1e-6
"""Currents that differ by less than this part of the largest one repeat."""


def meaning(result: StudyResult) -> tuple[str, ...]:
    """What the numbers at the top say, in plain sentences."""
    sentences = [_shape_sentence(result.ribbon), _gap_sentence(result)]
    sentences += [_control_sentence(result.ribbon, control) for control in result.controls]
    if result.ribbon.other_gap is not None:
        sentences.append(_sign_sentence(result))
    sentences += _current_sentences(result)
    sentences += state_sentences(result)
    sentences.append(_trust_sentence(result))
    return tuple(sentences)


def _shape_sentence(case: Case) -> str:
    topology, network = case.topology, case.network
    if topology.faces == 0 and topology.boundary_loops == 1:
        return (
            "The ribbon is a single chain without width: a half twist shows in nothing but the "
            "sign of the orbital."
        )
    length = getattr(network, "circumference", None)
    if topology.boundary_loops == 1 and not topology.orientable:
        twice = "" if length is None else f" ({2 * length:.4g} nm along the midline)"
        return (
            f"The ribbon has a single edge, which runs round twice{twice} before it closes: the "
            "surface is one-sided."
        )
    sides = "two-sided" if topology.orientable else "one-sided"
    if topology.boundary_loops is None:
        return f"The surface is {sides}."
    holes = topology.boundary_loops - (2 if topology.orientable else 1)
    extra = f", {holes} of them around holes or loose ends" if holes > 0 else ""
    return f"The ribbon has {topology.boundary_loops} closed edges{extra}: the surface is {sides}."


def _gap_sentence(result: StudyResult) -> str:
    case = result.ribbon
    if case.gap.open_shell:
        return (
            f"With {filling_text(case)} the last shell at {energy_text(case.gap.lower, case)} "
            "is only partly filled: there is no gap."
        )
    if np.isnan(case.gap.gap):
        return f"With {filling_text(case)} there is no gap to speak of: {brim(case.gap)}."
    return (
        f"With {filling_text(case)} the highest filled level lies "
        f"{quantity(case.gap.gap, case.levels.unit)} below the lowest empty one."
    )


def _control_sentence(case: Case, control: Case) -> str:
    change = case.gap.gap - control.gap.gap
    unit = case.levels.unit
    if np.isnan(change):
        return f"The {control.label} has {_control_gap(control, unit)}."
    start = f"The {control.label} has {_control_gap(control, unit)}"
    alike = case.gap.open_shell == control.gap.open_shell
    if alike and abs(change) <= tolerance(case.hamiltonian):
        return f"{start}, the same as the ribbon."
    more = "larger" if change > 0 else "smaller"
    return f"{start}; the gap of the ribbon is {quantity(abs(change), unit)} {more}."


def _control_gap(case: Case, unit: str) -> str:
    if np.isnan(case.gap.gap):
        return f"no gap to speak of ({brim(case.gap)})"
    size = f"a gap of {gap_size(case.gap, unit)}"
    return "an open shell and no gap" if case.gap.open_shell else size


def _sign_sentence(result: StudyResult) -> str:
    case = result.ribbon
    assert case.other_gap is not None
    own = f'"{result.file.ribbon.orbital}"'
    gap = case.other_gap
    none = gap.open_shell or np.isnan(gap.gap)
    other = "no gap" if none else f"a gap of {gap_size(gap, case.levels.unit)}"
    return (
        f"All this holds for orbitals of the kind {own}; with the other sign under the flip the "
        f"same ribbon has {other}."
    )


def _current_sentences(result: StudyResult) -> list[str]:
    case = result.ribbon
    found = []
    peak = peak_current(case)
    if peak is not None and not peak.current:
        found.append("The total current vanishes at every flux of the sweep.")
    elif peak is not None and case.response is not None:
        others = [(c, peak_current(c)) for c in result.controls]
        beside = "; ".join(
            f"{quantity(abs(p.current), p.unit)} in the {c.label}" for c, p in others if p
        )
        beside = f" ({beside})" if beside else ""
        found.append(
            f"Of {np.size(case.response.flux)} fluxes the current is largest at {peak.flux:.4g} "
            f"flux quanta: {quantity(abs(peak.current), peak.unit)}{beside}."
        )
    if case.half is not None:
        found.append(_period_sentence(case, case.half))
    return found


def _period_sentence(case: Case, half: HalfQuantum) -> str:
    size = quantity(half.difference, case.levels.unit, 3)
    if half.holds:
        return (
            f"Half a flux quantum more leaves every level where it was (to {size}): the period is "
            "half a flux quantum."
        )
    start = f"Half a flux quantum more moves levels by up to {size}: the period is h/e"
    totals = None if case.response is None else case.response.totals
    if totals is not None and half.current_difference is not None:
        largest = float(np.abs(totals.slope).max())
        if half.current_difference <= ALIKE * largest:
            return f"{start} for the levels, though the total current repeats after half of it."
    return f"{start}."


def _trust_sentence(result: StudyResult) -> str:
    failed = [check.name for check in result.checks if not check.passed]
    if failed:
        return (
            f"{len(failed)} of {len(result.checks)} checks failed ({', '.join(failed)}): "
            "do not rely on these numbers before you know why."
        )
    certificate = result.ribbon.levels.certificate
    if certificate.complete:
        return (
            f"All {len(result.checks)} checks passed, and a count shows that no level is missing."
        )
    return f"All {len(result.checks)} checks passed; the count of levels is not complete."
