"""The lattice room: sites on a strip, the seam, bonds and topology."""

from ribbon.lattice.boundary import EdgeLoop, distance_to_edges, walk_edges
from ribbon.lattice.definition import Lattice, Line, read_lattice, shelf
from ribbon.lattice.network import Bonds, Network
from ribbon.lattice.ring import (
    Ring,
    close_strip,
    double_cover,
    open_strip,
    remove_sites,
    reseam,
)
from ribbon.lattice.seam import Seam, closing_sizes, fit_strip, holds_together
from ribbon.lattice.strip import Strip, lay_strip
from ribbon.lattice.topology import Topology, certify_topology

__all__ = [
    "Bonds",
    "EdgeLoop",
    "Lattice",
    "Line",
    "Network",
    "Ring",
    "Seam",
    "Strip",
    "Topology",
    "certify_topology",
    "close_strip",
    "closing_sizes",
    "distance_to_edges",
    "double_cover",
    "fit_strip",
    "holds_together",
    "lay_strip",
    "open_strip",
    "read_lattice",
    "remove_sites",
    "reseam",
    "shelf",
    "walk_edges",
]
