"""Writing a ring for other programs: matrix, graph, bonds, positions."""

from __future__ import annotations

import io
from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING

import networkx as nx
import numpy as np
import scipy.io
import scipy.sparse

from ribbon.errors import BadInput
from ribbon.hopping import Hamiltonian
from ribbon.study.build import build
from ribbon.study.whole import write_whole

if TYPE_CHECKING:
    from ribbon.study.ribbonfile import RibbonFile

__all__ = ["export", "to_graph"]


def export(file: RibbonFile, path: str | Path) -> None:
    """Write the ring of a file; the suffix of ``path`` says what.

    ``.mtx`` and ``.npz``: the Hamiltonian at the file's flux and gauge (MatrixMarket, scipy
    sparse); ``.graphml``: sites and bonds as a multigraph; ``.csv``: the bonds; ``.xyz``: the
    positions in ångström. Raises `BadInput` for another suffix.
    """
    path = Path(path)
    writer = _WRITERS.get(path.suffix.lower())
    if writer is None:
        raise BadInput(
            f"{path}: the suffix {path.suffix or '(none)'} is not known; export writes "
            f"{' '.join(_WRITERS)}"
        )
    plan = build(file)
    hamiltonian = plan.model.hamiltonian
    write_whole({path: writer(hamiltonian, file)})


def to_graph(hamiltonian: Hamiltonian, flux: float = 0.0) -> nx.MultiGraph[int]:
    """Sites and bonds as a networkx multigraph, bonds with their matrix elements.

    A bond runs from ``tail`` to ``head``; ``real`` and ``imaginary`` are <tail|H|head> at the
    flux in the uniform gauge.
    """
    network, bonds = hamiltonian.network, hamiltonian.network.bonds
    turns = flux * hamiltonian.bond_turns("uniform")
    element = hamiltonian.amplitudes * np.exp(2j * np.pi * turns)
    graph: nx.MultiGraph[int] = nx.MultiGraph()
    labels = hamiltonian.ring.sublattice if hamiltonian.ring is not None else None
    for site, (x, y) in enumerate(network.positions[:, :2].tolist()):
        more = {} if labels is None else {"sublattice": str(labels[site])}
        graph.add_node(site, x=x, y=y, energy=float(hamiltonian.site_energies[site]), **more)
    columns = (bonds.tail, bonds.head, element.real, element.imag, bonds.winding, bonds.shell)
    for tail, head, real, imaginary, winding, shell in zip(
        *(column.tolist() for column in columns), strict=True
    ):
        graph.add_edge(
            tail,
            head,
            tail=tail,
            head=head,
            real=real,
            imaginary=imaginary,
            winding=winding,
            shell=shell,
        )
    return graph


def _matrix(hamiltonian: Hamiltonian, file: RibbonFile) -> scipy.sparse.csr_array:
    return hamiltonian.matrix(file.field.flux, gauge=file.field.gauge)


def _mtx(hamiltonian: Hamiltonian, file: RibbonFile) -> bytes:
    stream = io.BytesIO()
    matrix = _matrix(hamiltonian, file)
    symmetry = "hermitian" if np.iscomplexobj(matrix.data) else "symmetric"
    comment = f"{file.heading}; unit {hamiltonian.unit}; flux {file.field.flux:g} h/e"
    scipy.io.mmwrite(
        stream,
        matrix.tocoo(),
        comment=comment.encode("ascii", "replace").decode(),
        precision=17,
        symmetry=symmetry,
    )
    return stream.getvalue()


def _npz(hamiltonian: Hamiltonian, file: RibbonFile) -> bytes:
    stream = io.BytesIO()
    scipy.sparse.save_npz(stream, _matrix(hamiltonian, file))
    return stream.getvalue()


def _graphml(hamiltonian: Hamiltonian, file: RibbonFile) -> bytes:
    stream = io.BytesIO()
    nx.write_graphml(to_graph(hamiltonian, file.field.flux), stream)
    return stream.getvalue()


def _csv(hamiltonian: Hamiltonian, file: RibbonFile) -> bytes:
    bonds = hamiltonian.network.bonds
    turns = file.field.flux * hamiltonian.bond_turns(file.field.gauge)
    element = hamiltonian.amplitudes * np.exp(2j * np.pi * turns)
    lines = ["tail,head,dx,dy,winding,shell,real,imaginary"]
    columns = (
        bonds.tail,
        bonds.head,
        bonds.displacement[:, 0],
        bonds.displacement[:, 1],
        bonds.winding,
        bonds.shell,
        element.real,
        element.imag,
    )
    rows = zip(*(column.tolist() for column in columns), strict=True)
    lines += [",".join(map(repr, row)) for row in rows]
    return ("\n".join(lines) + "\n").encode()


def _xyz(hamiltonian: Hamiltonian, file: RibbonFile) -> bytes:
    network, ring = hamiltonian.network, hamiltonian.ring
    species = ["X"] * network.n
    if ring is not None:
        every = ring.strip.species
        species = (every if ring.kept is None else every[ring.kept]).tolist()
    places = np.zeros((network.n, 3))
    places[:, : network.positions.shape[1]] = 10 * network.positions
    heading = " ".join(file.heading.split())
    lines = [str(network.n), f"{heading}; the flat strip, positions in angstrom"]
    lines += [
        f"{'X' if kind == 'site' else kind} {x!r} {y!r} {z!r}"
        for kind, (x, y, z) in zip(species, places.tolist(), strict=True)
    ]
    return ("\n".join(lines) + "\n").encode()


_WRITERS: dict[str, Callable[[Hamiltonian, RibbonFile], bytes]] = {
    ".mtx": _mtx,
    ".npz": _npz,
    ".graphml": _graphml,
    ".csv": _csv,
    ".xyz": _xyz,
}
