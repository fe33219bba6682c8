"""Exports read back by other libraries: scipy (matrices), networkx (graph), csv, plain text.

What is read back must be the same physics: the spectrum of brute-force matrices (``brute.py``).
"""

from __future__ import annotations

import csv
from pathlib import Path
from typing import Any

import networkx as nx
import numpy as np
import pytest
import scipy.io
import scipy.sparse
from brute import Case

from ribbon.errors import BadInput
from ribbon.hopping import Hopping, assemble
from ribbon.lattice import Network
from ribbon.study.build import build
from ribbon.study.export import export, to_graph
from ribbon.study.ribbonfile import RibbonFile

LEVEL = 1e-9

RINGS = [
    Case("square", 3, 6, 1, -1),
    Case("square", 2, 1, 1, -1),
    Case("square", 1, 2, 0),
    Case("honeycomb-zigzag", 3, 3.5, 1, -1, (1.0, 0.2, -0.1)),
    Case("honeycomb-armchair", 4, 0.5, 1, 1),
    Case("kagome", 3, 2, 2),
    Case("lieb", 3, 3, 3, -1),
]


def file_of(case: Case, **tables: Any) -> RibbonFile:
    keys = {
        **{"lattice": case.lattice, "rows": case.rows, "length": float(case.length)},
        **{"half_twists": case.half_twists, "orbital": "s" if case.sigma == 1 else "pz"},
    }
    hopping = {"unit": "t", "shells": list(case.hoppings)}
    return RibbonFile.model_validate({"ribbon": keys, "hopping": hopping, **tables})


def rough(case: Case, **field: Any) -> tuple[RibbonFile, np.ndarray]:
    """A file with disorder, and the site energies it draws."""
    file = file_of(case, disorder={"strength": 1.0, "seed": 4}, field=field)
    return file, build(file).model.hamiltonian.site_energies


def levels(matrix: Any) -> np.ndarray:
    dense = matrix.toarray() if scipy.sparse.issparse(matrix) else np.asarray(matrix)
    np.testing.assert_array_equal(dense, dense.conj().T)
    return np.linalg.eigvalsh(dense)


# --- matrices ------------------------------------------------------------------------------------


@pytest.mark.parametrize("gauge", ["uniform", "seam"])
@pytest.mark.parametrize("flux", [0.0, 0.5, 0.23])
@pytest.mark.parametrize("case", RINGS)
@pytest.mark.parametrize("suffix", [".mtx", ".npz"])
def test_matrices_come_back_bit_for_bit(
    case: Case, flux: float, gauge: str, suffix: str, tmp_path: Path
) -> None:
    """MatrixMarket (NIST) and scipy's own: the matrix of the file's flux and gauge."""
    file, energies = rough(case, flux=flux, gauge=gauge)
    path = tmp_path / f"ring{suffix}"
    export(file, path)
    read = scipy.io.mmread(path) if suffix == ".mtx" else scipy.sparse.load_npz(path)
    found = read.toarray()
    expected = build(file).model.hamiltonian.matrix(flux, gauge=gauge).toarray()
    np.testing.assert_array_equal(found, expected)
    brute = case.matrix(flux, gauge=gauge, energies=energies)
    np.testing.assert_allclose(found, brute, rtol=0, atol=1e-12)


def test_matrices_say_what_they_are(tmp_path: Path) -> None:
    """Symmetric where real, Hermitian where complex; title, unit and flux in a comment."""
    case = Case("square", 3, 6, 1, -1)
    for flux, kind in ((0.0, b"real symmetric"), (0.3, b"complex hermitian")):
        file = file_of(case, title="Ring — 1", field={"flux": flux})
        export(file, tmp_path / "ring.mtx")
        lines = (tmp_path / "ring.mtx").read_bytes().splitlines()
        assert lines[0] == b"%%MatrixMarket matrix coordinate " + kind
        assert b"Ring ? 1; unit t; flux" in lines[1]
        assert all(line.isascii() for line in lines)
        rows, columns, stored = map(int, lines[2].split())
        assert (rows, columns) == (18, 18)
        assert stored == len(lines) - 3 == 30


# --- graphs and bonds ----------------------------------------------------------------------------


def matrix_of_graph(graph: Any) -> np.ndarray:
    """H from node energies and edge elements, both directions of every edge."""
    matrix = np.zeros((len(graph), len(graph)), dtype=complex)
    for node, data in graph.nodes(data=True):
        matrix[int(node), int(node)] += data["energy"]
    for _, _, data in graph.edges(data=True):
        element = complex(data["real"], data["imaginary"])
        matrix[data["tail"], data["head"]] += element
        matrix[data["head"], data["tail"]] += element.conjugate()
    return matrix


@pytest.mark.parametrize("flux", [0.0, 0.23])
@pytest.mark.parametrize("case", RINGS)
def test_graphs_come_back(case: Case, flux: float, tmp_path: Path) -> None:
    """GraphML through networkx: a multigraph with a node a site and an edge a bond."""
    file, energies = rough(case, flux=flux)
    export(file, tmp_path / "ring.graphml")
    graph = nx.read_graphml(tmp_path / "ring.graphml", node_type=int, force_multigraph=True)
    ring = build(file).ring
    assert graph.number_of_nodes() == ring.n
    assert graph.number_of_edges() == ring.bonds.m
    np.testing.assert_allclose(
        matrix_of_graph(graph), case.matrix(flux, energies=energies), rtol=0, atol=1e-12
    )
    for node, data in graph.nodes(data=True):
        assert (data["x"], data["y"]) == tuple(ring.positions[node])
        assert data["sublattice"] == ring.sublattice[node]
        assert data["energy"] == energies[node]
    assert {d["shell"] for _, _, d in graph.edges(data=True)} == set(ring.bonds.shell.tolist())
    wound = sum(d["winding"] != 0 for _, _, d in graph.edges(data=True))
    assert wound == np.count_nonzero(ring.bonds.winding)


def test_graphs_of_molecules() -> None:
    """No lattice, no sublattice; azulene comes back from its own bond list (networkx matrix)."""
    pairs = [(i, (i + 1) % 10) for i in range(10)] + [(0, 6)]
    graph = to_graph(assemble(Network.from_pairs(pairs), Hopping(site_energy=0.5)))
    assert all("sublattice" not in data for _, data in graph.nodes(data=True))
    adjacency = nx.to_numpy_array(nx.Graph(pairs), nodelist=range(10))
    np.testing.assert_allclose(
        levels(matrix_of_graph(graph)),
        np.linalg.eigvalsh(0.5 * np.eye(10) - adjacency),
        rtol=0,
        atol=LEVEL,
    )


@pytest.mark.parametrize("gauge", ["uniform", "seam"])
@pytest.mark.parametrize("flux", [0.0, 0.23])
@pytest.mark.parametrize("case", RINGS)
def test_bonds_come_back(case: Case, flux: float, gauge: str, tmp_path: Path) -> None:
    """The CSV holds every bond once; both directions summed give the matrix without energies."""
    file = file_of(case, field={"flux": flux, "gauge": gauge})
    export(file, tmp_path / "bonds.csv")
    with (tmp_path / "bonds.csv").open(encoding="utf-8", newline="") as stream:
        rows = list(csv.DictReader(stream))
    ring = build(file).ring
    assert list(rows[0]) == ["tail", "head", "dx", "dy", "winding", "shell", "real", "imaginary"]
    assert len(rows) == ring.bonds.m
    matrix = np.zeros((ring.n, ring.n), dtype=complex)
    for row in rows:
        element = complex(float(row["real"]), float(row["imaginary"]))
        matrix[int(row["tail"]), int(row["head"])] += element
        matrix[int(row["head"]), int(row["tail"])] += element.conjugate()
    np.testing.assert_allclose(matrix, case.matrix(flux, gauge=gauge), rtol=0, atol=1e-12)
    steps = [(float(row["dx"]), float(row["dy"])) for row in rows]
    np.testing.assert_array_equal(steps, ring.bonds.displacement)
    assert [int(row["winding"]) for row in rows] == ring.bonds.winding.tolist()
    assert [int(row["shell"]) for row in rows] == ring.bonds.shell.tolist()


# --- positions -----------------------------------------------------------------------------------


def test_positions_come_back(tmp_path: Path) -> None:
    """A line for the number of sites, one to say what it is, then element and x y z in ångström."""
    file = file_of(Case("honeycomb-zigzag", 3, 3.5, 1, -1), title="Graphene")
    export(file, tmp_path / "ring.xyz")
    count, comment, *lines = (tmp_path / "ring.xyz").read_text(encoding="utf-8").splitlines()
    ring = build(file).ring
    assert int(count) == len(lines) == ring.n == 21
    assert comment.startswith("Graphene")
    assert {line.split()[0] for line in lines} == {"C"}
    places = np.array([[float(part) for part in line.split()[1:]] for line in lines])
    np.testing.assert_array_equal(places[:, :2], 10 * ring.positions)
    assert not places[:, 2].any()


def test_positions_with_vacancies_and_without_elements(tmp_path: Path) -> None:
    """Sites that are left, in their order; a lattice without species writes X."""
    file = file_of(Case("square", 3, 6, 1, -1), disorder={"vacancies": 0.3, "seed": 2})
    export(file, tmp_path / "ring.xyz")
    lines = (tmp_path / "ring.xyz").read_text(encoding="utf-8").splitlines()
    ring = build(file).ring
    assert int(lines[0]) == ring.n == 13
    assert {line.split()[0] for line in lines[2:]} == {"X"}
    first = [float(part) for part in lines[2].split()[1:3]]
    assert first == (10 * ring.positions[0]).tolist()


def test_vacancies_in_every_kind(tmp_path: Path) -> None:
    """The same smaller matrix everywhere."""
    case = Case("square", 3, 6, 1, -1)
    file = file_of(case, disorder={"vacancies": 0.3, "seed": 2})
    kept = build(file).ring.kept
    expected = case.matrix()[np.ix_(kept, kept)]
    for suffix in (".mtx", ".npz", ".graphml"):
        export(file, tmp_path / f"ring{suffix}")
    graph = nx.read_graphml(tmp_path / "ring.graphml", node_type=int, force_multigraph=True)
    for matrix in (
        scipy.io.mmread(tmp_path / "ring.mtx").toarray(),
        scipy.sparse.load_npz(tmp_path / "ring.npz").toarray(),
        matrix_of_graph(graph),
    ):
        np.testing.assert_allclose(matrix, expected, rtol=0, atol=1e-12)


# --- refused -------------------------------------------------------------------------------------


@pytest.mark.parametrize("name", ["ring.docx", "ring", "ring.mtx.gz", ".mtx"])
def test_other_suffixes_are_refused(name: str, tmp_path: Path) -> None:
    """With those that are known; nothing is written."""
    with pytest.raises(BadInput, match=r"is not known; export writes \.mtx \.npz \.graphml"):
        export(file_of(RINGS[0]), tmp_path / name)
    assert list(tmp_path.iterdir()) == []


def test_suffixes_in_capitals_and_files_that_exist(tmp_path: Path) -> None:
    """Case does not matter; an export is written over."""
    path = tmp_path / "RING.NPZ"
    path.write_text("old")
    export(file_of(RINGS[0]), path)
    assert scipy.sparse.load_npz(path).shape == (18, 18)
    assert [entry.name for entry in tmp_path.iterdir()] == ["RING.NPZ"]


@pytest.mark.parametrize("suffix", ["mtx", "npz", "graphml", "csv", "xyz"])
def test_a_folder_that_is_not_there(suffix: str, tmp_path: Path) -> None:
    """One sentence with the path."""
    with pytest.raises(BadInput, match=r"none/ring\.\w+: cannot be written"):
        export(file_of(RINGS[0]), tmp_path / "none" / f"ring.{suffix}")


@pytest.mark.parametrize("suffix", ["mtx", "npz", "graphml", "csv", "xyz"])
def test_the_same_file_exports_the_same_bytes(suffix: str, tmp_path: Path) -> None:
    """No time stamps, no order left to chance."""
    file, _ = rough(RINGS[3], flux=0.23)
    written = []
    for name in ("one", "two"):
        (tmp_path / name).mkdir()
        export(file, tmp_path / name / f"ring.{suffix}")
        written.append((tmp_path / name / f"ring.{suffix}").read_bytes())
    assert written[0] == written[1]
