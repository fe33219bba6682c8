"""Every check of the checks table passes on good rings and fails on rings broken on purpose.

A breakage is made on the assembled ring (a bond taken out, an amplitude halved, a phase
stretched ...), and the table below says which checks must notice it. What the identities behind
the checks say: double cover - P. W. Fowler, Phys. Chem. Chem. Phys. 4, 2878 (2002); period one
in flux - N. Byers & C. N. Yang, Phys. Rev. Lett. 7, 46 (1961); inertia counts - J. J. Sylvester
(1852), see B. N. Parlett, The Symmetric Eigenvalue Problem (1998).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from ribbon.analysis import Levels, all_levels, levels_between, levels_near
from ribbon.hopping import Hamiltonian, Hopping, assemble, draw_vacancies
from ribbon.lattice import Ring, certify_topology, close_strip, lay_strip, remove_sites
from ribbon.lattice import ring as ring_module
from ribbon.study import checks as checks_module
from ribbon.study import run as run_module
from ribbon.study.checks import GENERIC_FLUX, check_levels, check_ring, check_structure
from ribbon.study.ribbonfile import RibbonFile

STRUCTURE = {"coordination", "boundary loops", "Euler characteristic", "orientability"}
MATRIX = {
    *("Hermitian", "covariance of the seam", "flux on the seam"),
    *("period of one flux quantum", "double cover"),
}
SPECTRUM = {"trace of H", "trace of H²", "sum of all currents"}
LEVELS = {"count certificate", "largest residual"}

PLAIN, ODD = "even number of half twists", "odd number of half twists"
RINGS = {
    "square": ("square", 3, 9, 1, "s"),
    "square, pz": ("square", 4, 8, 1, "pz"),
    "square, h = 2": ("square", 4, 8, 2, None),
    "zigzag": ("honeycomb-zigzag", 3, 5.5, 1, "pz"),
    "zigzag, even rows": ("honeycomb-zigzag", 4, 6, 1, "pz"),
    "zigzag, plain": ("honeycomb-zigzag", 3, 5, 0, None),
    "armchair": ("honeycomb-armchair", 5, 4, 1, "pz"),
    "armchair, h = 3": ("honeycomb-armchair", 4, 4.5, 3, "pz"),
    "armchair, plain": ("honeycomb-armchair", 5, 4, 0, None),
}
MORE_RINGS = {
    "triangular": ("triangular", 3, 7, 1, "s"),
    "kagome": ("kagome", 5, 4.5, 1, "pz"),
    "Lieb": ("lieb", 3, 4, 1, "s"),
    "annulene": ("square", 1, 16, 1, "pz"),
    "one column": ("square", 3, 1, 1, "pz"),
    "half a period": ("honeycomb-zigzag", 3, 0.5, 1, "s"),
}


def ring_named(name: str, shells: int = 1) -> Ring:
    lattice, rows, length, half_twists, orbital = {**RINGS, **MORE_RINGS}[name]
    strip = lay_strip(lattice, rows=rows, length=length)
    return close_strip(strip, half_twists=half_twists, orbital=orbital, shells=shells)


def run_checks(hamiltonian: Hamiltonian, flux: float = GENERIC_FLUX) -> dict[str, bool]:
    """Structure and matrix checks of a Hamiltonian: name -> passed."""
    ring = hamiltonian.ring
    assert ring is not None
    done = [*check_structure(ring, certify_topology(ring))]
    done += check_ring(hamiltonian, flux, near=0.1)
    assert len({check.name for check in done}) == len(done)
    assert all(check.passed == (check.value <= check.limit) for check in done)
    return {check.name: check.passed for check in done}


def failing(hamiltonian: Hamiltonian, flux: float = GENERIC_FLUX) -> set[str]:
    return {name for name, passed in run_checks(hamiltonian, flux).items() if not passed}


# --- good rings ----------------------------------------------------------------------------------


@pytest.mark.parametrize("name", [*RINGS, *MORE_RINGS])
@pytest.mark.parametrize("flux", [0.0, GENERIC_FLUX])
def test_good_rings_pass_everything(name: str, flux: float) -> None:
    """Clean rings of every lattice, short ones included: each check runs and passes."""
    done = run_checks(assemble(ring_named(name), Hopping()), flux)
    assert set(done) == STRUCTURE | MATRIX | SPECTRUM
    assert all(done.values())


@pytest.mark.parametrize("name", RINGS)
def test_good_rings_with_disorder_and_further_neighbours_pass(name: str) -> None:
    """Three shells and random site energies: the cover carries them lifted."""
    hopping = Hopping(shells=(1.0, 0.2, -0.1), disorder=1.5, seed=7)
    done = run_checks(assemble(ring_named(name, shells=3), hopping))
    assert set(done) == STRUCTURE | MATRIX | SPECTRUM
    assert all(done.values())


@pytest.mark.parametrize("name", RINGS)
def test_good_rings_with_vacancies_pass(name: str) -> None:
    """Coordination, faces and loops are asked of the ring with its sites put back."""
    ring = ring_named(name)
    ring = remove_sites(ring, draw_vacancies(ring.n, 0.1, seed=3))
    done = run_checks(assemble(ring, Hopping(disorder=0.5)))
    assert set(done) >= MATRIX | SPECTRUM | {"coordination", "boundary loops"}
    assert all(done.values())


# --- rings broken on purpose ---------------------------------------------------------------------


def seam_bonds(ring: Ring) -> np.ndarray:
    return np.flatnonzero(ring.bonds.winding)


def height_of_bonds(ring: Ring) -> np.ndarray:
    """Distance of the middle of every bond from the midline."""
    return np.abs(ring.positions[ring.bonds.tail, 1] + ring.bonds.displacement[:, 1] / 2)


def with_bonds(ring: Ring, **changes: Any) -> Ring:
    return replace(ring, bonds=replace(ring.bonds, **changes))


def without_bonds(ring: Ring, bonds: np.ndarray | int) -> Ring:
    keep = np.ones(ring.bonds.m, dtype=bool)
    keep[bonds] = False
    return replace(ring, bonds=ring.bonds.select(keep))


def lost_inner_bond(ring: Ring) -> Hamiltonian:
    """The seam bond nearest to the midline is forgotten: two faces become one hole."""
    seam = seam_bonds(ring)
    return assemble(without_bonds(ring, seam[np.argmin(height_of_bonds(ring)[seam])]), Hopping())


def lost_edge_bond(ring: Ring) -> Hamiltonian:
    """The outermost seam bond is forgotten: its face opens to the boundary."""
    seam = seam_bonds(ring)
    return assemble(without_bonds(ring, seam[np.argmax(height_of_bonds(ring)[seam])]), Hopping())


def lost_all_seam_bonds(ring: Ring) -> Hamiltonian:
    return assemble(without_bonds(ring, seam_bonds(ring)), Hopping())


def doubled_bond(ring: Ring) -> Hamiltonian:
    again = np.append(np.arange(ring.bonds.m), seam_bonds(ring)[0])
    return assemble(replace(ring, bonds=ring.bonds.select(again)), Hopping())


def scaled_seam(ring: Ring, factor: float) -> Hamiltonian:
    good = assemble(ring, Hopping())
    amplitudes = good.amplitudes.copy()
    amplitudes[seam_bonds(ring)] *= factor
    return replace(good, amplitudes=amplitudes)


def weak_seam(ring: Ring) -> Hamiltonian:
    return scaled_seam(ring, 0.5)


def barely_weak_seam(ring: Ring) -> Hamiltonian:
    return scaled_seam(ring, 1 - 1e-7)


def forgotten_sign(ring: Ring) -> Hamiltonian:
    """The amplitudes of an s ring on a pz ring, or the reverse."""
    return scaled_seam(ring, -1.0)


def shifted_energies(ring: Ring) -> Hamiltonian:
    """One site energy is not the one the hopping gives."""
    good = assemble(ring, Hopping(site_energy=0.3))
    energies = good.site_energies.copy()
    energies[1] += 0.1
    return replace(good, site_energies=energies)


class _OneWay(Hamiltonian):
    """Both directions of a bond carry the same element, none is conjugated."""

    def data(self, flux: float = 0.0, *, gauge: Any = "uniform") -> Any:
        bonds = self.amplitudes * self._phases(flux, gauge)
        values = np.concatenate([bonds, bonds, self.site_energies[self._diagonal]])
        return np.add.reduceat(values[self._pattern.order], self._pattern.starts)


class _Long(Hamiltonian):
    """Every phase is one per cent too large, in either gauge."""

    def bond_turns(self, gauge: Any) -> Any:
        return 1.01 * super().bond_turns(gauge)


class _Reversed(Hamiltonian):
    """The charge has the wrong sign, in either gauge."""

    def bond_turns(self, gauge: Any) -> Any:
        return -super().bond_turns(gauge)


def as_kind(kind: type[Hamiltonian]) -> Callable[[Ring], Hamiltonian]:
    def broken(ring: Ring) -> Hamiltonian:
        good = assemble(ring, Hopping())
        return kind(
            network=good.network,
            hopping=good.hopping,
            amplitudes=good.amplitudes,
            site_energies=good.site_energies,
        )

    broken.__name__ = kind.__name__.strip("_").lower()
    return broken


def stretched_displacements(ring: Ring) -> Hamiltonian:
    """Displacements ten per cent too long: a phase that does not add up to whole quanta."""
    return assemble(with_bonds(ring, displacement=1.1 * ring.bonds.displacement), Hopping())


def stretched_seam(ring: Ring) -> Hamiltonian:
    """The same on the seam alone."""
    displacement = ring.bonds.displacement.copy()
    displacement[seam_bonds(ring)] *= 1.1
    return assemble(with_bonds(ring, displacement=displacement), Hopping())


def winding_twice(ring: Ring) -> Hamiltonian:
    """Two flux quanta instead of one sit on the seam; the amplitudes are right."""
    wound = with_bonds(ring, winding=2 * ring.bonds.winding)
    return replace(assemble(ring, Hopping()), network=wound)


def winding_backward(ring: Ring) -> Hamiltonian:
    """The seam carries the flux the wrong way: right levels, all currents reversed."""
    wound = with_bonds(ring, winding=-ring.bonds.winding)
    return replace(assemble(ring, Hopping()), network=wound)


def unmarked_flip(ring: Ring) -> Hamiltonian:
    """Bonds through a flipped seam are not marked orientation-reversing, or the reverse."""
    mirrored = np.zeros(ring.bonds.m, dtype=bool)
    if not ring.flips:
        mirrored[seam_bonds(ring)] = True
    return assemble(with_bonds(ring, mirrored=mirrored), Hopping())


SEAM = {"covariance of the seam", "double cover"}
PHASE = {"covariance of the seam", "period of one flux quantum"}
CHARACTER = {"boundary loops", "Euler characteristic", "orientability"}

# Breakage -> checks that must fail on every ring at the generic flux; where it depends on the
# ring: those of even and odd numbers of half twists, and those that may fail besides.
BROKEN: list[tuple[Callable[[Ring], Hamiltonian], set[str], dict[str, set[str]], set[str]]] = [
    (lost_inner_bond, {"coordination", "boundary loops", "Euler characteristic", *SEAM}, {}, set()),
    (lost_edge_bond, {"coordination", *SEAM}, {}, set()),
    (
        lost_all_seam_bonds,
        {"coordination", "Euler characteristic", *SEAM},
        {PLAIN: {"boundary loops"}, ODD: {"orientability"}},
        set(),
    ),
    (doubled_bond, {"coordination", "Euler characteristic", *SEAM}, {}, {"boundary loops"}),
    (weak_seam, SEAM, {}, set()),
    (barely_weak_seam, SEAM, {}, set()),
    # with an even number of half twists the cover holds both signs anyway
    (forgotten_sign, {"covariance of the seam"}, {ODD: {"double cover"}}, set()),
    (shifted_energies, {"covariance of the seam"}, {}, set()),
    (as_kind(_OneWay), {"Hermitian", "flux on the seam", *PHASE}, {}, set()),
    (as_kind(_Long), {"flux on the seam", "double cover", *PHASE}, {}, set()),
    (as_kind(_Reversed), {"flux on the seam", *PHASE}, {}, set()),
    (stretched_displacements, {"flux on the seam", *PHASE}, {}, set()),
    (stretched_seam, {"flux on the seam", *PHASE}, {}, set()),
    (winding_twice, {"flux on the seam", "double cover"}, {}, set()),
    (unmarked_flip, {"Euler characteristic", "orientability"}, {}, CHARACTER),
]


@pytest.mark.parametrize("name", RINGS)
@pytest.mark.parametrize(
    ("breaking", "always", "by_twists", "maybe"),
    BROKEN,
    ids=[entry[0].__name__ for entry in BROKEN],
)
def test_broken_rings_fail_the_checks_that_concern_them(
    name: str,
    breaking: Callable[[Ring], Hamiltonian],
    always: set[str],
    by_twists: dict[str, set[str]],
    maybe: set[str],
) -> None:
    """Exactly the checks of the table fail, and the others of the same ring still pass."""
    ring = ring_named(name)
    wanted = always | by_twists.get(ODD if ring.flips else PLAIN, set())
    found = failing(breaking(ring))
    assert wanted <= found <= wanted | maybe


@pytest.mark.parametrize("name", RINGS)
def test_a_flux_carried_backward_by_the_seam_is_noticed(name: str) -> None:
    """Levels at flux and -flux are equal; entries of the gauge transformation are not."""
    assert "flux on the seam" in failing(winding_backward(ring_named(name)))


@pytest.mark.parametrize("name", ["square", "square, pz", "zigzag, even rows", "armchair"])
def test_a_seam_that_forgets_to_flip_is_noticed_by_the_faces(
    name: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    """The plain ring marked as flipped: periodic and antiperiodic levels still fill the cover,
    but faces do not close on the sites the seam reaches."""
    right = ring_module.make_seam

    def unflipped(strip: Any, half_twists: int, orbital: Any) -> Any:
        seam = right(strip, half_twists, orbital)
        if not seam.flips:
            return seam
        plain = right(strip, 0, None)
        return replace(seam, back_site=plain.back_site, back_shift=plain.back_shift)

    monkeypatch.setattr(ring_module, "make_seam", unflipped)
    assert failing(assemble(ring_named(name), Hopping())) == {"Euler characteristic"}


@pytest.mark.parametrize("name", ["square", "zigzag", "armchair"])
def test_a_missing_conjugate_needs_a_flux_to_be_seen(name: str) -> None:
    """At flux 0 all elements are real: only the step of a whole quantum shows it."""
    broken = as_kind(_OneWay)(ring_named(name))
    assert failing(broken, 0.0) == {"period of one flux quantum"}


@pytest.mark.parametrize("flux", [0.0, GENERIC_FLUX])
@pytest.mark.parametrize("name", ["square", "zigzag", "armchair"])
def test_faults_at_the_seam_show_through_disorder_and_vacancies(name: str, flux: float) -> None:
    """Without a promise on loops and coordination, covariance and the cover still notice."""
    ring = ring_named(name)
    ring = remove_sites(ring, [2, 11])
    hopping = Hopping(disorder=1.0)
    lost = assemble(without_bonds(ring, seam_bonds(ring)[1]), hopping)
    good = assemble(ring, hopping)
    amplitudes = good.amplitudes.copy()
    amplitudes[seam_bonds(ring)] *= 0.5
    for broken in (lost, replace(good, amplitudes=amplitudes)):
        assert failing(broken, flux) == SEAM


def test_a_cover_without_lifted_disorder_fails(monkeypatch: pytest.MonkeyPatch) -> None:
    """V(n, m) laid twice, the second time not flipped, is another ring."""
    right = checks_module.double_cover

    def not_lifted(ring: Ring) -> Any:
        cover, _ = right(ring)
        return cover, np.tile(np.arange(ring.n), 2)

    hamiltonian = assemble(ring_named("square"), Hopping(disorder=1.0))
    assert failing(hamiltonian) == set()
    monkeypatch.setattr(checks_module, "double_cover", not_lifted)
    assert failing(hamiltonian) == {"double cover"}


# --- large rings take other routes ---------------------------------------------------------------

SPARSE_TABLE = [
    (lost_inner_bond, SEAM),
    (weak_seam, SEAM),
    (forgotten_sign, SEAM),
    (as_kind(_OneWay), {"Hermitian", "flux on the seam", *PHASE}),
    # levels of a clean large ring come from blocks, which a wrong phase of the matrix leaves alone
    (as_kind(_Long), {"flux on the seam", *PHASE}),
    (stretched_seam, {"flux on the seam", *PHASE}),
    (winding_twice, {"flux on the seam", "double cover"}),
    (winding_backward, {"flux on the seam"}),
]


@pytest.mark.parametrize("name", ["square, pz", "zigzag", "armchair"])
def test_good_large_rings_pass(name: str, monkeypatch: pytest.MonkeyPatch) -> None:
    """Sizes from which nothing is diagonalised whole, brought down to small rings."""
    monkeypatch.setattr(checks_module, "SMALL", 0)
    monkeypatch.setattr(checks_module, "SMALL_COVER", 0)
    clean = run_checks(assemble(ring_named(name), Hopping()))
    assert set(clean) == STRUCTURE | MATRIX | SPECTRUM
    rough = run_checks(assemble(ring_named(name), Hopping(disorder=0.7)))
    assert set(rough) == STRUCTURE | MATRIX
    assert all(clean.values())
    assert all(rough.values())


@pytest.mark.parametrize("name", ["square, pz", "zigzag", "armchair"])
@pytest.mark.parametrize(("breaking", "expected"), SPARSE_TABLE)
def test_broken_large_rings_fail(
    name: str,
    breaking: Callable[[Ring], Hamiltonian],
    expected: set[str],
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    """The same faults are found by certified windows and entry-by-entry gauges."""
    monkeypatch.setattr(checks_module, "SMALL", 0)
    monkeypatch.setattr(checks_module, "SMALL_COVER", 0)
    assert failing(breaking(ring_named(name))) - STRUCTURE == expected


def test_a_disordered_large_ring_with_a_weak_seam_fails(monkeypatch: pytest.MonkeyPatch) -> None:
    """Neither ring nor cover has blocks: 24 certified levels near the middle decide."""
    monkeypatch.setattr(checks_module, "SMALL", 0)
    monkeypatch.setattr(checks_module, "SMALL_COVER", 0)
    good = assemble(ring_named("zigzag"), Hopping(disorder=0.5))
    amplitudes = good.amplitudes.copy()
    amplitudes[seam_bonds(ring_named("zigzag"))] *= 0.5
    done = {c.name: c for c in check_ring(replace(good, amplitudes=amplitudes), 0.1, near=0.1)}
    assert not done["double cover"].passed
    assert "levels near 0.1" in done["double cover"].note


# --- spectra that are wrong ----------------------------------------------------------------------


def patched_levels(change: Callable[[Levels], Levels], hamiltonian: Hamiltonian) -> Any:
    """``all_levels`` that spoils the spectrum of one Hamiltonian and of no other."""

    def spoiled(asked: Hamiltonian, **options: Any) -> Levels:
        found = all_levels(asked, **options)
        return change(found) if asked is hamiltonian else found

    return spoiled


def moved(levels: Levels, *shifts: float) -> Levels:
    energies = levels.energies.copy()
    energies[3 : 3 + len(shifts)] += shifts
    return replace(levels, energies=energies)


def one_slope_off(levels: Levels) -> Levels:
    if levels.slopes is None:  # asked for energies alone
        return levels
    slopes = levels.slopes.copy()
    slopes[3] += 1e-3
    return replace(levels, slopes=slopes)


WRONG_SPECTRA = [
    (lambda levels: moved(levels, 1e-4), {"trace of H", "trace of H²"}),
    (lambda levels: moved(levels, 1e-4, -1e-4), {"trace of H²"}),
    (one_slope_off, {"sum of all currents"}),
]


@pytest.mark.parametrize("width", [0.0, 0.5])
@pytest.mark.parametrize("name", ["square", "zigzag", "armchair"])
@pytest.mark.parametrize(("change", "expected"), WRONG_SPECTRA)
def test_wrong_spectra_fail_the_traces(
    name: str,
    width: float,
    change: Callable[[Levels], Levels],
    expected: set[str],
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    """Sum of levels = Tr H, of squares = Tr H², of slopes = Tr dH/dΦ, at the same flux.

    Where levels come from blocks, the assembled matrix notices them too.
    """
    hamiltonian = assemble(ring_named(name), Hopping(disorder=width))
    monkeypatch.setattr(checks_module, "all_levels", patched_levels(change, hamiltonian))
    found = failing(hamiltonian)
    assert found & SPECTRUM == expected
    by_blocks = width == 0.0 and "sum of all currents" not in expected
    assert found - SPECTRUM == ({"flux on the seam"} if by_blocks else set())


def test_currents_of_a_site_that_meets_itself_are_compared_with_the_trace() -> None:
    """A ring of one column: the sum of currents is Tr dH/dΦ, not zero, and the check says so."""
    hamiltonian = assemble(ring_named("one column"), Hopping())
    done = {c.name: c for c in check_ring(hamiltonian, GENERIC_FLUX, near=0.0)}
    assert "meets itself" in done["sum of all currents"].note
    assert done["sum of all currents"].passed
    slopes = all_levels(hamiltonian, flux=GENERIC_FLUX, slopes=True).slopes
    assert slopes is not None
    assert abs(slopes.sum()) > 0.1


# --- windows that miss a level -------------------------------------------------------------------


@pytest.fixture
def window() -> tuple[Hamiltonian, Levels]:
    """Levels of a disordered ring between two energies, with states."""
    ring = close_strip(lay_strip("square", rows=3, length=9), half_twists=1, orbital="s")
    hamiltonian = assemble(ring, Hopping(disorder=0.5))
    return hamiltonian, levels_between(hamiltonian, -1.0, 1.0, flux=GENERIC_FLUX, states=True)


def verdict(hamiltonian: Hamiltonian, levels: Levels) -> dict[str, bool]:
    return {check.name: check.passed for check in check_levels(hamiltonian, levels)}


def dropped(levels: Levels, number: int, **certificate: int) -> Levels:
    """The levels without one of them; the certificate is changed as told."""
    keep = np.arange(levels.m) != number
    assert levels.states is not None
    return replace(
        levels,
        energies=levels.energies[keep],
        index=levels.index[keep],
        states=levels.states[:, keep],
        slopes=None,
        certificate=replace(levels.certificate, **certificate),
    )


@pytest.mark.parametrize("method", ["symmetry", "dense", "sparse"])
@pytest.mark.parametrize("name", ["square", "zigzag", "armchair"])
def test_certified_windows_pass(name: str, method: Any) -> None:
    """Counts of the matrix itself (law of inertia) agree with the window of every method."""
    hamiltonian = assemble(ring_named(name), Hopping())
    for flux in (0.0, GENERIC_FLUX):
        found = levels_near(hamiltonian, 0.0, count=7, flux=flux, states=True, method=method)
        assert verdict(hamiltonian, found) == {"count certificate": True, "largest residual": True}
        empty = levels_between(hamiltonian, 7.0, 8.0, flux=flux, method=method)
        assert verdict(hamiltonian, empty)["count certificate"]
    whole = all_levels(hamiltonian, flux=0.3, states=True)
    assert verdict(hamiltonian, whole) == {"count certificate": True, "largest residual": True}


def test_a_window_that_admits_a_missing_level_fails(window: Any) -> None:
    """The counts at the edges say one more than was found."""
    hamiltonian, levels = window
    assert verdict(hamiltonian, levels) == {"count certificate": True, "largest residual": True}
    short = dropped(levels, 3, found=levels.m - 1)
    assert verdict(hamiltonian, short) == {"count certificate": False, "largest residual": True}


def test_a_window_numbered_as_if_nothing_were_missing_fails(window: Any) -> None:
    """A level in the middle is gone and the others moved down by one: inertia counts disagree."""
    hamiltonian, levels = window
    upper = levels.certificate.count_upper - 1
    short = dropped(levels, 3, found=levels.m - 1, count_upper=upper)
    short = replace(short, index=levels.index[:-1])
    assert not verdict(hamiltonian, short)["count certificate"]


def test_a_window_numbered_from_the_wrong_level_fails(window: Any) -> None:
    """All indices one too large: the count below the first level disagrees."""
    hamiltonian, levels = window
    assert not verdict(hamiltonian, replace(levels, index=levels.index + 1))["count certificate"]


HOLLOW = {
    "a gap in the indices": lambda levels: dropped(
        levels, 3, found=levels.m - 1, count_upper=levels.certificate.count_upper - 1
    ),
    "the level at the upper edge": lambda levels: dropped(
        levels,
        levels.m - 1,
        found=levels.m - 1,
        count_upper=levels.certificate.count_upper - 1,
    ),
    "the level at the lower edge": lambda levels: dropped(
        levels, 0, found=levels.m - 1, count_lower=levels.certificate.count_lower + 1
    ),
    "a certificate that boasts": lambda levels: dropped(levels, 3),
    "an empty window": lambda levels: levels.part(0, 0, lower=-1.0, upper=1.0),
}


@pytest.mark.parametrize("missing", HOLLOW)
def test_a_certificate_that_misses_a_level_fails(window: Any, missing: str) -> None:
    """Counts at the certificate's own edges, and the number of levels held, must agree."""
    hamiltonian, levels = window
    assert not verdict(hamiltonian, HOLLOW[missing](levels))["count certificate"]


def test_a_large_residual_fails(window: Any) -> None:
    """The number reported decides."""
    hamiltonian, levels = window
    found = verdict(hamiltonian, replace(levels, residual=1e-6))
    assert found == {"count certificate": True, "largest residual": False}


@pytest.mark.parametrize("spoiled", ["a state", "an energy", "the gauge"])
def test_a_wrong_state_fails_the_residual(window: Any, spoiled: str) -> None:
    """Norm of H psi - E psi of the states as they are handed over, in the uniform gauge."""
    hamiltonian, levels = window
    states, energies = levels.states.copy(), levels.energies.copy()
    if spoiled == "a state":
        states[:, 2] = states[:, 1]
    elif spoiled == "an energy":
        energies[2] += 1e-5
    else:
        states = states * np.exp(2j * np.pi * GENERIC_FLUX * hamiltonian.site_turns)[:, None]
    wrong = replace(levels, states=states, energies=energies)
    assert not verdict(hamiltonian, wrong)["largest residual"]


# --- in a study ----------------------------------------------------------------------------------


def small_file(**tables: Any) -> RibbonFile:
    ribbon = {"lattice": "square", "rows": 2, "length": 7.0, "orbital": "pz"}
    given = {"sweep": {"flux": {"points": 3}}, "control": {"compare": []}, **tables}
    return RibbonFile.model_validate({"ribbon": ribbon, "hopping": {"unit": "t"}, **given})


def test_a_study_runs_every_check_at_two_fluxes() -> None:
    """Each check of the table once at the file's flux and once at the generic one."""
    result = run_module.run_study(small_file(field={"flux": 0.25}))
    listed = [(check.name, check.flux) for check in result.checks]
    assert len(set(listed)) == len(listed)
    assert {name for name, flux in listed if flux is None} == STRUCTURE
    for flux in (0.25, GENERIC_FLUX):
        assert {name for name, at in listed if at == flux} - LEVELS == MATRIX | SPECTRUM
    assert {name for name, at in listed if at == 0.25} >= LEVELS
    assert all(check.passed for check in result.checks)


def test_levels_and_flux_run_the_checks_that_concern_them() -> None:
    """Matrix, spectrum and window; shape is for the study."""
    for run in (run_module.run_levels, run_module.run_flux):
        result = run(small_file(field={"flux": GENERIC_FLUX}))
        assert {check.name for check in result.checks} == MATRIX | SPECTRUM | LEVELS
        assert all(check.passed for check in result.checks)


def test_a_study_of_a_broken_ring_says_which_checks_failed(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    """The seam of the ribbon is halved after it was built: the result carries the failures."""
    right = run_module.build

    def broken(file: RibbonFile) -> Any:
        plan = right(file)
        weak = weak_seam(plan.ring)
        return replace(plan, model=replace(plan.model, hamiltonian=weak))

    monkeypatch.setattr(run_module, "build", broken)
    result = run_module.run_study(small_file())
    assert {check.name for check in result.checks if not check.passed} == SEAM
