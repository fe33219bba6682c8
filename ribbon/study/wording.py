"""Sentences that say what the numbers of a study mean."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from ribbon.analysis.levels import tolerance
from ribbon.hopping.units import current_factor
from ribbon.study.findings import Fact, state_facts
from ribbon.study.numbers import quantity

if TYPE_CHECKING:
    from ribbon.analysis import Gap
    from ribbon.study.result import Case, StudyResult

__all__ = [
    "Peak",
    "brim",
    "comparison",
    "conventions",
    "energy_text",
    "facts",
    "filling_text",
    "gap_size",
    "gap_text",
    "peak_current",
    "subtitle",
]

NOISE = 1e-13
"""A current or difference below this part of the largest hopping slope is rounding."""


@dataclass(frozen=True)
class Peak:
    """The largest total current found on the grid of fluxes, and where (flux of the ribbon)."""

    current: float
    flux: float
    unit: str


def gap_text(gap: Gap, unit: str) -> str:
    """The gap in words: its size, or that the shell is open."""
    if gap.open_shell:
        return "open shell, no gap"
    if np.isnan(gap.gap):
        return brim(gap)
    return f"gap {quantity(gap.gap, unit)}"


def peak_current(case: Case) -> Peak | None:
    """The total current of largest size over the sweep, one-sided values included."""
    totals = None if case.response is None else case.response.totals
    if totals is None:
        return None
    factor, unit = current_factor(case.levels.unit)
    sides = np.stack([totals.slope, totals.left, totals.right])
    size = np.nanmax(np.abs(sides), axis=0)
    place = int(np.nanargmax(size))
    side = int(np.nanargmax(np.abs(sides[:, place])))
    if size[place] <= NOISE * max(case.hamiltonian.scale, 1e-300):
        return Peak(0.0, float(totals.flux[place]) / case.flux_scale, unit)
    return Peak(factor * float(sides[side, place]), totals.flux[place] / case.flux_scale, unit)


def subtitle(result: StudyResult) -> str:
    """One line on what was built."""
    ribbon = result.file.ribbon
    network: Any = result.ribbon.network
    strip = getattr(network, "strip", None)
    size = ""
    if strip is not None:
        size = f", {strip.rows} row{'s' * (strip.rows != 1)} by {strip.length:g} periods"
        name = strip.lattice.name
    else:
        name = ribbon.lattice
    orbital = f', orbital "{ribbon.orbital}"' if ribbon.orbital else ""
    return f"{name}{size}, {twists_text(ribbon.half_twists)}{orbital}"


def facts(result: StudyResult) -> tuple[Fact, ...]:
    """The numbers for the top of the page."""
    case, unit = result.ribbon, result.ribbon.levels.unit
    found = [Fact("Gap", gap_size(case.gap, unit), f"{filling_text(case)}, flux {case.flux:g} h/e")]
    control = result.nearest_control
    if control is not None and not np.isnan(case.gap.gap - control.gap.gap):
        change = quantity(case.gap.gap - control.gap.gap, unit)
        signed = change if change.startswith(("−", "0 ")) else f"+{change}"
        beside = gap_size(control.gap, unit)
        found.append(Fact("Change of the gap", signed, f"{control.label}: {beside}"))
    if case.other_gap is not None:
        sign = {"s": "pz", "pz": "s"}.get(result.file.ribbon.orbital or "", "other")
        value = gap_size(case.other_gap, unit)
        found.append(Fact("Gap with the other sign", value, f'orbital "{sign}"'))
    peak = peak_current(case)
    if peak is not None:
        value = quantity(abs(peak.current), peak.unit)
        where = f"at {peak.flux:.4g} h/e" if peak.current else "at every flux of the sweep"
        found.append(Fact("Largest current", value, where))
    if case.half is not None:
        found.append(_half_fact(case))
    found += state_facts(case)
    found += [_edge_fact(case, result.file.ribbon.half_twists), _size_fact(case)]
    passed = sum(check.passed for check in result.checks)
    verdict = "all passed" if passed == len(result.checks) else "see the checks below"
    found.append(Fact("Checks", f"{passed} of {len(result.checks)}", verdict))
    return tuple(found)


def _size_fact(case: Case) -> Fact:
    network: Any = case.network
    strip = getattr(network, "strip", None)
    detail = ""
    if strip is not None:
        detail = f"{strip.circumference:.4g} nm round, {strip.width:.3g} nm wide"
    return Fact("Sites", f"{network.n:,}", detail)


def _edge_fact(case: Case, half_twists: int) -> Fact:
    topology = case.topology
    sides = "two-sided" if topology.orientable else "one-sided"
    loops = topology.boundary_loops
    value = "not walked" if loops is None else f"{loops} edge" + "s" * (loops != 1)
    return Fact("Shape", value, f"{sides}, {twists_text(half_twists)}")


def _half_fact(case: Case) -> Fact:
    assert case.half is not None
    value = "yes" if case.half.holds else "no"
    size = quantity(case.half.difference, case.levels.unit, 3)
    return Fact("Half-quantum period", value, f"largest difference {size}")


def energy_text(value: float, case: Case) -> str:
    """An energy in words; one that cannot be told from zero is zero."""
    return quantity(0.0 if abs(value) <= tolerance(case.hamiltonian) else value, case.levels.unit)


def gap_size(gap: Gap, unit: str) -> str:
    """The size of a gap as a word or a quantity."""
    if np.isnan(gap.gap):
        return brim(gap)
    return "none" if gap.open_shell else quantity(gap.gap, unit)


def brim(gap: Gap) -> str:
    """What stands in place of a gap where the levels are all full, all empty, or not known."""
    if not gap.known:
        return "not certified"
    return "all levels full" if np.isnan(gap.upper) else "all levels empty"


def twists_text(count: int) -> str:
    if count == 0:
        return "no twist"
    return f"{count} half twist" + "s" * (count != 1)


def filling_text(case: Case) -> str:
    """How many electrons fill a case, in words."""
    if case.electrons == case.network.n:
        return f"{case.network.n:,} electrons (one a site)"
    return f"{case.electrons:,.6g} electrons"


def comparison(result: StudyResult) -> list[dict[str, str]]:
    """The ribbon and its controls side by side, one row each, as text."""
    rows = []
    for case in result.cases:
        unit, topology = case.levels.unit, case.topology
        row = {
            "case": case.label,
            "sites": f"{topology.sites:,}",
            "edges": "" if topology.boundary_loops is None else str(topology.boundary_loops),
            "sides": "two" if topology.orientable else "one",
            "gap": gap_size(case.gap, unit),
        }
        if result.ribbon.other_gap is not None:
            other = case.other_gap
            row["gap, other sign"] = "" if other is None else gap_size(other, unit)
        peak = peak_current(case)
        if result.ribbon.response is not None:
            row["largest current"] = (
                ""
                if peak is None
                else "none"
                if not peak.current
                else f"{quantity(abs(peak.current), peak.unit)} at {peak.flux:.4g}"
            )
        rows.append(row)
    return rows


def conventions(result: StudyResult) -> str:
    """Signs, spin and ensemble of the currents, as the captions need them."""
    sweep = result.file.sweep
    fixed = (
        f"fixed chemical potential {quantity(sweep.chemical_potential, result.ribbon.levels.unit)}"
        if sweep.chemical_potential is not None
        else "a fixed number of electrons"
    )
    warm = "" if sweep.temperature == 0 or sweep.chemical_potential is not None else (
        " (the chemical potential is solved for the number at each flux; this is not the "
        "canonical ensemble)"
    )  # fmt: skip
    return (
        f"Electrons of charge −e, {sweep.spin} per level, {fixed} at {sweep.temperature:g} K"
        f"{warm}; current is −∂E/∂Φ, positive along x."
    )
