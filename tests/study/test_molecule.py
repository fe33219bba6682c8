"""From an XYZ file to the answer, and the verb `molecule` that prints it."""

from __future__ import annotations

import csv
import io
import json
import math
from pathlib import Path
from typing import Any

import closed_forms as known
import molecule_shapes as shapes
import numpy as np
import pytest
import typer
from typer.testing import CliRunner

from ribbon.commands.molecule import molecule
from ribbon.errors import BadInput
from ribbon.study.molecule import run_molecule
from ribbon.study.molecule_file import xyz_text

EXACT = 1e-9


def written(
    tmp_path: Path, places: np.ndarray, elements: str = "", name: str = "m.xyz", **options: Any
) -> Path:
    path = tmp_path / name
    path.write_text(xyz_text(list(elements) or ["C"] * len(places), places, **options))
    return path


def called(*arguments: object) -> Any:
    app = typer.Typer()
    app.command()(molecule)
    return CliRunner().invoke(app, [str(argument) for argument in arguments])


def told(*arguments: object) -> dict[str, Any]:
    done = called(*arguments, "--json")
    assert done.exit_code == 0, done.output
    return dict(json.loads(done.stdout))


@pytest.mark.parametrize("rings", [4, 6, 9])
@pytest.mark.parametrize("hand", [1, -1])
def test_half_twisted_belts(rings: int, hand: int, tmp_path: Path) -> None:
    """Topology, signed half turns, levels and gap in one answer; the mirror image flips signs."""
    places = shapes.twisted_belt(rings, 1) * [1, 1, hand]
    story = told(written(tmp_path, places, comment="belt"))
    assert (story["title"], story["kind"]) == ("belt", "belt")
    assert (story["atoms"], story["bonds"]) == (4 * rings, 5 * rings)
    assert (story["boundary_loops"], story["orientable"]) == (1, False)
    assert story["linking_half_turns"] == -hand
    assert math.isclose(story["twist_half_turns"], -hand, abs_tol=EXACT)
    assert math.isclose(story["writhe_half_turns"], 0, abs_tol=EXACT)
    expected = known.cyclacene_adjacency(rings, half_twists=1, sigma=-1)[::-1]
    np.testing.assert_allclose(story["levels"], expected, rtol=0, atol=EXACT)
    assert math.isclose(story["gap"], known.moebius_cyclacene_gap(rings), abs_tol=EXACT)
    assert math.isclose(story["homo"] - story["lumo"], story["gap"], abs_tol=EXACT)
    plain = known.cyclacene_adjacency(rings, half_twists=0, sigma=-1)
    assert math.isclose(story["other_closure_energy"], 2 * plain[2 * rings :].sum(), abs_tol=EXACT)
    # the other orbital sign turns the spectrum over, which leaves the half-filled total
    assert math.isclose(story["other_sign_energy"], story["pi_energy"], abs_tol=EXACT)
    assert "is for single rings" in story["verdict"]
    orders = [bond["order"] for bond in story["bond_orders"]]
    assert len(orders) == 5 * rings
    assert math.isclose(2 * sum(orders), story["pi_energy"], abs_tol=EXACT)
    # the crowded inner side of the ring leaves doubt, and that is said with the lines
    doubtful = story["doubtful_bonds"]
    assert doubtful
    assert all(3 <= line <= 2 + 4 * rings for pair in doubtful for line in pair["lines"])
    assert any("leave doubt whether there is a bond" in note for note in story["notes"])


def test_an_annulene(tmp_path: Path) -> None:
    """A Möbius [16]annulene: closed shell, aromatic by the rule, one loop."""
    story = told(written(tmp_path, shapes.annulene(16, 1)))
    assert (story["kind"], story["boundary_loops"], story["linking_half_turns"]) == ("ring", 1, -1)
    np.testing.assert_allclose(story["levels"], -known.moebius_annulene(16), rtol=0, atol=EXACT)
    assert math.isclose(story["pi_energy"], 4 / math.sin(math.pi / 16), abs_tol=EXACT)
    assert story["verdict"].startswith("4n electrons (16) in a ring with an odd number")
    assert story["doubtful_bonds"] == story["notes"] == []


def test_the_table(tmp_path: Path) -> None:
    """CSV to stdout by default, to a file with --out; energies in eV from beta."""
    path = written(tmp_path, shapes.polygon(6))
    done = called(path, "--beta", "-2.5")
    assert done.exit_code == 0
    rows = list(csv.DictReader(io.StringIO(done.stdout)))
    assert list(rows[0]) == ["level", "x", "energy", "occupation"]
    np.testing.assert_allclose([float(r["x"]) for r in rows], [2, 1, 1, -1, -1, -2], atol=EXACT)
    np.testing.assert_allclose(
        [float(r["energy"]) for r in rows], [-5, -2.5, -2.5, 2.5, 2.5, 5], atol=EXACT
    )
    assert [float(r["occupation"]) for r in rows] == [2, 2, 2, 0, 0, 0]
    table = tmp_path / "levels.csv"
    again = called(path, "--beta", "-2.5", "--out", table)
    assert (again.exit_code, again.stdout) == (0, "")
    assert table.read_text() == done.stdout
    assert f"{table} is written" in again.stderr
    assert called(path, "--out", table, "--quiet").stderr == ""


def test_notes_go_to_stderr(tmp_path: Path) -> None:
    """A sheet has no twist, and says so beside the table."""
    path = written(tmp_path, shapes.acene(2))
    assert "note: no linking and twist: the frame is one sheet" in called(path).stderr
    assert called(path, "--quiet").stderr == ""


@pytest.mark.parametrize(
    ("places", "elements", "charge", "kind", "electrons"),
    [
        (shapes.polygon(5), "NCCCC", 0, "N:", 6),
        (shapes.polygon(5), "OCCCC", 0, "O:", 6),
        (shapes.polygon(6), "NCCCCC", 0, "N", 6),
        (shapes.polygon(7), "CCCCCCC", 1, "C", 6),
    ],
)
def test_kinds_and_charges(
    places: np.ndarray, elements: str, charge: int, kind: str, electrons: int, tmp_path: Path
) -> None:
    """Pyrrole and furan give a pair, pyridine one; the charge is counted."""
    result = run_molecule(written(tmp_path, places, elements), charge=charge)
    assert (result.atoms.kinds[0], result.sheet.electrons) == (kind, electrons)
    assert "Hückel aromatic" in result.stability.verdict
    atoms = result.atoms_table().to_records()
    assert math.isclose(sum(row["charge"] for row in atoms), charge, abs_tol=EXACT)
    assert [row["line"] for row in atoms] == [*range(3, 3 + len(places))]
    noted = any("the file has no hydrogens" in note for note in result.notes)
    assert noted == (elements[0] == "N")


def with_hydrogens(tmp_path: Path, ring: np.ndarray, elements: str, bare: int) -> Path:
    """A ring with a hydrogen on every atom but the first ``bare``."""
    places = np.concatenate([ring, (ring * (1 + 1.05 / np.linalg.norm(ring[0])))[bare:]])
    return written(tmp_path, places, elements + "H" * (len(ring) - bare))


def test_hydrogens_tell_pyrrole_from_pyridine(tmp_path: Path) -> None:
    """On the nitrogen or not; no guess is noted."""
    for sites, bare, kind in ((5, 0, "N:"), (6, 1, "N")):
        path = with_hydrogens(tmp_path, shapes.polygon(sites), "N" + "C" * (sites - 1), bare)
        result = run_molecule(path)
        assert result.atoms.kinds[0] == kind
        assert result.sheet.electrons == 6
        assert result.notes == ()


def test_column_of_pi_electrons(tmp_path: Path) -> None:
    """A column ``pi`` overrules: a borepin-like zero, a pair on nitrogen."""
    ring = shapes.polygon(5)
    path = written(tmp_path, ring, "NCCCC", columns={"pi": [2, 1, 1, 1, 1]})
    result = run_molecule(path)
    assert (result.atoms.kinds[0], result.sheet.electrons, result.notes) == ("N:", 6, ())
    path = written(tmp_path, ring, "NCCCC", columns={"pi": [2, 1, 3, 1, 1]})
    with pytest.raises(BadInput, match=r"m\.xyz: line 5: pi = 3 must be 0, 1 or 2"):
        run_molecule(path)


def test_saturated_atoms_are_noted(tmp_path: Path) -> None:
    """A CH2 group in a ring of five: cyclopentadiene keeps four p orbitals."""
    ring = shapes.polygon(5)
    out = ring / np.linalg.norm(ring[0])
    two = ring[0] + 0.6 * out[0] + 0.9 * np.array([[0, 0, 1], [0, 0, -1]])
    places = np.concatenate([ring, ring[1:] + 1.08 * out[1:], two])
    result = run_molecule(written(tmp_path, places, "CCCCC" + "H" * 6))
    assert (result.molecule.n, result.framework.kind) == (4, "chain")
    assert math.isclose(result.sheet.pi_energy, 4.4721, abs_tol=6e-5)  # butadiene
    assert any("1 saturated atom(s)" in note and "(line 3)" in note for note in result.notes)


def test_open_shell_is_noted(tmp_path: Path) -> None:
    """Cyclobutadiene."""
    result = run_molecule(written(tmp_path, shapes.polygon(4)))
    assert any(note.startswith("an open shell") for note in result.notes)


def test_axes_at_right_angles_are_noted(tmp_path: Path) -> None:
    """Biphenyl turned by 90 degrees: the sign of that bond means little."""
    result = run_molecule(written(tmp_path, shapes.biphenyl(math.pi / 2)))
    assert any("nearly at right angles" in note for note in result.notes)
    assert not any(
        "right angles" in note
        for note in run_molecule(written(tmp_path, shapes.biphenyl(0.5))).notes
    )


@pytest.mark.parametrize("rule", ["plain", "torsion", "cosine", "slater-koster"])
def test_rules(rule: str, tmp_path: Path) -> None:
    """All give the same flat sheet, and only "plain" the same twisted belt."""
    flat = told(written(tmp_path, shapes.polygon(6)), "--rule", rule)
    np.testing.assert_allclose(flat["levels"], [2, 1, 1, -1, -1, -2], rtol=0, atol=EXACT)
    belt = told(written(tmp_path, shapes.twisted_belt(9, 1)), "--rule", rule)
    assert math.isclose(belt["gap"], known.moebius_cyclacene_gap(9), abs_tol=EXACT) == (
        rule == "plain"
    )
    assert belt["rule"] == rule


def test_parameters(tmp_path: Path) -> None:
    """--heteroatoms changes the set, and the answer names its source."""
    path = written(tmp_path, shapes.polygon(6), "NCCCCC")
    story = told(path, "--heteroatoms", "streitwieser")
    assert "Streitwieser" in story["heteroatoms"]
    assert math.isclose(story["levels"][1], 1.1672, abs_tol=1e-4)
    with pytest.raises(BadInput, match='heteroatoms = \'huckel\' must be "van-catledge" or "strei'):
        run_molecule(path, heteroatoms="huckel")  # type: ignore[arg-type]


REFUSED = {
    "far apart": (
        "2\n\nC 0 0 0\nC 9 0 0\n",
        {},
        "m.xyz: no two of the 2 atoms are bonded: the nearest are 9 angstrom apart",
    ),
    "saturated": (
        "5\n\nC 0 0 0\nH .63 .63 .63\nH -.63 -.63 .63\nH -.63 .63 -.63\nH .63 -.63 -.63\n",
        {},
        "m.xyz: every atom has all its neighbours single-bonded: no p orbital is left",
    ),
    "too near": (
        "3\n\nC 0 0 0\nS 1.7 0 0\nS 2.6 0 0\n",
        {},
        "m.xyz: the S on line 4 and the S on line 5 are 0.9 angstrom apart, nearer than any bond",
    ),
    "charge": ("2\n\nC 0 0 0\nC 1.34 0 0\n", {"charge": 3}, "m.xyz: charge = 3 leaves -1 pi"),
    "beta": ("2\n\nC 0 0 0\nC 1.34 0 0\n", {"beta": 1.0}, "m.xyz: beta = 1.0 must be a negative"),
    "rule": ("2\n\nC 0 0 0\nC 1.34 0 0\n", {"rule": "x"}, "m.xyz: rule = 'x' must be one of"),
    "file": ("2\n\nC 0 0 0\n", {}, "m.xyz, line 1: 2 atoms are announced"),
}


@pytest.mark.parametrize("name", REFUSED)
def test_refusals_name_the_file(name: str, tmp_path: Path) -> None:
    """One sentence with the file, and lines where atoms are meant."""
    text, options, sentence = REFUSED[name]
    path = tmp_path / "m.xyz"
    path.write_text(text)
    with pytest.raises(BadInput, match=sentence) as caught:
        run_molecule(path, **options)
    assert "\n" not in str(caught.value)


def test_the_molecule_is_not_written_over(tmp_path: Path) -> None:
    """--out must not name the file itself, nor a folder."""
    path = written(tmp_path, shapes.polygon(6))
    assert "is the molecule itself" in str(called(path, "--out", path).exception)
    assert "is a folder" in str(called(path, "--out", tmp_path).exception)


def test_shuffled_and_turned_files_tell_the_same(tmp_path: Path) -> None:
    """But for order and rounding."""
    places = shapes.twisted_belt(11, 1)
    one = told(written(tmp_path, places))
    other = told(written(tmp_path, shapes.turned(places, 5)[0], name="other.xyz"))
    for key in ("atoms", "bonds", "boundary_loops", "orientable", "linking_half_turns", "kind"):
        assert one[key] == other[key]
    for key in ("levels", "gap", "pi_energy", "twist_half_turns", "writhe_half_turns"):
        np.testing.assert_allclose(one[key], other[key], rtol=0, atol=1e-8)
    for key in ("charges",):
        np.testing.assert_allclose(np.sort(one[key]), np.sort(other[key]), rtol=0, atol=1e-8)


def test_ten_thousand_atoms(tmp_path: Path) -> None:
    """Topology, linking and a certified frontier against the closed form of the gap."""
    result = run_molecule(written(tmp_path, shapes.twisted_belt(2500, 1)))
    story = result.story()
    assert (story["atoms"], story["bonds"], story["faces"]) == (10_000, 12_500, {6: 2500})
    assert (story["boundary_loops"], story["orientable"], story["linking_half_turns"]) == (
        1,
        False,
        -1,
    )
    assert math.isclose(story["gap"], known.moebius_cyclacene_gap(2500), abs_tol=EXACT)
    assert result.sheet.certificate.complete
    assert any("more than 2,000 atoms" in note for note in result.notes)
