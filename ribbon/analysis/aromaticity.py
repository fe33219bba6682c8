"""What a Hückel sheet says about stability: delocalisation, the other closure, 4n and 4n + 2.

The rule: monocyclic conjugated rings with 4n + 2 electrons are stabilised where their axes turn
over an even number of times round the ring, those with 4n where it is odd (E. Hückel, Z. Phys.
70, 204 (1931); Heilbronner, Tetrahedron Lett. 5, 1923 (1964), recalled from memory; IUPAC Gold
Book M03957). It says nothing of fused rings and belts.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import networkx as nx
import numpy as np
from numpy.typing import NDArray

from ribbon.analysis.heteroatoms import PARAMETERS, Parameters, PiAtoms
from ribbon.analysis.hueckel import MOST_STATES, HueckelSheet, Rule, hueckel_matrix, hueckel_sheet
from ribbon.lattice import Bonds, Network
from ribbon.lattice.centre_line import row_of_faces
from ribbon.lattice.framework import Framework

__all__ = ["Stability", "judge_stability", "perfect_matching"]

MOST_MATCHED = 400
"""Frames with odd rings are searched for Kekulé structures up to so many atoms."""


@dataclass(frozen=True, kw_only=True)
class Stability:
    """Energies in units of beta: positive ones stabilise.

    Parameters
    ----------
    delocalisation_energy
        pi energy less 2 for every double bond of a Kekulé structure (alpha taken off); None with
        ``why_no_delocalisation``.
    other_sign_energy, other_sign_gap
        The same bonds with the axes turned over once more round the band (the other orbital
        sign); None where the frame closes no band, or is too large.
    other_closure_energy, other_closure_gap
        The band cut open and closed with one half turn more, which joins other atoms unless it is
        a single ring; None too where it is neither a ring nor a single row of faces, or bonds
        depend on the geometry.
    closure_energy
        pi energy less that of the other closure.
    verdict
        What the rule of 4n and 4n + 2 electrons says, or why it does not apply.
    """

    delocalisation_energy: float | None
    why_no_delocalisation: str
    other_sign_energy: float | None
    other_sign_gap: float | None
    other_closure_energy: float | None
    other_closure_gap: float | None
    closure_energy: float | None
    verdict: str


def judge_stability(
    framework: Framework,
    atoms: PiAtoms,
    sheet: HueckelSheet,
    *,
    parameters: Parameters = PARAMETERS["van-catledge"],
    rule: Rule = "plain",
) -> Stability:
    """Compare the pi energy of a sheet with localised double bonds and with the other closure."""
    why = _why_not(framework, atoms, sheet)
    delocalised = None
    if not why and sheet.pi_energy is not None:
        delocalised = sheet.pi_energy - sheet.electrons
    charge = int(atoms.electrons.sum()) - sheet.electrons

    def solved(other: Framework | None) -> HueckelSheet | None:
        if other is None or framework.network.n > MOST_STATES:
            return None
        matrix = hueckel_matrix(other, atoms, parameters=parameters, rule=rule)
        return hueckel_sheet(matrix, other, atoms, charge=charge, beta=sheet.beta)

    signed = solved(_other_sign(framework))
    if framework.kind == "ring":
        closed = signed
    else:
        closed = solved(_other_closure(framework)) if rule == "plain" else None
    energy = None
    if closed is not None and closed.pi_energy is not None and sheet.pi_energy is not None:
        energy = sheet.pi_energy - closed.pi_energy
    return Stability(
        delocalisation_energy=delocalised,
        why_no_delocalisation=why,
        other_sign_energy=None if signed is None else signed.pi_energy,
        other_sign_gap=None if signed is None else signed.gap,
        other_closure_energy=None if closed is None else closed.pi_energy,
        other_closure_gap=None if closed is None else closed.gap,
        closure_energy=energy,
        verdict=_verdict(framework, sheet),
    )


def _why_not(framework: Framework, atoms: PiAtoms, sheet: HueckelSheet) -> str:
    """Why there is no delocalisation energy, or nothing."""
    if sheet.pi_energy is None:
        return f"frames of more than {MOST_STATES:,} atoms have no total energy here"
    if np.any(atoms.kinds != "C"):
        return "2 alpha + 2 beta is the double bond of carbon; this frame has other atoms"
    if sheet.electrons != framework.network.n:
        return "an ion has no structure of double bonds alone"
    if sheet.electrons % 2:
        return "a radical has no structure of double bonds alone"
    found = perfect_matching(framework.network)
    if found is None:
        return f"Kekulé structures with odd rings are searched up to {MOST_MATCHED} atoms"
    return "" if found else "the frame has no Kekulé structure"


def perfect_matching(network: Network) -> bool | None:
    """Whether double bonds can be placed so that every atom has one; None if not searched.

    >>> perfect_matching(Network.from_pairs([(0, 1), (0, 2), (0, 3)]))
    False
    """
    graph: nx.Graph[int] = nx.Graph()
    graph.add_nodes_from(range(network.n))
    pairs = zip(network.bonds.tail.tolist(), network.bonds.head.tolist(), strict=True)
    graph.add_edges_from(pairs)
    matched = 0
    for part in nx.connected_components(graph):
        piece = graph.subgraph(part)
        if nx.is_bipartite(piece):
            top = nx.bipartite.sets(piece)[0]
            matched += len(nx.bipartite.hopcroft_karp_matching(piece, top))
        elif len(part) > MOST_MATCHED:
            return None
        else:
            matched += 2 * len(nx.max_weight_matching(piece, maxcardinality=True))
    return matched == network.n


def _other_sign(framework: Framework) -> Framework | None:
    """The same frame with the axes turned over once more along a cut across the band."""
    if framework.way_round is None:
        return None
    bonds = framework.network.bonds
    cut = framework.way_round.passes % 2 == 1
    return _with_bonds(framework, replace(bonds, mirrored=bonds.mirrored ^ cut))


def _with_bonds(framework: Framework, bonds: Bonds) -> Framework:
    network = Network(positions=framework.network.positions.copy(), bonds=bonds)
    return replace(framework, network=network, orientable=not framework.orientable)


def _other_closure(framework: Framework) -> Framework | None:
    """A single row of faces cut beside one shared bond and joined the other way up.

    Axes are first turned to follow one another along the open strip, so that only the two bonds
    of the cut say how it is closed; they are exchanged and change their sign.
    """
    row = row_of_faces(framework.surface) if framework.kind == "belt" else None
    if row is None:
        return None
    (a, b), beside = row[0], framework.surface.beside
    shared = set(beside[row[0]]) & set(beside[row[1]])
    face = framework.surface.faces[min(shared)]
    (after_a,), (after_b,) = (_beyond(face, one, other) for one, other in ((a, b), (b, a)))
    bonds = framework.network.bonds
    low, high = np.minimum(bonds.tail, bonds.head), np.maximum(bonds.tail, bonds.head)
    ends = [(min(one, far), max(one, far)) for one, far in ((a, after_a), (b, after_b))]
    first, second = (int(np.flatnonzero((low == x) & (high == y))[0]) for x, y in ends)
    sign = _followed(framework, leave_out={first, second})
    over = bonds.mirrored ^ (sign[bonds.tail] * sign[bonds.head] < 0)
    over[[first, second]] = ~over[[first, second]]
    tail, head = bonds.tail.copy(), bonds.head.copy()
    tail[[first, second]], head[[first, second]] = (a, b), (after_b, after_a)
    steps = framework.network.positions[head] - framework.network.positions[tail]
    return _with_bonds(
        framework, replace(bonds, tail=tail, head=head, displacement=steps, mirrored=over)
    )


def _beyond(face: tuple[int, ...], one: int, other: int) -> set[int]:
    """The neighbour of an atom round a face that is not the other one."""
    place = face.index(one)
    return {face[place - 1], face[(place + 1) % len(face)]} - {other}


def _followed(framework: Framework, *, leave_out: set[int]) -> NDArray[np.float64]:
    """Signs that make axes follow one another along all bonds but some, which open the band."""
    bonds = framework.network.bonds
    graph: nx.Graph[int] = nx.Graph()
    for bond, (x, y) in enumerate(zip(bonds.tail.tolist(), bonds.head.tolist(), strict=True)):
        if bond not in leave_out:
            graph.add_edge(x, y, over=bool(bonds.mirrored[bond]))
    sign = np.ones(framework.network.n)
    for here, there in nx.bfs_edges(graph, 0):
        sign[there] = sign[here] * (-1.0 if graph.edges[here, there]["over"] else 1.0)
    return sign


def _verdict(framework: Framework, sheet: HueckelSheet) -> str:
    network = framework.network
    alone = framework.kind == "ring" and network.bonds.m == network.n
    if not alone or framework.way_round is None or framework.way_round.core.size < network.n:
        shape = (
            "atoms off its ring" if framework.kind == "ring" else f"the shape: {framework.meaning}"
        )
        return f"the rule of 4n and 4n + 2 electrons is for single rings; this frame has {shape}"
    number = sheet.electrons
    if number % 2:
        return f"{number} electrons, an odd number: the rule of 4n and 4n + 2 does not apply"
    closure = "even" if framework.orientable else "odd"
    word = f"{'4n + 2' if number % 4 else '4n'} electrons ({number})"
    good = (number % 4 == 2) == bool(framework.orientable)
    name = "Hückel" if framework.orientable else "Möbius"
    told = "aromatic" if good else "antiaromatic"
    return (
        f"{word} in a ring with an {closure} number of half turns: {name} {told} by the rule, "
        "which holds for single rings as far as bonds are about equal and overlap stays large"
    )
