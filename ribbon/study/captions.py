"""Captions and alternative texts of the figures: what is seen, and with which settings."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from ribbon.study.numbers import quantity
from ribbon.study.wording import conventions, gap_text, peak_current, subtitle

if TYPE_CHECKING:
    from ribbon.study.result import Case, StudyResult

__all__ = ["Caption", "caption"]


@dataclass(frozen=True)
class Caption:
    """Heading, caption and alternative text of one figure."""

    title: str
    text: str
    alternative: str


def caption(name: str, result: StudyResult) -> Caption:
    """The caption of the figure ``name``; a figure that is not known gets its name only."""
    write = {
        "ribbon": _ribbon,
        "levels": _levels,
        "flux": _flux,
        "currents": _currents,
        "shift": _shift,
    }.get(name)
    return Caption(name, "", f"Figure {name}") if write is None else write(result)


def _ribbon(result: StudyResult) -> Caption:
    topology = result.ribbon.topology
    glued = (
        "the arrows run against each other, so the ends are glued with a flip"
        if not topology.orientable
        else "the arrows run alike, so the ends are glued as they stand"
    )
    degrees = ", ".join(f"{n:,} with {d}" for d, n in sorted(topology.coordination.items()))
    return Caption(
        "The ribbon, laid flat",
        f"{subtitle(result)}. The ends are glued so that P meets P and Q meets Q: {glued}. The "
        "band spans the hard walls; dotted bonds cross the seam. Sites by number of bonds: "
        f"{degrees}.",
        f"Drawing of the flat ribbon with {topology.sites:,} sites and {topology.bonds:,} bonds; "
        f"{glued}.",
    )


def _levels(result: StudyResult) -> Caption:
    case = result.ribbon
    flux = f"{case.flux:g} flux quanta through the ribbon"
    beside = "; ".join(f"{c.label}: {gap_text(c.gap, c.levels.unit)}" for c in result.cases)
    return Caption(
        "Levels",
        f"Levels nearest to the gap at {flux}; heavy ticks are filled, light ones empty, broken "
        "ones partly filled. Degenerate levels stand side by side, or carry their number. "
        f"Shaded: the gap. {_held(result.cases)}",
        f"Level diagram. {beside}.",
    )


def _held(cases: tuple[Case, ...]) -> str:
    """How many levels were computed, and how they were certified."""
    parts = [
        f"{c.levels.m:,} of {c.network.n:,} ({c.levels.certificate.method}) for the {c.label}"
        for c in cases
    ]
    return "Levels computed: " + ", ".join(parts) + "."


def _flux(result: StudyResult) -> Caption:
    case = result.ribbon
    assert case.response is not None
    flux = np.asarray(case.response.flux)
    labels = ", ".join(c.label for c in result.cases if c.response is not None)
    return Caption(
        "Levels against flux",
        f"Levels nearest to the gap at {flux.size} fluxes from {flux.min():g} to {flux.max():g} "
        "h/e, joined through crossings along each state; the three tints only help the eye. "
        "Shaded: from the highest filled to the lowest empty level. A double cover is shown "
        "against the flux through the ribbon and carries twice as much.",
        f"Energy levels against flux in panels for {labels}.",
    )


def _currents(result: StudyResult) -> Caption:
    peaks = [(c, peak_current(c)) for c in result.cases]
    beside = "; ".join(
        f"{c.label}: up to {quantity(p.current, p.unit)}" for c, p in peaks if p is not None
    )
    return Caption(
        "Total current",
        f"Total current against the flux, and its Fourier amplitudes. {conventions(result)} Open "
        "marks: a shell cut by the filling is shared equally there, and the dotted line joins "
        "the values from either side (a band where that happens all along).",
        f"Total current against flux, with harmonics. {beside}.",
    )


def _shift(result: StudyResult) -> Caption:
    return Caption(
        "What the twist moved",
        "Levels of the ribbon minus those of the control, paired by their place counted from "
        "the gap (the order in the complete spectrum, not quantum numbers). A control with "
        "twice the sites has two levels for each; their mean is taken.",
        "Levels of ribbon and control side by side, and the difference for each level.",
    )
