"""The Hückel sheet of a molecule: levels, filling, bond orders, charges and energies.

E = alpha + x beta with beta < 0, so x is large for low levels, and the matrix in units of |beta|
has -h on the diagonal and -k times the sign of the bond beside it (E. Hückel, Z. Phys. 70, 204
(1931); A. Streitwieser, Molecular Orbital Theory for Organic Chemists (1961); both recalled from
memory). The sign of a bond is that of `ribbon.lattice.framework`: it makes an annulene with an
odd number of half twists a Möbius one (Heilbronner, Tetrahedron Lett. 5, 1923 (1964)).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal, get_args

import numpy as np
import scipy.linalg
from numpy.typing import NDArray
from scipy.sparse.csgraph import reverse_cuthill_mckee

from ribbon.analysis.filling import Filling, occupations
from ribbon.analysis.heteroatoms import PARAMETERS, Parameters, PiAtoms
from ribbon.analysis.levels import Certificate, Levels, finest
from ribbon.analysis.spectrum import all_levels, levels_at
from ribbon.errors import BadInput, NotCertified
from ribbon.hopping import Hamiltonian, Hopping
from ribbon.hopping.space import SpaceRule, space_amplitudes
from ribbon.lattice.framework import Framework

__all__ = ["BETA", "MOST_STATES", "HueckelSheet", "Rule", "hueckel_matrix", "hueckel_sheet"]

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]
Rule = Literal["plain", "torsion", "cosine", "slater-koster"]

BETA = -2.7
"""beta in eV for pi levels seen in spectra, -2.4 to -2.7 (recalled from memory)."""

MOST_STATES = 2_000
"""Up to so many atoms the sheet is complete; beyond, it holds the levels around the gap."""

AROUND = 10
"""How many levels on either side of the gap are found for larger molecules."""


AROUND_BANDS = 60
"""The same by the slower way, which is taken where many levels lie close together."""


@dataclass(frozen=True, kw_only=True, eq=False)
class HueckelSheet:
    """Levels and what follows from filling them; x, energies and gap in units of beta.

    Parameters
    ----------
    x
        (E - alpha) / beta, largest (lowest in energy) first, shape (k,).
    index
        Place of each in the complete spectrum, counted from the lowest energy, from 0.
    occupation
        Electrons in each level; equal levels share.
    electrons
        Number of pi electrons.
    homo, lumo
        x of the highest level with electrons and the lowest with room; None where there is none.
    gap
        ``homo - lumo``; 0 for an open shell, None where a level above or below is missing.
    open_shell
        True where a level, or a shell of equal levels, is partly filled.
    bond_orders
        p of every bond times its sign (bonding is positive), shape (m,); None for large frames.
    populations, charges
        pi electrons on each atom, and what it gave less these, shape (n,); None for large frames.
    pi_energy
        Sum of x over the electrons: E = electrons * alpha + pi_energy * beta; None if unknown.
    signed_orders_energy
        The same from charges and bond orders, sum q h + 2 sum p k f over bonds.
    certificate
        Why no level is missing.
    beta
        In eV, negative.
    """

    x: FloatArray
    index: IntArray
    occupation: FloatArray
    electrons: int
    homo: float | None
    lumo: float | None
    gap: float | None
    open_shell: bool
    bond_orders: FloatArray | None
    populations: FloatArray | None
    charges: FloatArray | None
    pi_energy: float | None
    signed_orders_energy: float | None
    certificate: Certificate
    beta: float

    def __post_init__(self) -> None:
        """Make every array read-only."""
        for name in ("x", "index", "occupation", "bond_orders", "populations", "charges"):
            array = getattr(self, name)
            if array is not None:
                array.setflags(write=False)

    @property
    def energies(self) -> FloatArray:
        """E - alpha in eV, ascending, shape (k,)."""
        return self.x * self.beta

    @property
    def gap_ev(self) -> float | None:
        """The gap in eV."""
        return None if self.gap is None else -self.gap * self.beta


def hueckel_matrix(
    framework: Framework,
    atoms: PiAtoms,
    *,
    parameters: Parameters = PARAMETERS["van-catledge"],
    rule: Rule = "plain",
    v_sigma: float = 0.0,
) -> Hamiltonian:
    """The Hückel matrix of a frame in units of |beta|: its energies are -x.

    ``rule`` says how the axes of the orbitals enter a bond, besides the sign: "plain" not at all;
    "torsion" by the cosine of their angle about the bond; "cosine" by that of their angle in
    space; "slater-koster" with the part of each axis along the bond taken off (and times
    ``v_sigma``, in units of |beta|, positive for p orbitals, put back). Bond lengths do not enter.
    Raises `BadInput` for a rule that is not known.
    """
    bonds = framework.network.bonds
    k = parameters.bonds(atoms.kinds, bonds)
    amplitudes = -k * framework.signs * _overlaps(framework, rule)
    if rule == "slater-koster" and v_sigma:
        amplitudes = amplitudes + _sigma_part(framework, v_sigma)
    site_energies = -parameters.sites(atoms.kinds)
    for array in (amplitudes, site_energies):
        array.setflags(write=False)
    return Hamiltonian(
        network=framework.network,
        hopping=Hopping(shells=(1.0,), site_energy=site_energies, unit="beta"),
        amplitudes=amplitudes,
        site_energies=site_energies,
    )


def _overlaps(framework: Framework, rule: Rule) -> FloatArray:
    """Size of the overlap of the axes across every bond, by the rule; its sign apart."""
    if rule not in get_args(Rule):
        raise BadInput(f"rule = {rule!r} must be one of {', '.join(get_args(Rule))}")
    bonds = framework.network.bonds
    if rule == "plain":
        return np.ones(bonds.m)
    chosen: Literal["cosine", "slater-koster"] = "cosine" if rule == "cosine" else "slater-koster"
    found = space_amplitudes(
        framework.network.positions,
        framework.axes,
        bonds,
        v_pi=np.ones(bonds.m),
        v_sigma=np.zeros(bonds.m),
        rule=SpaceRule(rule=chosen),
    )
    found = found * framework.signs
    if rule == "torsion":
        unit = bonds.displacement / np.linalg.norm(bonds.displacement, axis=1)[:, None]
        for end in (bonds.tail, bonds.head):
            along = np.einsum("ij,ij->i", framework.axes[end], unit)
            found = found / np.sqrt(np.maximum(1 - along**2, 1e-12))
    return np.asarray(found)


def _sigma_part(framework: Framework, v_sigma: float) -> FloatArray:
    bonds = framework.network.bonds
    return space_amplitudes(
        framework.network.positions,
        framework.axes,
        bonds,
        v_pi=np.zeros(bonds.m),
        v_sigma=np.full(bonds.m, v_sigma),
        rule=SpaceRule(),
    )


def hueckel_sheet(
    matrix: Hamiltonian,
    framework: Framework,
    atoms: PiAtoms,
    *,
    charge: int = 0,
    beta: float = BETA,
) -> HueckelSheet:
    """Solve a Hückel matrix and fill it with the electrons of ``atoms``, less ``charge``.

    Frames of more than `MOST_STATES` atoms get the levels around the gap, certified by counts,
    without orders, charges and energy. Raises `BadInput` for a number of electrons that does not
    fit, or a beta that is not negative.

    >>> from ribbon.lattice.molecule import bond_atoms
    >>> from ribbon.lattice.framework import find_framework
    >>> from ribbon.analysis.heteroatoms import pi_atoms
    >>> ethylene = find_framework(bond_atoms(["C", "C"], [[0, 0, 0], [0.134, 0, 0]]))
    >>> atoms = pi_atoms(["C", "C"], [3, 3])
    >>> sheet = hueckel_sheet(hueckel_matrix(ethylene, atoms), ethylene, atoms)
    >>> sheet.x.round(6).tolist(), round(sheet.pi_energy, 6), round(float(sheet.bond_orders[0]), 6)
    ([1.0, -1.0], 2.0, 1.0)
    """
    n, electrons = matrix.n, int(atoms.electrons.sum()) - charge
    if not 0 <= electrons <= 2 * n:
        raise BadInput(
            f"charge = {charge} leaves {electrons} pi electrons for {n} orbitals, which hold 0 to "
            f"{2 * n}"
        )
    if not (np.isfinite(beta) and beta < 0):
        raise BadInput(f"beta = {beta} must be a negative energy in eV (about -2.4 to -2.7)")
    levels, filled = _filled(matrix, electrons)
    x = np.where(levels.energies == 0, 0.0, -levels.energies)  # no minus zero
    homo, lumo = _frontier(x, levels.index, electrons, n)
    gap = None if homo is None or lumo is None else max(homo - lumo, 0.0)
    open_shell = gap is not None and gap <= finest(matrix)
    orders = populations = energy = by_orders = None
    if levels.states is not None:
        orders, populations, by_orders = _density(matrix, levels.states, filled)
        orders = orders * framework.signs
        energy = float(filled @ x)
    return HueckelSheet(
        x=x,
        index=levels.index,
        occupation=filled,
        electrons=electrons,
        homo=homo,
        lumo=lumo,
        gap=0.0 if open_shell else gap,
        open_shell=open_shell,
        bond_orders=orders,
        populations=populations,
        charges=None if populations is None else atoms.electrons - populations,
        pi_energy=energy,
        signed_orders_energy=by_orders,
        certificate=levels.certificate,
        beta=beta,
    )


def _frontier(
    x: FloatArray, index: IntArray, electrons: int, n: int
) -> tuple[float | None, float | None]:
    """x of the highest level with electrons and of the lowest with room."""
    highest, lowest = -(-electrons // 2) - 1, electrons // 2
    first = int(index[0])
    homo = float(x[highest - first]) if highest >= 0 else None
    lumo = float(x[lowest - first]) if lowest < n else None
    return homo, lumo


def _filled(matrix: Hamiltonian, electrons: int) -> tuple[Levels, FloatArray]:
    """All levels with states, or those around the gap of a large frame, and their electrons."""
    n, same = matrix.n, finest(matrix)
    if n <= MOST_STATES:
        levels = all_levels(matrix, states=True)
        filled = occupations(levels, Filling(electrons=electrons, spin=2), sites=n, same=same)
        assert filled is not None, "the spectrum is complete"
        return levels, filled
    highest, lowest = -(-electrons // 2) - 1, electrons // 2
    first, last = max(highest - AROUND, 0), min(lowest + AROUND, n - 1)
    try:
        levels = levels_at(matrix, first, last)
    except NotCertified:
        levels = _by_bands(matrix, highest, lowest)
    return levels, _shared(levels.energies, levels.index, electrons, same)


def _by_bands(matrix: Hamiltonian, highest: int, lowest: int) -> Levels:
    """Levels around the gap by position, where the iteration did not complete them.

    Slow (tens of seconds for a wide belt of 10,000 atoms) and sure: the matrix is brought to a
    narrow band and to three diagonals, whose levels bisection finds by their number.
    """
    plain = matrix.matrix()
    order = reverse_cuthill_mckee(plain, symmetric_mode=True)
    moved = plain[order][:, order].tocoo()
    row, column = moved.coords
    lower = row >= column
    bands = np.zeros((int((row - column).max()) + 1, matrix.n))
    bands[(row - column)[lower], column[lower]] = moved.data[lower]
    first, last = max(highest - AROUND_BANDS, 0), min(lowest + AROUND_BANDS, matrix.n - 1)
    energies = np.sort(
        scipy.linalg.eigvals_banded(bands, lower=True, select="i", select_range=(first, last))
    )
    return Levels(
        energies=energies,
        index=np.arange(first, last + 1),
        certificate=Certificate(
            method="dense",
            lower=float(energies[0]),
            upper=float(energies[-1]),
            count_lower=first,
            count_upper=last + 1,
            found=energies.size,
        ),
        flux=0.0,
        unit=matrix.unit,
    )


def _shared(energies: FloatArray, index: IntArray, electrons: int, same: float) -> FloatArray:
    """Occupation of a window of whole shells."""
    filled = np.clip(electrons - 2.0 * index, 0.0, 2.0)
    shell = np.cumsum(np.concatenate([[False], np.diff(energies) > same]))
    return np.asarray((np.bincount(shell, weights=filled) / np.bincount(shell))[shell])


def _density(
    matrix: Hamiltonian, states: FloatArray, filled: FloatArray
) -> tuple[FloatArray, FloatArray, float]:
    """Bond orders (without the sign of the bond), populations, and the energy they make.

    p_ij = sum n_k c_ik c_jk and q_i = p_ii (Coulson, Proc. R. Soc. A 169, 413 (1939)).
    """
    bonds = matrix.network.bonds
    held = filled > 0
    weighted = states[:, held] * filled[held]
    orders = np.einsum("ik,ik->i", weighted[bonds.tail], states[bonds.head][:, held])
    populations = np.einsum("ik,ik->i", weighted, states[:, held])
    energy = -populations @ matrix.site_energies - 2 * orders @ matrix.amplitudes
    return np.asarray(orders), np.asarray(populations), float(energy)
