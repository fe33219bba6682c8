"""Sentences that say what the numbers of a study mean."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from ribbon.analysis.levels import tolerance
from ribbon.hopping.units import current_factor
from ribbon.study.numbers import quantity

if TYPE_CHECKING:
    from ribbon.analysis import Gap, HalfQuantum
    from ribbon.study.result import Case, StudyResult

__all__ = [
    "Fact",
    "Peak",
    "comparison",
    "conventions",
    "facts",
    "gap_text",
    "meaning",
    "peak_current",
    "subtitle",
]

ALIKE = 1e-6
"""Currents that differ by less than this part of the largest one repeat."""

NOISE = 1e-13
"""A current or difference below this part of the largest hopping slope is rounding."""


@dataclass(frozen=True)
class Fact:
    """One number that a person would quote: what it is, the number, and a word on it."""

    label: str
    value: str
    detail: str = ""


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
        return _brim(gap)
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
    return f"{name}{size}, {_twists(ribbon.half_twists)}{orbital}"


def facts(result: StudyResult) -> tuple[Fact, ...]:
    """The numbers for the top of the page."""
    case, unit = result.ribbon, result.ribbon.levels.unit
    found = [Fact("Gap", _gap_size(case.gap, unit), f"{_filling(case)}, flux {case.flux:g} h/e")]
    control = result.nearest_control
    if control is not None and not np.isnan(case.gap.gap - control.gap.gap):
        change = quantity(case.gap.gap - control.gap.gap, unit)
        signed = change if change.startswith(("−", "0 ")) else f"+{change}"
        beside = _gap_size(control.gap, unit)
        found.append(Fact("Change of the gap", signed, f"{control.label}: {beside}"))
    if case.other_gap is not None:
        sign = {"s": "pz", "pz": "s"}.get(result.file.ribbon.orbital or "", "other")
        value = _gap_size(case.other_gap, unit)
        found.append(Fact("Gap with the other sign", value, f'orbital "{sign}"'))
    peak = peak_current(case)
    if peak is not None:
        value = quantity(abs(peak.current), peak.unit)
        where = f"at {peak.flux:.4g} h/e" if peak.current else "at every flux of the sweep"
        found.append(Fact("Largest current", value, where))
    if case.half is not None:
        found.append(_half_fact(case))
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
    return Fact("Shape", value, f"{sides}, {_twists(half_twists)}")


def _half_fact(case: Case) -> Fact:
    assert case.half is not None
    value = "yes" if case.half.holds else "no"
    size = quantity(case.half.difference, case.levels.unit, 3)
    return Fact("Half-quantum period", value, f"largest difference {size}")


def _energy(value: float, case: Case) -> str:
    """An energy in words; one that cannot be told from zero is zero."""
    return quantity(0.0 if abs(value) <= tolerance(case.hamiltonian) else value, case.levels.unit)


def _gap_size(gap: Gap, unit: str) -> str:
    if np.isnan(gap.gap):
        return _brim(gap)
    return "none" if gap.open_shell else quantity(gap.gap, unit)


def _brim(gap: Gap) -> str:
    """What stands in place of a gap where the levels are all full or all empty."""
    return "all levels full" if np.isnan(gap.upper) else "all levels empty"


def _twists(count: int) -> str:
    if count == 0:
        return "no twist"
    return f"{count} half twist" + "s" * (count != 1)


def _filling(case: Case) -> str:
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
            "gap": _gap_size(case.gap, unit),
        }
        if result.ribbon.other_gap is not None:
            other = case.other_gap
            row["gap, other sign"] = "" if other is None else _gap_size(other, unit)
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


def meaning(result: StudyResult) -> tuple[str, ...]:
    """What the numbers at the top say, in plain sentences."""
    sentences = [_shape_sentence(result.ribbon), _gap_sentence(result)]
    sentences += [_control_sentence(result.ribbon, control) for control in result.controls]
    if result.ribbon.other_gap is not None:
        sentences.append(_sign_sentence(result))
    sentences += _current_sentences(result)
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
            f"With {_filling(case)} the last shell at {_energy(case.gap.lower, case)} "
            "is only partly filled: there is no gap."
        )
    if np.isnan(case.gap.gap):
        return f"With {_filling(case)} there is no gap to speak of: {_brim(case.gap)}."
    return (
        f"With {_filling(case)} the highest filled level lies "
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
        return f"no gap to speak of ({_brim(case.gap)})"
    size = f"a gap of {_gap_size(case.gap, unit)}"
    return "an open shell and no gap" if case.gap.open_shell else size


def _sign_sentence(result: StudyResult) -> str:
    case = result.ribbon
    assert case.other_gap is not None
    own = f'"{result.file.ribbon.orbital}"'
    gap = case.other_gap
    none = gap.open_shell or np.isnan(gap.gap)
    other = "no gap" if none else f"a gap of {_gap_size(gap, case.levels.unit)}"
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
