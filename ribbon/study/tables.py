"""The tables of a study: plain columns with a unit each, written as CSV in full precision.

Energies are in the unit of the file and currents in A for one electron (or in energy per flux
quantum, where the unit is not an energy); the header line holds the names of the columns only.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from ribbon.analysis.levels import finest
from ribbon.hopping.units import current_factor

if TYPE_CHECKING:
    from ribbon.study.result import Case, Check

__all__ = [
    "Table",
    "bonds_table",
    "checks_table",
    "flux_table",
    "harmonics_table",
    "levels_table",
    "occupation",
    "shift_table",
    "sites_table",
    "topology_table",
    "totals_table",
]

Column = Sequence[Any] | NDArray[Any]

SPECIAL = frozenset(',"\r\n')
"""A text that holds one of these is quoted in CSV (RFC 4180)."""


@dataclass(frozen=True, eq=False)
class Table:
    """Columns of one length under their names; ``units`` and ``about`` are for the reader.

    >>> Table("pair", {"level": [0, 1], "energy": [-1.0, float("nan")]}).to_csv()
    'level,energy\\n0,-1.0\\n1,\\n'
    """

    name: str
    columns: Mapping[str, Column]
    units: Mapping[str, str] = field(default_factory=dict)
    about: str = ""

    def __post_init__(self) -> None:
        """Check that all columns have one length; make arrays read-only copies."""
        sizes = {len(column) for column in self.columns.values()}
        if len(sizes) > 1:
            raise ValueError(f"table {self.name}: columns of different lengths {sorted(sizes)}")
        kept = {name: _kept(column) for name, column in self.columns.items()}
        object.__setattr__(self, "columns", kept)

    @property
    def rows(self) -> int:
        """Number of rows."""
        return len(next(iter(self.columns.values()), ()))

    def head(self, count: int) -> Table:
        """The first ``count`` rows as a table."""
        kept = {name: column[:count] for name, column in self.columns.items()}
        return Table(self.name, kept, self.units, self.about)

    def to_csv(self) -> str:
        """The table as CSV text: one header line, full precision, empty where there is nothing."""
        lines = [",".join(map(_cell, self.columns))]
        if self.rows:
            cells = [[_cell(v) for v in _plain(column)] for column in self.columns.values()]
            lines += map(",".join, zip(*cells, strict=True))
        return "\n".join(lines) + "\n"

    def to_records(self) -> list[dict[str, Any]]:
        """One dictionary a row, plain Python values, None where there is nothing."""
        plain = [
            [None if isinstance(v, float) and math.isnan(v) else v for v in _plain(column)]
            for column in self.columns.values()
        ]
        return [dict(zip(self.columns, row, strict=True)) for row in zip(*plain, strict=True)]


def _kept(column: Column) -> Column:
    if isinstance(column, np.ndarray):
        copy = column.copy()
        copy.setflags(write=False)
        return copy
    return tuple(column)


def _plain(column: Column) -> list[Any]:
    values = column.tolist() if isinstance(column, np.ndarray) else list(column)
    return [v.item() if isinstance(v, np.generic) else v for v in values]


def _cell(value: object) -> str:
    if value is None:
        return ""
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, float):
        return "" if math.isnan(value) else repr(value)
    text = str(value)
    return '"' + text.replace('"', '""') + '"' if SPECIAL.intersection(text) else text


def occupation(
    energies: ArrayLike, index: ArrayLike, *, electrons: float, spin: int, same: float = 1e-9
) -> NDArray[np.float64]:
    """Electrons in each level at T = 0; a degenerate shell cut by the filling shares equally.

    ``energies`` ascend, and those closer than ``same`` are one shell; ``index`` is the place of
    each in the complete spectrum.

    >>> occupation([-2.0, 0.0, 0.0, 2.0], [0, 1, 2, 3], electrons=4, spin=2).tolist()
    [2.0, 1.0, 1.0, 0.0]
    """
    energy, place = np.asarray(energies, dtype=float), np.asarray(index, dtype=float)
    filled = np.clip(electrons - spin * place, 0.0, float(spin))
    if energy.size == 0:
        return filled
    shell = np.cumsum(np.concatenate([[False], np.diff(energy) > same]))
    shared = np.bincount(shell, weights=filled) / np.bincount(shell)
    return np.asarray(shared[shell], dtype=np.float64)


def levels_table(case: Case, unit: str) -> Table:
    """The levels of a case: place in the complete spectrum, energy, quantum numbers, filling."""
    levels = case.levels
    columns: dict[str, Column] = {"level": levels.index, "energy": levels.energies}
    if levels.momentum is not None:
        columns["momentum"] = levels.momentum
    if levels.parity is not None:
        columns["parity"] = levels.parity
    columns["occupation"] = occupation(
        levels.energies,
        levels.index,
        electrons=case.electrons,
        spin=case.spin,
        same=finest(case.hamiltonian),
    )
    return Table(
        f"levels-{case.name}",
        columns,
        {"energy": unit, "momentum": "2π/L", "occupation": "electrons at 0 K"},
        f"Levels of the {case.label} at {case.flux:g} flux quanta",
    )


def flux_table(case: Case, unit: str) -> Table:
    """Levels against flux with the current that one electron in each carries."""
    response = _response(case)
    factor, label = current_factor(unit)
    there = np.isfinite(response.energy) & (response.level >= 0)
    flux = np.broadcast_to(response.flux[:, None], response.energy.shape)
    return Table(
        f"flux-{case.name}",
        {
            "flux": flux[there],
            "level": response.level[there],
            "energy": response.energy[there],
            "current": factor * response.slope[there],
            "branch": response.branch[there],
        },
        {"flux": "h/e", "energy": unit, "current": label},
        f"Levels of the {case.label} against the flux through it",
    )


def totals_table(case: Case, unit: str) -> Table:
    """Total current against flux, spin included, with the one-sided values at shared shells."""
    totals = _response(case).totals
    if totals is None:
        raise ValueError(f"{case.name} has no totals: the sweep was made for single levels")
    factor, label = current_factor(unit)
    return Table(
        f"totals-{case.name}",
        {
            "flux": totals.flux,
            "current": factor * totals.slope,
            "electrons": totals.electrons,
            "shared": totals.shared,
            "current_left": factor * totals.left,
            "current_right": factor * totals.right,
            "chemical_potential": totals.chemical_potential,
            "energy": totals.energy,
        },
        {
            "flux": "h/e",
            "current": label,
            "current_left": label,
            "current_right": label,
            "chemical_potential": unit,
            "energy": unit,
        },
        f"Total current of the {case.label} against the flux through it",
    )


def harmonics_table(case: Case, unit: str) -> Table:
    """Fourier amplitudes of the total current, per harmonic of the flux quantum."""
    if case.harmonics is None:
        raise ValueError(f"{case.name} has no harmonics: the sweep is not a whole period")
    factor, label = current_factor(unit)
    # the harmonics are those of minus the slope; the factor turns a slope into a current
    return Table(
        f"harmonics-{case.name}",
        {
            "order": case.harmonics.order,
            "sine": -factor * case.harmonics.sine,
            "cosine": -factor * case.harmonics.cosine,
        },
        {"sine": label, "cosine": label},
        f"Harmonics of the total current of the {case.label}",
    )


def _response(case: Case) -> Any:
    if case.response is None:
        raise ValueError(f"{case.name} has no flux response: the study did not sweep the flux")
    return case.response


def sites_table(case: Case) -> Table:
    """Sites of a case: place, sublattice where known, site energy."""
    network = case.network
    positions = network.positions
    columns: dict[str, Column] = {"site": np.arange(network.n)}
    for axis, letter in enumerate("xyz"[: positions.shape[1]]):
        columns[letter] = positions[:, axis]
    labels = getattr(network, "sublattice", None)
    if labels is not None:
        columns["sublattice"] = labels
    columns["site_energy"] = np.asarray(case.hamiltonian.site_energies)
    units = {"x": "nm", "y": "nm", "z": "nm", "site_energy": case.levels.unit}
    return Table(f"sites-{case.name}", columns, units, f"Sites of the {case.label}")


def bonds_table(case: Case) -> Table:
    """Bonds of a case: ends, step in the endless strip, crossings of the seam, shell."""
    bonds = case.network.bonds
    columns: dict[str, Column] = {"tail": bonds.tail, "head": bonds.head}
    for axis, letter in enumerate("xyz"[: bonds.displacement.shape[1]]):
        columns[f"d{letter}"] = bonds.displacement[:, axis]
    columns |= {"winding": bonds.winding, "shell": bonds.shell, "mirrored": bonds.mirrored}
    units = {"dx": "nm", "dy": "nm", "dz": "nm"}
    return Table(f"bonds-{case.name}", columns, units, f"Bonds of the {case.label}")


def shift_table(case: Case, control: Case) -> Table:
    """Twisted minus control, level by level, counted from the frontier of each.

    ``from_gap`` is -1 for the highest filled level, 1 for the lowest empty one. A control with
    m times as many sites has m levels for each; their mean is taken.
    """
    copies = max(1, round(control.network.n / case.network.n))
    filled = math.ceil(case.electrons / case.spin - 1e-9)
    # the levels of a cover come in groups of ``copies``, counted from the bottom of the band
    over = math.ceil(control.electrons / control.spin - 1e-9) if copies == 1 else filled
    own, other = _from_gap(case, 1, filled), _from_gap(control, copies, over)
    places = sorted(own.keys() & other.keys())
    here = np.array([own[p][1] for p in places])
    there = np.array([other[p][1] for p in places])
    return Table(
        f"shift-{case.name}-{control.name}",
        {
            "from_gap": np.array(places, dtype=np.int64),
            "level": np.array([own[p][0] for p in places], dtype=np.int64),
            "energy": here,
            "control_level": np.array([other[p][0] for p in places], dtype=np.int64),
            "control_energy": there,
            "shift": here - there,
        },
        {"energy": case.levels.unit, "control_energy": case.levels.unit, "shift": case.levels.unit},
        f"Levels of the {case.label} minus those of the {control.label}",
    )


def _from_gap(case: Case, copies: int, filled: int) -> dict[int, tuple[int, float]]:
    """Levels by their place from the frontier: (first level, mean energy of ``copies``).

    ``filled`` counts the groups of ``copies`` levels below the frontier.
    """
    index = np.asarray(case.levels.index)
    group = index // copies - filled
    found: dict[int, tuple[int, float]] = {}
    for number in np.unique(group):
        members = group == number
        if np.count_nonzero(members) == copies:
            place = int(number) + 1 if number >= 0 else int(number)
            energy = float(np.mean(np.asarray(case.levels.energies)[members]))
            found[place] = (int(index[members][0]), energy)
    return found


def topology_table(cases: Sequence[Case]) -> Table:
    """What the bonds of each case say about its shape, one row a case."""
    found = [case.topology for case in cases]
    columns: dict[str, Column] = {
        "case": [case.name for case in cases],
        "sites": [t.sites for t in found],
        "bonds": [t.bonds for t in found],
        "faces": [t.faces for t in found],
        "euler_characteristic": [t.euler_characteristic for t in found],
        "boundary_loops": [t.boundary_loops for t in found],
        "orientable": [t.orientable for t in found],
        "bipartite": [t.bipartite for t in found],
        "components": [t.components for t in found],
        "guaranteed_zero_levels": [t.guaranteed_zero_levels for t in found],
        "coordination": [_counts(t.coordination) for t in found],
        "face_sizes": [_counts(t.face_sizes) for t in found],
    }
    return Table("topology", columns, {}, "Topology walked on the first-neighbour bonds")


def _counts(counts: Mapping[int, int] | None) -> str | None:
    """A mapping from size to count as text: '2:16 3:84'."""
    if counts is None:
        return None
    return " ".join(f"{size}:{count}" for size, count in sorted(counts.items()))


def checks_table(checks: Sequence[Check]) -> Table:
    """The checks that ran, with the number each compares and its limit."""
    return Table(
        "checks",
        {
            "check": [check.name for check in checks],
            "flux": [check.flux for check in checks],
            "passed": [check.passed for check in checks],
            "value": [float(check.value) for check in checks],
            "limit": [float(check.limit) for check in checks],
            "note": [check.note for check in checks],
        },
        {"flux": "h/e"},
        "Checks of this study",
    )
