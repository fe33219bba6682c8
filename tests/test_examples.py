"""The examples end in the numbers that outside sources give."""

from __future__ import annotations

import csv
import itertools
import math
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
from scipy import constants

from ribbon.study import StudyResult, read_study, run_study
from ribbon.study.run import run_levels

EXAMPLES = Path(__file__).resolve().parents[1] / "examples"
FILES = sorted(
    path for path in EXAMPLES.glob("*.toml") if "[ribbon]" in path.read_text(encoding="utf-8")
)
_results: dict[str, StudyResult] = {}


def result_of(name: str) -> StudyResult:
    """The study of an example, run once."""
    if name not in _results:
        _results[name] = run_study(read_study(EXAMPLES / f"{name}.toml"))
    return _results[name]


@pytest.mark.parametrize("name", [path.stem for path in FILES])
def test_every_check_of_every_example_passes(name: str) -> None:
    """An example with a failed check would teach the wrong thing."""
    result = result_of(name)
    assert result.checks
    assert all(check.passed for check in result.checks)


def test_zigzag_graphene_has_one_edge_and_equal_even_harmonics() -> None:
    """At fixed chemical potential the even flux harmonics of the clean one-sided ring equal those
    of the plain ring (references: Yakubo, Avishai & Cohen, PRB 67, 125319 (2003); identity
    derived independently). Sampling 101 fluxes with jumps aliases them: agreement to the jump.
    """
    result = result_of("zigzag-graphene")
    twisted, plain = result.ribbon, result.controls[0]
    assert twisted.topology.boundary_loops == 1
    assert plain.topology.boundary_loops == 2
    assert twisted.network.n == 2000
    assert twisted.harmonics is not None
    assert plain.harmonics is not None
    even = twisted.harmonics.order % 2 == 0
    largest = np.abs(plain.harmonics.sine).max()
    apart = np.abs(twisted.harmonics.sine - plain.harmonics.sine)[even]
    assert apart.max() < 0.05 * largest
    odd = np.abs(twisted.harmonics.sine - plain.harmonics.sine)[~even]
    assert odd.max() > 0.2 * largest


def test_annulene_has_the_energy_and_gap_of_the_tables() -> None:
    """4/sin(pi/16) = 20.5033 and gap 4 sin(pi/16) = 0.7804 in |beta| (Heilbronner, Tetrahedron
    Lett. 5, 1923 (1964), formula recalled from memory); [16]annulene 20.1094, open shell.
    """
    result = result_of("mobius-annulene-16")
    case, plain = result.ribbon, result.controls[0]
    assert case.gap.gap == pytest.approx(4 * math.sin(math.pi / 16), abs=1e-12)
    assert case.response is not None
    assert case.response.totals is not None
    assert -case.response.totals.energy[0] == pytest.approx(20.5033, abs=5e-5)
    assert plain.gap.open_shell
    assert plain.response is not None
    assert plain.response.totals is not None
    assert -plain.response.totals.energy[0] == pytest.approx(20.1094, abs=5e-5)
    assert case.other_gap is not None
    assert case.other_gap.open_shell


def test_effective_mass_levels_are_those_of_the_lattice_formula() -> None:
    """E = 4t - 2t cos(ka) - 2t cos(pi q/(rows+1)) with k L = 2 pi (n + delta): the lowest level
    q = 1, n = 0 lies within the leading lattice error (a^2/12)(kappa^4) of hbar^2 kappa^2/2m*.
    """
    case = run_levels(
        read_study(EXAMPLES / "effective-mass-ring.toml", overrides=["levels.near=0.0"])
    ).ribbon
    kinetic = constants.hbar**2 / (2 * 0.067 * constants.m_e) / constants.e * 1e21  # meV nm^2
    kappa = math.pi / 40.0
    lowest = float(case.levels.energies[case.levels.index == 0][0])
    t = kinetic / 4.0
    assert lowest == pytest.approx(2 * t * (1 - math.cos(math.pi / 20)), rel=1e-9)
    continuum = kinetic * kappa**2
    assert continuum - lowest == pytest.approx(kinetic * kappa**4 * 4.0 / 12, rel=0.02)


def test_disordered_dots_fall_back_to_a_dense_complete_spectrum() -> None:
    """Disorder breaks momentum; totals are still complete, and the currents sum to zero."""
    result = result_of("patterned-dots")
    assert result.ribbon.response is not None
    assert result.ribbon.response.method == "dense"
    names = {check.name for check in result.checks}
    assert "sum of all currents" in names
    assert [case.name for case in result.cases] == ["ribbon", "plain", "double"]


def test_eight_lines_draw_a_picture(tmp_path: Path) -> None:
    """The script runs without a display and leaves its picture."""
    subprocess.run(
        [sys.executable, str(EXAMPLES / "eight_lines.py")], check=True, cwd=tmp_path, timeout=120
    )
    assert (tmp_path / "levels-against-flux.png").read_bytes().startswith(b"\x89PNG")


def test_gap_against_width_follows_the_closed_form(tmp_path: Path) -> None:
    """Metallic widths 3p + 2: one-sided "s" has the gap 2 t * 2 sin(pi / 2P), P = 2 * length, and
    "pz" has none (references 4.6; de Souza & Furtado, arXiv:1707.06361: gapless and gapped).
    """
    done = subprocess.run(
        [sys.executable, str(EXAMPLES / "gap_against_width.py")],
        check=True,
        cwd=tmp_path,
        timeout=120,
        capture_output=True,
        text=True,
    )
    rows = list(csv.DictReader(done.stdout.splitlines()))
    assert [int(row["rows"]) for row in rows] == list(range(3, 15))
    for row in rows:
        if int(row["rows"]) % 3 == 2:
            halves = 2 * float(row["length"])
            expected = 2.7 * 4 * math.sin(math.pi / (2 * halves))
            assert float(row["one_sided_s_eV"]) == pytest.approx(expected, abs=1e-4)
            assert float(row["one_sided_pz_eV"]) == pytest.approx(0.0, abs=1e-4)


def test_the_armchair_gap_hangs_on_the_sign() -> None:
    """Width 3p + 2: "s" has min|E| = 2 sin(pi/2P), P = 2 * length half periods, "pz" none
    (references 4.6, verified by brute force there; gapless and gapped: de Souza & Furtado,
    arXiv:1707.06361).
    """
    case = result_of("armchair-sign").ribbon
    assert case.gap.gap == pytest.approx(4 * math.sin(math.pi / 32), abs=1e-12)
    assert case.other_gap is not None
    assert case.other_gap.open_shell
    assert case.density is not None
    assert case.density.complete
    whole = np.trapezoid(case.density.density, case.density.energies)
    assert whole == pytest.approx(80, abs=1e-6)


def test_edge_momenta_of_the_wide_zigzag_ribbon() -> None:
    """One edge of length 2L: wave numbers spaced by pi/L, those of the plain ring by 2 pi/L; the
    amplitude falls by |2 cos(ks/2)| a row (Wakabayashi et al., Sci. Technol. Adv. Mater. 11,
    054504 (2010), recalled from memory).
    """
    result = result_of("wide-zigzag-edges")
    spacings = []
    for case in result.cases:
        assert case.edges is not None
        deep = (case.edges.edge_weight > 0.9) & (np.abs(case.edges.edge_momentum) < 29)
        momentum = np.abs(case.edges.edge_momentum[deep])
        spacings.append(float(np.diff(np.unique(momentum.round(6))).min()))
        # k s = 2 pi momentum / length, and one row is 1.5 bonds high
        per_row = np.abs(2 * np.cos(np.pi * momentum / 60))
        expected = -1.5 * 0.142 / np.log(per_row)
        assert case.edges.decay_length[deep] == pytest.approx(expected, abs=1e-6)
    assert spacings == [0.5, 1.0]


def test_the_mesh_of_a_ring_against_the_continuum() -> None:
    """L = 6 W with 19 sites across: errors 2.05e-3 of the ground level and 1.87e-3 of n = +-1,
    of order 2 (references 5.1, computed there with two scripts); values in GaAs units.
    """
    result = result_of("continuum-of-a-ring")
    found = result.ribbon.continuum
    assert found is not None
    assert found.relative_error[:3] == pytest.approx([-2.05e-3, -1.87e-3, -1.87e-3], abs=5e-6)
    assert found.order == pytest.approx(2, abs=0.05)
    kinetic = constants.hbar**2 / (2 * 0.067 * constants.m_e) / constants.e * 1e21  # meV nm^2
    exact = np.array([9.869604, 10.966227, 10.966227]) * kinetic / 40.0**2
    assert found.extrapolated[:3] == pytest.approx(exact, rel=1e-5)
    shift = result.controls[0].continuum_shift
    assert shift is not None
    assert np.abs(shift.lattice_part).max() < 0.05 * np.abs(shift.shift).max()


def test_gap_against_length_follows_the_published_belts(tmp_path: Path) -> None:
    """Half the gap of the linear chain with one hexagon less, 0.61803, 0.41421, 0.29496 for 3, 4,
    5 hexagons, falling smoothly; cyclic belts jump (references 1.7; Andre et al., Int. J. Quantum
    Chem. 84, 607 (2001), volume recalled from memory).
    """
    subprocess.run(
        [sys.executable, str(EXAMPLES / "gap_against_length.py")],
        check=True,
        cwd=tmp_path,
        timeout=120,
    )
    text = (tmp_path / "gap-against-length.csv").read_text(encoding="utf-8")
    rows = list(csv.DictReader(text.splitlines()))
    one_sided = [float(row["one_sided"]) for row in rows]
    assert one_sided[:3] == pytest.approx([0.61803, 0.41421, 0.29496], abs=5e-6)
    assert all(a > b for a, b in itertools.pairwise(one_sided))
    for row, before in zip(rows[1:], rows[:-1], strict=True):
        assert float(row["one_sided"]) == pytest.approx(float(before["linear"]) / 2, abs=1e-9)
    assert [float(row["cyclic"]) < 1e-9 for row in rows] == [n % 2 == 0 for n in range(3, 41)]
    assert (tmp_path / "gap-against-length.svg").stat().st_size > 5000
