"""Sweeps from one small problem: levels, slopes, counts and branches against dense spectra.

Outside sources: LAPACK on the full matrices at every flux (numpy), counts of its eigenvalues, the
Hellmann-Feynman theorem and finite differences, Byers & Yang's period, Cauchy's interlacing.
"""

from __future__ import annotations

import dataclasses
import itertools
from typing import Any

import numpy as np
import pytest

from ribbon.analysis import FluxResponse, Window, sweep_flux
from ribbon.analysis import reduction as reduction_module
from ribbon.analysis.levels import tolerance
from ribbon.analysis.reduced import Reduced, _shells_between
from ribbon.analysis.reduction import find_reduced
from ribbon.analysis.seam import CountedEdge, find_seam, respond, solver
from ribbon.hopping import Hamiltonian, Hopping, assemble
from ribbon.hopping.amplitudes import draw_vacancies
from ribbon.lattice import close_strip, lay_strip, remove_sites

LEVEL = 1e-9
SLOPE = 1e-6
FLUXES = np.sort(np.concatenate([np.linspace(-0.103, 0.6, 24), [0.0, 0.5]]))

RINGS: dict[str, dict[str, Any]] = {
    "square": {"disorder": 0.5},
    "square-pz": {"lattice": "square", "orbital": "pz", "disorder": 0.5},
    "zigzag": {"lattice": "honeycomb-zigzag", "length": 30, "orbital": "pz"},
    "armchair": {"lattice": "honeycomb-armchair", "rows": 5, "length": 20, "disorder": 1.0},
    "kagome": {"rows": 3, "length": 50, "disorder": 0.4},
    "localised": {"lattice": "lieb", "rows": 3, "length": 50, "disorder": 0.2, "vacancies": 0.03},
    "two turns": {"lattice": "triangular", "rows": 3, "length": 70, "twists": 2, "orbital": None},
    "far": {"lattice": "square", "shells": (1.0, 0.2, -0.1), "vacancies": 0.05},
    "wire": {"lattice": "square", "rows": 1, "length": 200, "orbital": "pz", "disorder": 0.05},
    "short": {"lattice": "square", "rows": 90, "length": 1, "shells": (1.0, 0.3, 0.2)},
    "clean": {"lattice": "square", "rows": 3, "twists": 0, "orbital": None, "disorder": 0.0},
}
WINDOWS = [Window(near=-0.31, count=12), Window(near=0.0, count=6), Window(between=(-0.52, -0.4))]


def ring(name: str, **changes: Any) -> Hamiltonian:
    """A Hamiltonian of the table above."""
    given = {"lattice": name, "rows": 4, "twists": 1, "orbital": "s", "disorder": 0.3}
    given |= {"shells": (1.0,), "vacancies": 0.0, "length": 60} | RINGS[name] | changes
    strip = lay_strip(given["lattice"], rows=given["rows"], length=given["length"])
    shells = given["shells"]
    closed = close_strip(
        strip, half_twists=given["twists"], orbital=given["orbital"], shells=len(shells)
    )
    if given["vacancies"]:
        closed = remove_sites(closed, draw_vacancies(closed.n, given["vacancies"], seed=2))
    return assemble(closed, Hopping(shells=shells, disorder=given["disorder"], seed=5))


@pytest.fixture(autouse=True)
def reduced_everywhere(monkeypatch: pytest.MonkeyPatch) -> None:
    """Small rings, clean ones too, take the way of large ones without symmetry."""
    monkeypatch.setattr("ribbon.analysis.flux.fits_dense", lambda *_, **__: False)
    for place in ("flux", "spectrum"):
        monkeypatch.setattr(f"ribbon.analysis.{place}.blocks_of", lambda _: None)
    monkeypatch.setattr("ribbon.analysis.spectrum.DENSE_WINDOW", 0)
    monkeypatch.setattr(reduction_module, "FEWEST", 0)
    monkeypatch.setattr(reduction_module, "SHARE", 0.1)


def dense(hamiltonian: Hamiltonian, flux: float) -> tuple[np.ndarray, np.ndarray]:
    """All levels and slopes by LAPACK, slopes diagonal inside shells."""
    energies, states = np.linalg.eigh(hamiltonian.matrix(flux).toarray())
    change = states.conj().T @ (hamiltonian.slope_matrix(flux) @ states)
    slopes = np.diagonal(change).real.copy()
    edges = np.flatnonzero(np.diff(energies, prepend=-np.inf, append=np.inf) > 1e-9)
    for first, last in itertools.pairwise(edges):
        slopes[first:last] = np.linalg.eigvalsh(change[first:last, first:last])
    return energies, slopes


def expected(hamiltonian: Hamiltonian, window: Window, energies: np.ndarray) -> tuple[int, int]:
    """First and last position of a window, from its definition."""
    same = tolerance(hamiltonian)
    if window.between is not None:
        lower, upper = window.between
        inside = np.flatnonzero((energies > lower - same) & (energies < upper + same))
    else:
        distance = np.abs(energies - window.near)
        inside = np.flatnonzero(distance <= np.sort(distance)[window.count - 1] + same)
    first, last = int(inside[0]), int(inside[-1]) + 1
    while first > 0 and energies[first] - energies[first - 1] <= same:
        first -= 1
    while last < energies.size and energies[last] - energies[last - 1] <= same:
        last += 1
    return first, last


def check_rows(hamiltonian: Hamiltonian, window: Window, sweep: FluxResponse) -> None:
    """Every flux of a sweep against its complete dense spectrum."""
    for point, flux in enumerate(sweep.flux):
        energies, slopes = dense(hamiltonian, float(flux))
        first, last = expected(hamiltonian, window, energies)
        seen = sweep.level[point] >= 0
        np.testing.assert_array_equal(sweep.level[point][seen], np.arange(first, last))
        got = sweep.energy[point][seen]
        np.testing.assert_allclose(got, energies[first:last], rtol=0, atol=LEVEL)
        # in a shell the order of the slopes means nothing
        order = np.lexsort((sweep.slope[point][seen], np.round(got, 8)))
        known = np.lexsort((slopes[first:last], np.round(energies[first:last], 8)))
        size = float(np.max(np.abs(slopes)))
        np.testing.assert_allclose(
            sweep.slope[point][seen][order],
            slopes[first:last][known],
            rtol=0,
            atol=SLOPE * max(size, 1e-3),
        )


# --- sweeps --------------------------------------------------------------------------------------


@pytest.mark.parametrize(("name", "which"), [(name, i % 3) for i, name in enumerate(RINGS)])
def test_rows_are_those_of_dense_spectra(name: str, which: int) -> None:
    """Levels, indices and slopes at generic fluxes, across 0 and 1/2 (pairs by time reversal) and
    past them: LAPACK's of the full matrix (Hellmann-Feynman; flux period N. Byers & C. N. Yang,
    Phys. Rev. Lett. 7, 46 (1961))."""
    window = WINDOWS[which]
    hamiltonian = ring(name)
    fluxes = np.array([-0.11, 0.0, 0.27, 0.5, 1.27])
    sweep = sweep_flux(hamiltonian, fluxes, window=window)
    assert sweep.method == "reduced"
    assert sweep.totals is None
    check_rows(hamiltonian, window, sweep)


@pytest.mark.parametrize("name", ["square", "zigzag", "kagome", "far"])
def test_branches_are_those_of_the_way_flux_by_flux(name: str) -> None:
    """The same numbers as from full states at every flux, which test_joining holds against the
    momentum states of clean rings."""
    hamiltonian = ring(name)
    window = Window(near=-0.31, count=8)
    fluxes = FLUXES[FLUXES != 0]
    swift = sweep_flux(hamiltonian, fluxes, window=window)
    plain = sweep_flux(hamiltonian, fluxes, window=dataclasses.replace(window, method="sparse"))
    assert (swift.method, plain.method) == ("reduced", "sparse")
    np.testing.assert_array_equal(swift.branch, plain.branch)
    np.testing.assert_array_equal(swift.level, plain.level)
    np.testing.assert_allclose(swift.energy, plain.energy, rtol=0, atol=LEVEL)


def test_a_larger_ring_and_narrow_crossings() -> None:
    """800 sites, weak disorder: levels cross at distances of 1e-4 and below; as LAPACK has it,
    and slopes by finite differences of single levels where no other is near."""
    hamiltonian = ring("square", rows=4, length=200, disorder=1e-3)
    window = Window(near=-0.4, count=14)
    fluxes = np.array([0.05, 0.21, 0.2500001, 0.42])
    sweep = sweep_flux(hamiltonian, fluxes, window=window)
    assert sweep.method == "reduced"
    check_rows(hamiltonian, window, dataclasses.replace(sweep, flux=fluxes[:1]))
    step, compared = 1e-4, 0
    near = sweep_flux(hamiltonian, np.concatenate([fluxes - step, fluxes + step]), window=window)
    for point in range(fluxes.size):
        before, after = near.level[point], near.level[point + fluxes.size]
        for place, level in enumerate(sweep.level[point]):
            energy, slope = sweep.energy[point][place], sweep.slope[point][place]
            alone = np.sort(np.abs(sweep.energy[point] - energy))[1] > 1e-3
            if alone and level in before and level in after:
                up = near.energy[point + fluxes.size][after == level][0]
                down = near.energy[point][before == level][0]
                assert abs((up - down) / (2 * step) - slope) < 1e-5
                compared += 1
    assert compared > 8


def test_a_time_reversed_pair_broken_by_complex_amplitudes() -> None:
    """Amplitudes with random phases: complex at zero flux, no mirror; LAPACK's levels at +-flux,
    which differ."""
    real = ring("square")
    phases = np.exp(0.3j * np.random.default_rng(3).standard_normal(real.amplitudes.size))
    hamiltonian = Hamiltonian(
        network=real.network,
        hopping=real.hopping,
        amplitudes=real.amplitudes * phases,
        site_energies=real.site_energies,
    )
    window = Window(near=-0.31, count=10)
    sweep = sweep_flux(hamiltonian, [-0.2, 0.0, 0.2, 0.4], window=window)
    assert sweep.method == "reduced"
    check_rows(hamiltonian, window, sweep)
    assert np.abs(sweep.energy[0] - sweep.energy[2]).max() > 1e-5


def test_edges_that_cut_a_shell_take_it_whole() -> None:
    """A clean ring at zero flux holds +-k pairs: an edge on a pair, or a count that ends inside
    one, takes both (definition of the window; levels by LAPACK)."""
    hamiltonian = ring("clean")
    energies, _ = dense(hamiltonian, 0.0)
    pairs = np.flatnonzero(np.diff(energies) < 1e-12)
    place = int(pairs[np.argmin(np.abs(energies[pairs] + 0.4))])
    level = float(energies[place])
    for window in (
        Window(between=(level, level + 0.08)),
        Window(between=(level - 0.08, level)),
        Window(near=level, count=1),
        Window(near=level + 1e-3, count=1),
    ):
        sweep = sweep_flux(hamiltonian, [0.0, 0.1], window=window)
        assert sweep.method == "reduced"
        assert {place, place + 1} <= set(sweep.level[0].tolist())
        check_rows(hamiltonian, window, dataclasses.replace(sweep, flux=sweep.flux[:1]))


def test_an_empty_window() -> None:
    """Beyond the band there is no level: rows of width nought (Gershgorin's bound)."""
    sweep = sweep_flux(ring("square"), [0.0, 0.1, 0.2], window=Window(between=(6.0, 6.5)))
    assert sweep.method == "reduced"
    assert sweep.energy.shape == (3, 0)


# --- counts --------------------------------------------------------------------------------------


@pytest.mark.parametrize("name", ["square", "zigzag", "localised", "far", "short", "clean"])
def test_counts_from_the_small_matrix(name: str) -> None:
    """Number of LAPACK's eigenvalues below an energy, at random energies and down to 1e-11 from a
    level: right or left open, never wrong, and left open only close by."""
    hamiltonian = ring(name)
    seam = find_seam(hamiltonian)
    matrix = hamiltonian.matrix(0.0, gauge="seam")
    rng = np.random.default_rng(1)
    fluxes = rng.uniform(-1, 1, 6)
    spectra = [dense(hamiltonian, flux)[0] for flux in fluxes]
    zero = np.linalg.eigvalsh(matrix.toarray())
    close = np.array([spectra[i][rng.integers(hamiltonian.n)] for i in range(6)])
    close += 10.0 ** rng.uniform(-11, -5, 6) * rng.choice([-1, 1], 6)
    told = 0
    for energy in np.concatenate([rng.uniform(-3, 3, 10), close]):
        if np.min(np.abs(zero - energy)) < 1e-12:
            continue
        response = respond(matrix, energy, seam, solver(matrix, energy))
        below = int(np.count_nonzero(zero < energy))
        edge = CountedEdge(energy=energy, below=below, inner=response.inner, error=response.error)
        for flux, levels in zip(fluxes, spectra, strict=True):
            count = edge.count(seam.change(flux))
            if count is None:
                assert min(np.min(np.abs(levels - energy)), np.min(np.abs(zero - energy))) < 1e-6
            else:
                assert count == np.count_nonzero(levels < energy)
                told += 1
    assert told > 80


def test_an_edge_on_a_level_is_left_open() -> None:
    """At an eigenvalue by LAPACK the small matrix is singular (Haynsworth's additivity)."""
    hamiltonian = ring("square")
    seam, matrix = find_seam(hamiltonian), hamiltonian.matrix(0.0, gauge="seam")
    levels, _ = dense(hamiltonian, 0.23)
    for energy in levels[[40, 130, 210]]:
        response = respond(matrix, float(energy), seam, solver(matrix, float(energy)))
        edge = CountedEdge(
            energy=float(energy), below=0, inner=response.inner, error=response.error
        )
        assert edge.count(seam.change(0.23)) is None
        assert edge.count(seam.change(0.11)) is not None


def test_the_seam_is_all_that_turns() -> None:
    """H(flux) - H(0) in the seam gauge, entry by entry, also where a site meets itself."""
    for name in ("far", "short", "wire"):
        hamiltonian = ring(name)
        seam = find_seam(hamiltonian)
        for flux in (0.0, 0.2, 1.7):
            whole = hamiltonian.matrix(flux, gauge="seam") - hamiltonian.matrix(0.0, gauge="seam")
            small = np.zeros(whole.shape, dtype=complex)
            small[np.ix_(seam.sites, seam.sites)] = seam.change(flux)
            np.testing.assert_allclose(small, whole.toarray(), rtol=0, atol=1e-14)
            small[np.ix_(seam.sites, seam.sites)] = seam.slope(flux)
            slope = hamiltonian.slope_matrix(flux, gauge="seam").toarray()
            np.testing.assert_allclose(small, slope, rtol=0, atol=1e-13)
    assert np.max(np.abs(find_seam(ring("short")).winding)) == 2


# --- what the reduced problem says of itself -----------------------------------------------------


def problem(hamiltonian: Hamiltonian, fluxes: np.ndarray = FLUXES) -> Reduced:
    found = find_reduced(hamiltonian, fluxes, near=-0.31, count=12, between=None)
    assert found is not None
    return found


def test_residuals_bound_the_states_and_errors_the_levels() -> None:
    """Norms of H psi - E psi with the full matrix; distance of the levels to LAPACK's."""
    hamiltonian = ring("square")
    reduced = problem(hamiltonian)
    for flux in (0.07, 0.31):
        point = reduced.at(flux)
        levels, _ = dense(hamiltonian, flux)
        inside = levels[point.index]
        bound = reduced.errors(point) + 1e-13
        assert (np.abs(point.energies - inside) <= bound).all()
        matrix = hamiltonian.matrix(flux, gauge="seam").toarray()
        states = reduced.vectors.T @ point.coordinates
        np.testing.assert_allclose(states.conj().T @ states, np.eye(inside.size), atol=1e-9)
        better = np.linalg.solve(matrix - reduced.shift * np.eye(hamiltonian.n), states)
        better /= np.linalg.norm(better, axis=0)
        true = np.linalg.norm(matrix @ better - better * point.energies, axis=0)
        assert (true <= point.residuals * 1.01 + 1e-13).all()
        assert (point.residuals < reduced.goal * 3).all()


def test_a_level_too_few_or_too_many_is_not_trusted() -> None:
    """States of all levels but one, and edges counted wrongly: accurate levels, another number
    (Sylvester's law of inertia); the states are then sought in the whole basis."""
    reduced = problem(ring("square"))
    point = reduced.at(0.2)
    assert reduced.trusts(point)
    poor = dataclasses.replace(reduced, known=point.coordinates[:, 1:])
    short = poor._solve(0.2, poor._short)
    assert short.residuals.max() < reduced.goal * 3
    assert not poor.trusts(short)
    assert poor.at(0.2).energies.size == point.energies.size
    lower, upper = reduced.edges
    wrong = dataclasses.replace(
        reduced, edges=(lower, dataclasses.replace(upper, below=upper.below + 1))
    )
    assert not wrong.trusts(wrong.at(0.2))


def test_windows_beyond_the_edges_are_refused() -> None:
    """Levels outside the edges are unknown: by the definition of the window they might belong."""
    reduced = problem(ring("square"))
    point = reduced.at(0.2)
    lower, upper = (edge.energy for edge in reduced.edges)
    middle = (lower + upper) / 2
    size = point.energies.size
    assert reduced.part(point, near=middle, count=3, between=None) is not None
    assert reduced.part(point, near=middle, count=size + 1, between=None) is None
    assert reduced.part(point, near=upper - 1e-6, count=1, between=None) is None
    assert reduced.part(point, near=0, count=0, between=(middle, upper - 1e-3)) is not None
    assert reduced.part(point, near=0, count=0, between=(lower - 1e-3, middle)) is None


def test_shells_are_completed_link_by_link() -> None:
    """Definition of a shell: neighbours closer than a tolerance belong together."""
    energies = np.array([0.0, 1.0, 1.0008, 1.0016, 2.0, 3.0])
    assert _shells_between(energies, (1.0026, 2.5), 1e-3) == (1, 5)
    assert _shells_between(energies, (0.5, 0.9991), 1e-3) == (1, 4)
    assert _shells_between(energies, (1.2, 1.8), 1e-3) == (4, 4)


def test_solves_gone_wrong_are_noticed(monkeypatch: pytest.MonkeyPatch) -> None:
    """Noise of 1e-6 on every solve: residuals with the matrix tell, and the sweep goes flux by
    flux to LAPACK's levels."""
    rng = np.random.default_rng(0)

    def noisy(matrix: Any, energy: float) -> Any:
        solve = solver(matrix, energy)
        return lambda rows: solve(rows) * (1 + 1e-6 * rng.standard_normal(rows.shape))

    monkeypatch.setattr(reduction_module, "solver", noisy)
    monkeypatch.setattr(reduction_module, "ROUNDS", 2)
    hamiltonian, window = ring("square"), Window(near=-0.31, count=4)
    sweep = sweep_flux(hamiltonian, [0.1, 0.2, 0.3], window=window)
    assert sweep.method == "sparse"
    check_rows(hamiltonian, window, sweep)


def test_a_small_basis_never_shows_too_many_levels(monkeypatch: pytest.MonkeyPatch) -> None:
    """Cauchy's interlacing: levels of a projected inverse lie farther from the shift than the
    true ones, so a poor basis holds fewer levels between the edges, or as many, but not more."""
    hamiltonian = ring("localised")
    monkeypatch.setattr(Reduced, "trusts", lambda *_: True)
    seen = []

    def look(search: Any, probes: np.ndarray) -> Reduced:
        reduced = search._project()
        for flux in (0.1, 0.3):
            point = reduced.at(flux)
            lower, upper = (edge.energy for edge in reduced.edges)
            levels, _ = dense(hamiltonian, flux)
            true = np.count_nonzero((levels > lower) & (levels < upper))
            assert point.counted == true
            assert point.energies.size <= true
            seen.append(true - point.energies.size)
        return reduced

    monkeypatch.setattr(reduction_module._Search, "run", look)
    find_reduced(hamiltonian, FLUXES, near=-0.31, count=12, between=None)
    assert max(seen) > 0


def test_a_basis_that_cannot_grow_falls_back(monkeypatch: pytest.MonkeyPatch) -> None:
    """One round for levels that hardly reach the seam: not trusted, hence flux by flux; LAPACK's
    levels all the same."""
    monkeypatch.setattr(reduction_module, "ROUNDS", 1)
    hamiltonian, window = ring("localised"), Window(near=-0.31, count=12)
    sweep = sweep_flux(hamiltonian, [0.0, 0.2, 0.4], window=window)
    assert sweep.method == "sparse"
    check_rows(hamiltonian, window, sweep)


def test_points_it_cannot_vouch_for_are_solved_on_their_own(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    """Every third flux refused: the same levels, slopes (LAPACK's) and branches as without."""
    hamiltonian, window = ring("square"), Window(near=-0.31, count=8)
    fluxes = FLUXES[4:16]
    smooth = sweep_flux(hamiltonian, fluxes, window=window)
    trust, asked = Reduced.part, []

    def sometimes(self: Reduced, point: Any, **window: Any) -> slice | None:
        asked.append(0)
        return None if len(asked) % 3 == 0 else trust(self, point, **window)

    monkeypatch.setattr(Reduced, "part", sometimes)
    told: list[tuple[int, int]] = []
    mixed = sweep_flux(hamiltonian, fluxes, window=window, progress=lambda *step: told.append(step))
    assert mixed.method == "reduced"
    assert told == [(i + 1, fluxes.size) for i in range(fluxes.size)]
    np.testing.assert_array_equal(mixed.branch, smooth.branch)
    check_rows(hamiltonian, window, mixed)


def test_states_foreign_to_the_basis_are_not_followed_there(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    """Where a state solved on its own is not in the basis the sweep is done flux by flux."""
    monkeypatch.setattr(Reduced, "part", lambda *_, **__: None)
    monkeypatch.setattr(reduction_module, "HELD", 1.1)
    sweep = sweep_flux(ring("square"), [0.1, 0.2, 0.3], window=Window(near=-0.31, count=3))
    assert sweep.method == "sparse"


def test_overlaps_of_short_vectors(monkeypatch: pytest.MonkeyPatch) -> None:
    """Scalar products of the states themselves in the uniform gauge, to a thousandth."""
    hamiltonian = ring("square")
    reduced = problem(hamiltonian)
    points = [(flux, reduced.at(flux)) for flux in (0.1, 0.13)]
    full, short = [], []
    for flux, point in points:
        phase = np.exp(-2j * np.pi * flux * hamiltonian.site_turns)
        full.append(phase[:, None] * (reduced.vectors.T @ point.coordinates))
        short.append(reduced.fingerprint(point.coordinates, flux))
        back = reduced.coordinates(full[-1], flux)
        np.testing.assert_allclose(back, point.coordinates, rtol=0, atol=1e-9)
    np.testing.assert_allclose(
        short[0].conj().T @ short[1], full[0].conj().T @ full[1], rtol=0, atol=1e-3
    )


@pytest.mark.parametrize("what", ["few", "crowded", "wide", "open", "singular"])
def test_where_it_does_not_pay(what: str, monkeypatch: pytest.MonkeyPatch) -> None:
    """Few fluxes, a seam long against the ring, too many levels, a ring cut open, a shift on a
    level: no reduced problem."""
    hamiltonian, between, fluxes = ring("square"), None, FLUXES
    if what == "few":
        monkeypatch.undo()
        fluxes = FLUXES[:5]
    elif what == "crowded":
        monkeypatch.setattr(reduction_module, "SHARE", 4)
    elif what == "wide":
        monkeypatch.setattr(reduction_module, "SHARE", 2)
        between = (-2.0, 2.0)
    elif what == "open":
        sites = np.flatnonzero(hamiltonian.site_turns < 1.5 / 60)
        assert hamiltonian.ring is not None
        hamiltonian = assemble(remove_sites(hamiltonian.ring, sites), Hopping(disorder=0.3))
    else:

        def refuse(*_: Any) -> None:
            raise RuntimeError("Factor is exactly singular")

        monkeypatch.setattr(reduction_module, "solver", refuse)
    assert find_reduced(hamiltonian, fluxes, near=-0.31, count=12, between=between) is None
