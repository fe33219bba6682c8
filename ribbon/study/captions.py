"""Captions and alternative texts of the figures: what is seen, and with which settings."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from ribbon.study.findings import (
    at_the_edge,
    percent,
    spacing_for_percent,
    spread,
    strongest_edge_state,
)
from ribbon.study.numbers import quantity
from ribbon.study.wording import conventions, energy_text, gap_text, peak_current, subtitle

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
        "space": _space,
        "edge-state": _edge_state,
        "edges": _edges,
        "density": _density,
        "continuum": _continuum,
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


def _space(result: StudyResult) -> Caption:
    topology, ring = result.ribbon.topology, result.ribbon.hamiltonian.ring
    loops = topology.boundary_loops
    edges = "" if loops is None else f" Heavy lines: the {loops} closed edge{'s' * (loops != 1)}."
    sides = "one side" if not topology.orientable else "two sides"
    turn = "" if ring is None else f", turned evenly by {ring.half_twists} × 180° on the way round"
    return Caption(
        "The ribbon in space",
        f"The same sites and bonds on a band with a circular midline{turn}. Its two faces have "
        f"two tints; the surface has {sides}.{edges} The band is for the eye: lengths of bonds "
        "and angles are not those of a molecule, and no number of this study depends on it.",
        f"The ribbon as a closed band in space with {sides}.",
    )


def _edge_state(result: StudyResult) -> Caption:
    case = result.ribbon
    assert case.edges is not None
    best = strongest_edge_state(case)
    energy = energy_text(float(case.edges.energy[best]), case)
    weight = percent(float(case.edges.edge_weight[best]))
    loops = [loop for loop in case.edges.loops if loop.is_edge]
    long = f", {loops[0].length:.4g} nm" if loops else ""
    twice = " (twice round)" if loops and loops[0].winding == 2 else ""
    return Caption(
        "The strongest edge state",
        f"Level {case.edges.level[best]} at {energy}: {weight} of its probability lies within "
        f"{case.edges.within:.3g} nm of an edge. Flat, in space, and along the unrolled edge"
        f"{long}{twice}, where the sign of the orbital is carried along at every crossing of the "
        "seam; last, the wave numbers along the edge. Densities of a degenerate shell are "
        "averaged over it.",
        f"Density of level {case.edges.level[best]} on the ribbon and along its edge; {weight} of "
        "it is near an edge.",
    )


def _edges(result: StudyResult) -> Caption:
    beside = "; ".join(
        f"{c.label}: {at_the_edge(c.edges)} of {c.edges.level.size}"
        for c in result.cases
        if c.edges is not None
    )
    return Caption(
        "Edge states against momentum",
        "Energy against the strongest wave number along the unrolled edge; the area of a mark is "
        "the weight at the edge. A one-sided ribbon has one edge of length 2L and wave numbers "
        "spaced by π/L, a plain one 2π/L; at whole and half quanta, where k and −k are equal, its "
        f"size is shown. Levels with more than half at the edge: {beside}.",
        f"Energy against edge momentum. Levels at the edge: {beside}.",
    )


def _density(result: StudyResult) -> Caption:
    case = result.ribbon
    assert case.density is not None
    found = case.density
    whole = "the complete spectrum" if found.complete else f"the {found.levels:,} levels found"
    if found.error is not None:
        worst = percent(float(np.max(found.error) / np.max(found.density)))
        whole = f"moments of random vectors (standard error up to {worst} of the peak)"
    return Caption(
        "Density of states",
        f"Levels per energy and site from {whole}, each a Gaussian of standard deviation "
        f"{quantity(found.broadening, found.unit)} (levels.broadening), spin not counted; below, "
        "the part of all levels that lies under an energy. Where the broadening is fine for the "
        "whole spectrum, the part around the levels found is shown.",
        f"Density of states of the ribbon beside its controls, from {whole}.",
    )


def _continuum(result: StudyResult) -> Caption:
    case = result.ribbon
    assert case.continuum is not None
    found = case.continuum
    formula = "Schrödinger" if found.kind == "square" else "Dirac"
    spacing, given = spacing_for_percent(found), found.kind != "square"
    fine = "" if given or np.isnan(spacing) else f" A spacing of {spacing:.3g} nm gives 1 %."
    count = int(np.count_nonzero(found.holds))
    return Caption(
        "Lattice and continuum",
        f"Levels beside the {formula} formula with hard walls, paired by quantum numbers, and "
        f"their relative error on {found.spacings.size} meshes of the same ring (width, "
        f"circumference and closure kept). {count} of {found.level.size} levels lie where the "
        f"formula is meant to hold, |k|a up to 0.5: {spread(found)}.{fine}",
        f"Relative error of levels against lattice spacing for the {formula} formula.",
    )
