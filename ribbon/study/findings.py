"""What edge states and the continuum comparison come to: facts and plain sentences."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from ribbon.study.numbers import number, quantity

if TYPE_CHECKING:
    from ribbon.analysis import ContinuumComparison, EdgeStates
    from ribbon.study.result import Case, StudyResult

__all__ = [
    "Fact",
    "at_the_edge",
    "percent",
    "spacing_for_percent",
    "spread",
    "state_facts",
    "state_sentences",
    "strongest_edge_state",
]

HALF = 0.5
"""A state with more than this part of its probability near an edge lives at the edge."""


@dataclass(frozen=True)
class Fact:
    """One number that a person would quote: what it is, the number, and a word on it."""

    label: str
    value: str
    detail: str = ""


def at_the_edge(found: EdgeStates) -> int:
    """How many of the levels live at the edge."""
    return int(np.count_nonzero(found.edge_weight > HALF))


def strongest_edge_state(case: Case) -> int:
    """Position of the level with the largest edge weight, of equals the nearest to the gap."""
    found = case.edges
    assert found is not None
    place = np.abs(found.level - (case.electrons / case.spin - 0.5))
    return int(np.lexsort((place, -np.round(found.edge_weight, 9)))[0])


def percent(value: float) -> str:
    """A relative number as a percentage to read.

    >>> percent(-0.00205)
    '−0.205 %'
    """
    return f"{number(100 * value, 3)} %"


def spacing_for_percent(found: ContinuumComparison) -> float:
    """Spacing (nm) that brings every level for which the formula holds within 1 %."""
    spacing = found.spacing_for(0.01)[found.holds]
    known = spacing[np.isfinite(spacing)]
    return float(known.min()) if known.size else float("nan")


def state_facts(case: Case) -> list[Fact]:
    """Facts on edge states and on the continuum, where the study has them."""
    facts = []
    if case.edges is not None and case.edges.level.size:
        count = at_the_edge(case.edges)
        detail = f"more than half within {case.edges.within:.3g} nm of an edge"
        facts.append(Fact("Levels at the edge", f"{count} of {case.edges.level.size}", detail))
    if case.continuum is not None and case.continuum.holds.any():
        found = case.continuum
        count = int(np.count_nonzero(found.holds))
        near = int(np.count_nonzero(np.abs(found.relative_error[found.holds]) <= 0.01))
        detail = f"of {count} with |k|a up to 0.5; largest error {percent(_worst(found))}"
        facts.append(Fact("Within 1 % of the continuum", f"{near} of {count}", detail))
    return facts


def _worst(found: ContinuumComparison) -> float:
    errors = found.relative_error[found.holds]
    errors = errors[np.isfinite(errors)]
    return float(errors[np.argmax(np.abs(errors))]) if errors.size else 0.0


def state_sentences(result: StudyResult) -> list[str]:
    """Sentences on edge states, on the continuum, and on the lattice's part of the shift."""
    case = result.ribbon
    found = []
    if case.edges is not None and case.edges.level.size:
        found.append(_edge_sentence(case, case.edges))
    if case.continuum is not None and case.continuum.holds.any():
        found.append(_continuum_sentence(case.continuum))
        found += [_shift_sentence(case, c) for c in result.controls if _shifted(c)]
    return found


def _edge_sentence(case: Case, found: EdgeStates) -> str:
    count, total = at_the_edge(found), found.level.size
    start = (
        f"{count} of the {total} levels found live at the edge (more than half of the probability "
        f"within {found.within:.3g} nm of it)"
    )
    best = strongest_edge_state(case)
    decay = found.decay_length[best]
    if not count:
        return f"None of the {total} levels found lives at the edge."
    if not np.isfinite(decay):
        return f"{start}."
    if decay == 0:
        return f"{start}; level {found.level[best]} does not leave the outermost row."
    return (
        f"{start}; the amplitude of level {found.level[best]} falls by e every {decay:.3g} nm "
        "from the edge inward."
    )


def _continuum_sentence(found: ContinuumComparison) -> str:
    formula = "Schrödinger" if found.kind == "square" else "Dirac"
    count = int(np.count_nonzero(found.holds))
    text = (
        f"Of the levels found, {count} lie where the {formula} formula with hard walls is meant to "
        f"hold (|k|a up to 0.5); {spread(found)}"
    )
    spacing = spacing_for_percent(found)
    if not np.isfinite(spacing) or found.kind != "square":
        return f"{text}."
    return f"{text}; a mesh of spacing {spacing:.3g} nm would bring each within 1 %."


def spread(found: ContinuumComparison) -> str:
    """How many levels are how near to the formula, of those for which it is meant."""
    errors = np.abs(found.relative_error[found.holds])
    near, rough = (int(np.count_nonzero(errors <= limit)) for limit in (0.01, 0.1))
    worst = percent(_worst(found))
    start = f"the lattice is within 1 % of it for {near}, within 10 % for {rough}"
    return f"{start}; the farthest is off by {worst}"


def _shifted(control: Case) -> bool:
    found = control.continuum_shift
    return found is not None and bool(np.any(found.holds))


def _shift_sentence(case: Case, control: Case) -> str:
    """The largest shift against the plain ring, and how much of it the lattice makes."""
    found = control.continuum_shift
    assert found is not None
    size = np.where(found.holds, np.abs(found.continuum), -1.0)
    most = int(np.argmax(size))
    unit, level = case.levels.unit, found.level[most]
    if size[most] <= 1e-9 * case.hamiltonian.scale:
        return (
            f"Paired mode by mode with the {control.label}, no level moves in the continuum either."
        )
    share = found.lattice_part[most] / found.shift[most]
    return (
        f"Paired mode by mode with the {control.label}, level {level} is moved most: by "
        f"{quantity(float(found.shift[most]), unit)}, of which {percent(float(share))} is the "
        "lattice and the rest is in the continuum too."
    )
