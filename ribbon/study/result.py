"""What a study found, as plain frozen records: the cases, the checks, the notes."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, Literal

if TYPE_CHECKING:
    from ribbon.analysis import (
        ContinuumComparison,
        ContinuumShift,
        Density,
        EdgeStates,
        FluxResponse,
        Gap,
        HalfQuantum,
        Harmonics,
        Levels,
    )
    from ribbon.hopping import Hamiltonian
    from ribbon.lattice import Network, Topology
    from ribbon.study.ribbonfile import RibbonFile

__all__ = ["Case", "CaseName", "Check", "StudyResult"]

CaseName = Literal["ribbon", "plain", "double", "open", "shorter", "longer"]
KINSHIP: tuple[CaseName, ...] = ("plain", "shorter", "longer", "double", "open")


@dataclass(frozen=True, kw_only=True)
class Check:
    """One check that ran: it passed when ``value`` did not exceed ``limit``.

    >>> Check(name="hermitian", passed=True, value=0.0, limit=1e-12).note
    ''
    """

    name: str
    passed: bool
    value: float
    limit: float
    flux: float | None = None
    note: str = ""


@dataclass(frozen=True, kw_only=True, eq=False)
class Case:
    """The ribbon itself or one of its controls, with everything computed for it.

    ``flux`` is the flux through this ring at which ``levels`` and ``gap`` hold. ``flux_scale``
    is the flux through this ring for one flux quantum through the ribbon (2 for the double
    cover). ``electrons`` is the number that fills the levels, ``spin`` how many fit in one.
    ``other_gap`` is the gap with the other orbital sign, where there is one.
    ``doubts`` says what could not be certified. ``edges``, ``density`` and ``continuum`` are
    None where they were not asked for or do not exist; ``continuum_shift`` stands with a
    control and pairs the ribbon's levels with its own.
    """

    name: CaseName
    label: str
    network: Network
    hamiltonian: Hamiltonian
    flux: float
    levels: Levels
    gap: Gap
    topology: Topology
    electrons: float
    spin: int = 2
    other_gap: Gap | None = None
    response: FluxResponse | None = None
    harmonics: Harmonics | None = None
    half: HalfQuantum | None = None
    flux_scale: float = 1.0
    doubts: tuple[str, ...] = ()
    edges: EdgeStates | None = None
    density: Density | None = None
    continuum: ContinuumComparison | None = None
    continuum_shift: ContinuumShift | None = None


@dataclass(frozen=True, kw_only=True, eq=False)
class StudyResult:
    """Everything a study found; the first of ``cases`` is the ribbon itself."""

    title: str
    file: RibbonFile
    cases: tuple[Case, ...]
    checks: tuple[Check, ...]
    notes: tuple[str, ...]
    seconds: Mapping[str, float]
    provenance: Mapping[str, Any]

    @property
    def ribbon(self) -> Case:
        """The ribbon itself."""
        return self.cases[0]

    @property
    def controls(self) -> tuple[Case, ...]:
        """The rings the ribbon is compared with."""
        return self.cases[1:]

    @property
    def nearest_control(self) -> Case | None:
        """The control that changes are counted from: the plain ring, else the next of kin."""
        by_name = {case.name: case for case in self.controls}
        return next((by_name[name] for name in KINSHIP if name in by_name), None)
