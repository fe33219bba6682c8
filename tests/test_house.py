"""Rules of the house, held against the package as it is installed."""

from __future__ import annotations

import ast
import dataclasses
import importlib
import inspect
import pkgutil
import subprocess
import sys
from collections.abc import Callable, Iterator
from pathlib import Path
from types import ModuleType
from typing import Any

import networkx as nx
import numpy as np
import pytest

import ribbon
from ribbon.analysis import all_levels, levels_near, sweep_flux
from ribbon.hopping import Hopping, assemble
from ribbon.lattice import (
    Network,
    certify_topology,
    close_strip,
    double_cover,
    lay_strip,
    open_strip,
    read_lattice,
    remove_sites,
)

PACKAGE = Path(ribbon.__file__).parent
ROOMS = ["errors", "lattice", "hopping", "analysis", "study", "commands", "cli"]
LOWER_ROOMS = ["errors", "lattice", "hopping", "analysis"]
LIGHT = {"numpy", "scipy", "networkx", "numba", "ribbon"}
LONGEST_MODULE = 350
LONGEST_FUNCTION = 50
MOST_NAMES = 25
AGREED = {
    *("Lattice", "Strip", "Network", "Ring", "Hopping", "Hamiltonian", "Levels"),
    *("read_lattice", "lay_strip", "close_strip", "certify_topology"),
    *("assemble", "effective_mass", "all_levels", "levels_near", "levels_between", "count_below"),
    *("Filling", "Window", "find_gap", "sweep_flux"),
    *("edge_states", "compare_continuum", "density_of_states"),
    *("read_study", "run_study", "write_folder", "read_results"),
    *("RibbonError", "BadInput", "NotCertified", "__version__"),
}

SOURCES = sorted(path for path in PACKAGE.rglob("*.py"))
TREES = {path: ast.parse(path.read_text(encoding="utf-8")) for path in SOURCES}


def module_name(path: Path) -> str:
    parts = ["ribbon", *path.relative_to(PACKAGE).with_suffix("").parts]
    return ".".join(parts[:-1] if parts[-1] == "__init__" else parts)


def label(path: Path) -> str:
    return str(path.relative_to(PACKAGE))


def room(name: str) -> str | None:
    """The room of a dotted name inside the package, or None for the package root."""
    parts = name.split(".")
    return parts[1] if len(parts) > 1 else None


def imported(node: ast.AST) -> list[str]:
    """Dotted names an import statement brings in."""
    if isinstance(node, ast.Import):
        return [alias.name for alias in node.names]
    if isinstance(node, ast.ImportFrom) and node.module:
        if node.module == "ribbon":
            return [f"ribbon.{alias.name}" for alias in node.names]
        return [node.module]
    return []


def modules() -> Iterator[ModuleType]:
    yield ribbon
    for found in pkgutil.walk_packages(ribbon.__path__, "ribbon."):
        if not found.name.endswith("__main__"):
            yield importlib.import_module(found.name)


# --- rooms and imports ---------------------------------------------------------------------------


def test_every_module_stands_in_a_room() -> None:
    """A new top-level module needs a place in the order of the rooms."""
    assert {room(module_name(path)) for path in SOURCES} - {None, "__main__"} <= set(ROOMS)


@pytest.mark.parametrize("path", SOURCES, ids=label)
def test_imports_point_one_way(path: Path) -> None:
    """errors, lattice, hopping, analysis, study, commands, cli: never upward, nor in functions."""
    here = room(module_name(path))
    if here is None or here == "__main__":  # the root loads lazily, the command starts at the top
        return
    for node in ast.walk(TREES[path]):
        assert not (isinstance(node, ast.ImportFrom) and node.level), "relative import"
        for name in imported(node):
            if name.split(".")[0] != "ribbon" or name == "ribbon.__version__":
                continue
            there = room(name)
            assert there in ROOMS, f"{label(path)} takes {name} from the package root"
            assert ROOMS.index(there) <= ROOMS.index(here), f"{label(path)} imports {name}"


@pytest.mark.parametrize("lower", LOWER_ROOMS)
def test_lower_rooms_import_light_packages_only(lower: str) -> None:
    """numpy, scipy, networkx (numba where present) and the standard library."""
    allowed = LIGHT | set(sys.stdlib_module_names)
    for path, tree in TREES.items():
        if room(module_name(path)) != lower:
            continue
        for node in ast.walk(tree):
            for name in imported(node):
                assert name.split(".")[0] in allowed, f"{label(path)} imports {name}"


def top_level_imports(tree: ast.Module) -> list[str]:
    """Imports that run when the module is loaded (not those for type checking or in functions)."""
    return [name for node in tree.body for name in imported(node)]


def test_no_import_cycles() -> None:
    """`__init__` modules counted: importing a submodule loads its packages first."""
    names = {module_name(path): path for path in SOURCES}
    graph = nx.DiGraph()
    for name, path in names.items():
        for target in top_level_imports(TREES[path]):
            module = target if target in names else target.rpartition(".")[0]
            if module in names and module != name:
                graph.add_edge(name, module)
    assert list(nx.simple_cycles(graph)) == []


def run_python(code: str) -> subprocess.CompletedProcess[str]:
    command = [sys.executable, "-W", "error", "-c", code]
    return subprocess.run(command, capture_output=True, text=True, check=False, timeout=120)


def test_import_is_silent_and_lazy(tmp_path: Path) -> None:
    """`import ribbon` warns of nothing and does not load the heavy packages."""
    heavy = ["scipy", "matplotlib", "xarray", "pandas", "pydantic", "networkx"]
    code = f"import sys, ribbon; sys.exit(repr([n for n in {heavy} if n in sys.modules]))"
    done = run_python(code)
    assert done.stderr.strip() == "[]"


def test_every_module_imports_without_warnings() -> None:
    """Each on its own names, in one fresh interpreter."""
    names = [module_name(path) for path in SOURCES if path.stem != "__main__"]
    done = run_python("; ".join(f"import {name}" for name in names))
    assert (done.returncode, done.stderr) == (0, "")


# --- names -----------------------------------------------------------------------------------


def test_root_names_only_what_was_agreed() -> None:
    """At most 25 names, all of them known, all of them there."""
    assert set(ribbon.__all__) <= AGREED
    assert len(ribbon.__all__) <= MOST_NAMES
    assert len(set(ribbon.__all__)) == len(ribbon.__all__)
    for name in ribbon.__all__:
        assert getattr(ribbon, name) is not None
    shown = {name for name in dir(ribbon) if not name.startswith("_")}
    assert shown <= AGREED | set(ROOMS) | {"annotations"}


def test_unknown_root_name_is_an_attribute_error() -> None:
    """Lazy loading must not swallow typing mistakes."""
    with pytest.raises(AttributeError, match="lay_stripe"):
        _ = ribbon.lay_stripe


@pytest.mark.parametrize("path", SOURCES, ids=label)
def test_modules_name_their_contents(path: Path) -> None:
    """`__all__` holds existing names only, and every public module says what it is."""
    module = ribbon if path.parent == PACKAGE and path.stem == "__init__" else None
    module = module or importlib.import_module(module_name(path))
    assert (module.__doc__ or "").strip(), "module without a docstring"
    for name in getattr(module, "__all__", []):
        assert hasattr(module, name), name


def described(thing: Any) -> Iterator[tuple[str, Any]]:
    """A public object, and its public methods and properties if it is a class of ours."""
    yield thing.__qualname__, thing
    if not inspect.isclass(thing):
        return
    for name, member in vars(thing).items():
        if not name.startswith("_") and (
            inspect.isfunction(member) or isinstance(member, (property, classmethod, staticmethod))
        ):
            yield f"{thing.__qualname__}.{name}", member


@pytest.mark.parametrize("name", ["ribbon", *[f"ribbon.{room}" for room in ROOMS[:5]]])
def test_public_objects_have_docstrings(name: str) -> None:
    """Every function, class, method and property reachable from the root and the rooms."""
    module = importlib.import_module(name)
    assert module.__all__
    for public in module.__all__:
        thing = getattr(module, public)
        if not (inspect.isclass(thing) or inspect.isfunction(thing)):
            continue
        for qualified, member in described(thing):
            text = inspect.getdoc(member) or ""
            generated = text.startswith(f"{qualified}(")  # what dataclass writes by itself
            assert text.strip(), f"{qualified} has no docstring"
            assert not generated, f"{qualified} has no docstring of its own"


# --- sizes and habits --------------------------------------------------------------------------


@pytest.mark.parametrize("path", SOURCES, ids=label)
def test_sizes(path: Path) -> None:
    """Modules of at most 350 lines, functions of at most 50 without their docstring."""
    assert len(path.read_text(encoding="utf-8").splitlines()) <= LONGEST_MODULE
    for node in ast.walk(TREES[path]):
        if isinstance(node, (ast.FunctionDef, ast.AsyncFunctionDef)):
            assert node.end_lineno is not None
            lines = node.end_lineno - node.lineno + 1
            first = node.body[0]
            if ast.get_docstring(node) is not None and first.end_lineno is not None:
                lines -= first.end_lineno - first.lineno + 1
            assert lines <= LONGEST_FUNCTION, f"{node.name}: {lines} lines"


@pytest.mark.parametrize(
    "path", [*SOURCES, *sorted(Path(__file__).parent.rglob("*.py"))], ids=lambda path: path.name
)
def test_no_notes_of_unfinished_work(path: Path) -> None:
    """Spelled in halves here, so that this file passes too."""
    text = path.read_text(encoding="utf-8")
    for first, second in [("TO", "DO"), ("FIX", "ME"), ("XX", "X")]:
        assert first + second not in text


def test_dataclasses_are_frozen() -> None:
    """All of them, in every module."""
    seen = set()
    for module in modules():
        for thing in vars(module).values():
            ours = inspect.isclass(thing) and thing.__module__.startswith("ribbon")
            if ours and dataclasses.is_dataclass(thing):
                assert thing.__dataclass_params__.frozen, thing  # type: ignore[attr-defined]
                seen.add(thing.__name__)
    assert {"Lattice", "Strip", "Network", "Ring", "Hopping", "Hamiltonian", "Levels"} <= seen


def arrays_in(thing: Any, path: str) -> Iterator[tuple[str, np.ndarray]]:
    """Arrays held by a dataclass, in fields and properties, and in what these hold."""
    if isinstance(thing, np.ndarray):
        yield path, thing
    elif dataclasses.is_dataclass(thing) and not isinstance(thing, type):
        for field in dataclasses.fields(thing):
            yield from arrays_in(getattr(thing, field.name), f"{path}.{field.name}")
    elif isinstance(thing, tuple):
        for number, item in enumerate(thing):
            yield from arrays_in(item, f"{path}[{number}]")


def small_ring(**options: Any) -> Any:
    strip = lay_strip("honeycomb-armchair", rows=3, length=4)
    return close_strip(strip, half_twists=1, orbital="pz", shells=2, **options)


def small_hamiltonian() -> Any:
    ring = small_ring()
    return assemble(ring, Hopping(shells=(1.0, 0.1), site_energy=np.linspace(0.0, 1.0, ring.n)))


NOUNS: dict[str, Callable[[], Any]] = {
    "Lattice": lambda: read_lattice("kagome"),
    "Strip": lambda: lay_strip("kagome", rows=3, length=4),
    "Ring": small_ring,
    "ring with vacancies": lambda: remove_sites(small_ring(), [0, 5]),
    "double cover": lambda: double_cover(small_ring()),
    "open strip": lambda: open_strip(small_ring().strip),
    "Network": lambda: Network.from_pairs([(0, 1), (1, 2)], positions=np.zeros((3, 3))),
    "Topology": lambda: certify_topology(small_ring()),
    "Hamiltonian": small_hamiltonian,
    "complete Levels": lambda: all_levels(small_hamiltonian(), states=True),
    "Levels near": lambda: levels_near(small_hamiltonian(), 0.0, count=4),
    "FluxResponse": lambda: sweep_flux(small_hamiltonian(), np.linspace(0, 1, 5)),
}


@pytest.mark.parametrize("name", NOUNS)
def test_arrays_of_nouns_are_read_only(name: str) -> None:
    """Frozen all the way down: writing into any array is refused."""
    noun = NOUNS[name]()
    for path, array in arrays_in(noun, name):
        assert not array.flags.writeable, path
        if array.size:
            with pytest.raises(ValueError, match="read-only"):
                array.flat[0] = array.flat[0]
    if not isinstance(noun, tuple):
        with pytest.raises(dataclasses.FrozenInstanceError):
            noun.something = 1


def test_arrays_given_are_not_frozen_behind_the_callers_back() -> None:
    """The library keeps copies: the caller's array stays writable, and later changes do nothing."""
    energies = np.linspace(0.0, 1.0, 6)
    ring = close_strip(lay_strip("square", rows=2, length=3), half_twists=0)
    hamiltonian = assemble(ring, Hopping(site_energy=energies))
    before = hamiltonian.matrix().toarray()
    energies[:] = 7.0
    np.testing.assert_array_equal(hamiltonian.matrix().toarray(), before)
