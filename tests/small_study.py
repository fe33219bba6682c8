"""A small study put together by hand from the library, for tests of what is made of it."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np

from ribbon.analysis import (
    Filling,
    Window,
    all_levels,
    find_gap,
    half_quantum,
    harmonics,
    sweep_flux,
)
from ribbon.hopping import Hopping, assemble
from ribbon.lattice import certify_topology, close_strip, double_cover, lay_strip, open_strip
from ribbon.study.result import Case, Check, StudyResult
from ribbon.study.ribbonfile import RibbonFile

CHECKS = (
    Check(name="hermitian", passed=True, value=0.0, limit=1e-12, flux=0.0),
    Check(name="double cover", passed=True, value=3e-14, limit=1e-9, flux=0.137, note="complete"),
)


def make_case(
    name: Any, label: str, network: Any, hopping: Hopping, *, electrons: float, **more: Any
) -> Case:
    """One case with complete spectra; ``points`` fluxes are swept where the network is a ring."""
    points, scale, spin = more.get("points", 25), more.get("scale", 1.0), more.get("spin", 2)
    flux = scale * more.get("flux", 0.0)
    hamiltonian = assemble(network, hopping)
    response = found = half = None
    if hamiltonian.ring is not None and points:
        filling = Filling(electrons=electrons, spin=spin)
        fluxes = np.linspace(0, 1, points) * scale
        response = sweep_flux(hamiltonian, fluxes, window=Window(all=True), filling=filling)
        assert response.totals is not None
        found = harmonics(response.totals) if scale == 1 else None
        half = half_quantum(hamiltonian, response.totals)
    return Case(
        name=name,
        label=label,
        network=network,
        hamiltonian=hamiltonian,
        flux=flux,
        levels=all_levels(hamiltonian, flux=flux),
        gap=find_gap(hamiltonian, electrons=electrons, spin=spin, flux=flux),
        topology=certify_topology(network),
        electrons=electrons,
        spin=spin,
        response=response,
        harmonics=found,
        half=half,
        flux_scale=scale,
    )


def make_study(
    lattice: str = "square", rows: int = 1, length: float = 16, **more: Any
) -> StudyResult:
    """A study of a ribbon with its controls; by default a Möbius annulene of 16 atoms."""
    twists, orbital = more.pop("half_twists", 1), more.pop("orbital", "pz")
    controls = more.pop("controls", ("plain", "double", "open"))
    title, checks = more.pop("title", "A study"), more.pop("checks", CHECKS)
    unit, amplitude = more.pop("unit", "eV"), more.pop("amplitude", 2.7)
    hopping = Hopping(shells=(amplitude,), unit=unit)
    strip = lay_strip(lattice, rows=rows, length=length)
    ring = close_strip(strip, half_twists=twists, orbital=orbital)
    filled = more.pop("electrons", float(ring.n))
    cases = [make_case("ribbon", "half-twisted ribbon", ring, hopping, electrons=filled, **more)]
    if twists % 2:
        other = close_strip(strip, half_twists=twists, orbital={"s": "pz", "pz": "s"}[orbital])
        gap = find_gap(
            assemble(other, hopping), electrons=filled, spin=cases[0].spin, flux=cases[0].flux
        )
        cases[0] = replace(cases[0], other_gap=gap)
    if "plain" in controls:
        plain = close_strip(strip, half_twists=0)
        cases.append(make_case("plain", "plain ring", plain, hopping, electrons=filled, **more))
    if "double" in controls:
        cover, _ = double_cover(ring)
        twice = {**more, "scale": 2.0, "electrons": 2 * filled}
        cases.append(make_case("double", "double cover", cover, hopping, **twice))
    if "open" in controls:
        flat = open_strip(strip)
        cases.append(make_case("open", "open strip", flat, hopping, electrons=filled, points=0))
    file = RibbonFile.model_validate(
        {
            "title": title if title.isprintable() else "",
            "ribbon": {
                **{"lattice": lattice, "rows": rows, "length": float(length)},
                **{"half_twists": twists, "orbital": orbital},
            },
            "hopping": {"unit": unit, "shells": [amplitude]},
        }
    )
    return StudyResult(
        title=title,
        file=file,
        cases=tuple(cases),
        checks=checks,
        notes=("A note on this study.",),
        seconds={"levels": 0.25},
        provenance={"versions": {"ribbon": "0.1.0"}, "seed": 1, "checks": []},
    )
