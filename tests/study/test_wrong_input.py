"""Wrong input of every kind: one sentence on stderr, exit status 2, and nothing left behind."""

from __future__ import annotations

import errno
import os
import resource
import shutil
import subprocess
import sys
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from pathlib import Path
from typing import Any, NamedTuple

import pytest

from ribbon.cli import main
from ribbon.lattice import shelf

RING = {"lattice": '"square"', "rows": "3", "length": "8", "orbital": '"s"'}
ZIGZAG = {"lattice": '"honeycomb-zigzag"', "orbital": '"pz"'}
TWISTED = 'name = "own"\nspacing = 0.2\nperiod = 1.0\nrepeat = [0.0, 1.0]\n'
LINES = 'lines = [{ y = 0.0, x = [0.0], species = "C" }]\n'


def ribbon(changes: Mapping[str, str | None] | None = None, **more: str) -> str:
    """Text of a valid small file; ``changes`` replaces or (None) drops keys of [ribbon]."""
    keys = {**RING, **(changes or {})}
    body = "\n".join(f"{key} = {value}" for key, value in keys.items() if value is not None)
    tables = "".join(f"\n[{name}]\n{text}\n" for name, text in more.items())
    return f"[ribbon]\n{body}\n{tables}"


class Wrong(NamedTuple):
    """A wrong input: its name, the text of the file, words of the sentence, the command."""

    name: str
    text: str | bytes
    words: tuple[str, ...]
    verb: str = "levels"
    options: tuple[str, ...] = ()
    beside: Mapping[str, str | bytes] = {}


def said(name: str, text: str | bytes, *words: str, **more: Any) -> Wrong:
    return Wrong(name, text, words, **more)


def set_to(override: str, *words: str) -> Wrong:
    return Wrong(f"set {override[:30]}", ribbon(), words, options=("--set", override))


def lattice(name: str, text: str | bytes, *words: str) -> Wrong:
    """A ribbon file whose own lattice file is wrong."""
    file = ribbon({"lattice": '"own.toml"'})
    return Wrong(f"lattice {name}", file, ("own.toml", *words), beside={"own.toml": text})


def csv(name: str, text: str | bytes, *words: str) -> Wrong:
    """A ribbon file whose table of site energies is wrong; the ring has 24 sites."""
    file = ribbon(hopping='site_table = "sites.csv"')
    return Wrong(f"csv {name}", file, ("sites.csv", *words), beside={"sites.csv": text})


def sites(count: int = 24) -> str:
    return "site,energy\n" + "".join(f"{site},0.5\n" for site in range(count))


FILES = [
    said("empty file", "", "study.toml: is empty", "ribbon new"),
    said("nothing but comments", "# nothing\n\n", "is empty"),
    said("broken TOML", "[ribbon]\nrows = = 3\n", "not valid TOML", "line 2"),
    said("table not closed", "title = 'x'\n[ribbon\nrows = 3\n", "not valid TOML", "line 2"),
    said("text not closed", '[ribbon]\nlattice = "square\n', "not valid TOML", "line 2"),
    said("key twice", "[ribbon]\nrows = 3\nrows = 4\n", "not valid TOML", "overwrite", "line 3"),
    said("table twice", ribbon() + "[ribbon]\n", "not valid TOML", "twice"),
    said("no TOML at all", "MZ\x90\x00 some program", "not valid TOML", "line 1"),
    said("not UTF-8", b"[ribbon]\n# \xff\xfe\n", "line 2", "not UTF-8"),
    said("UTF-16", "[ribbon]\nrows = 3\n".encode("utf-16"), "line 1", "not UTF-8"),
    said("over 1 MB", "# " + "x" * 1_000_000, "larger than 1 MB"),
    said("nested without end", "a = " + "[" * 20_000, "not valid TOML", "nested too deeply"),
    said("digits without end", f"[ribbon]\nrows = {'9' * 5000}\n", "not valid TOML", "digits"),
    said("control character", '[ribbon]\nlattice = "a\x01b"\n', "not valid TOML", "line 2"),
]

KEYS = [
    said("typo", ribbon({"lenght": "3"}), "ribbon.lenght is not a key here", "ribbon.length?"),
    said("typo in a unit table", ribbon(hopping="shels = [1]"), "did you mean hopping.shells?"),
    said("typo deep down", ribbon(sweep="flux = { form = 0.0 }"), "sweep.flux.form", "flux.from?"),
    said(
        "typo of a table", ribbon(level="count = 3"), "level is not a key", "did you mean levels?"
    ),
    said("key of another table", ribbon(levels="rows = 3"), "levels.rows", "mean ribbon.rows?"),
    said("key without table", "rows = 3\n" + ribbon(), "rows is not a key", "ribbon.rows?"),
    said(
        "key in capitals", ribbon({"Rows": "3"}), "ribbon.Rows is not", "did you mean ribbon.rows?"
    ),
    said(
        "unheard of", ribbon(field="zzz = 1"), "field.zzz is not a key", "[field] has flux, gauge"
    ),
    said("unheard-of table", ribbon(zzz="x = 1"), "the tables are", "ribbon, hopping, field"),
    said("no ribbon table", "title = 'x'\n", "ribbon is missing"),
    said("no lattice", ribbon({"lattice": None}), "ribbon.lattice is missing", "ribbon lattices"),
    said("no rows", ribbon({"rows": None}), "ribbon.rows is missing", "or ribbon.width_nm"),
    said("no length", ribbon({"length": None}), "ribbon.length is missing", "ribbon.length_nm"),
    said("no orbital", ribbon({"orbital": None}), "ribbon.orbital is missing", "even", "p_z"),
    said("three twists", ribbon({"orbital": None, "half_twists": "3"}), "half_twists = 3 is odd"),
    said("no amplitude", ribbon(hopping='unit = "GHz"'), "hopping.shells is missing", "in GHz"),
    said("two problems", ribbon({"rows": "0", "lenght": "1"}), "= 0 must be 1", "1 more problem"),
    said("four problems", ribbon({"a": "0", "b": "1"}, x="", y=""), "(and 3 more problems)"),
]

TYPES = [
    said("text for a whole number", ribbon({"rows": '"8"'}), 'ribbon.rows = "8" must be a whole'),
    said("fraction of a row", ribbon({"rows": "8.0"}), "ribbon.rows = 8.0 must be a whole number"),
    said("true for a whole number", ribbon({"rows": "true"}), "rows = true must be a whole number"),
    said("list for a number", ribbon({"length": "[8]"}), "ribbon.length = [8] must be a number"),
    said("text for a number", ribbon({"length": '"8"'}), 'ribbon.length = "8" must be a number'),
    said("true for a number", ribbon(field="flux = true"), "field.flux = true must be a number"),
    said("a day for a number", ribbon(field="flux = 2024-01-01"), "2024-01-01 must be a number"),
    said("number for a text", ribbon({"lattice": "3"}), "ribbon.lattice = 3 must be a text"),
    said("number for a title", "title = 3\n" + ribbon(), "title = 3 must be a text in quotes"),
    said("one for true", ribbon(levels="all = 1"), "levels.all = 1 must be true or false"),
    said("number for a list", ribbon(hopping="shells = 2.7"), "shells = 2.7 must be a list"),
    said("text in a list", ribbon(hopping='shells = ["a"]'), 'hopping.shells[0] = "a" must be a'),
    said("number for a table", "hopping = 3\n" + ribbon(), "hopping = 3 must be a table of keys"),
    said("list of tables", "[[ribbon]]\nrows = 3\n", "ribbon = [{ rows = 3 }] must be a table"),
    said("flux not a table", ribbon(sweep="flux = 0.5"), "sweep.flux = 0.5 must be a table"),
    said(
        "energy a text", ribbon(hopping='site_energy = "x"'), 'site_energy = "x" must be a number'
    ),
    said("energies", ribbon(hopping="site_energy = { A = true }"), "hopping.site_energy.A = true"),
    said("spin true", ribbon(sweep="spin = true"), "sweep.spin = true must be a whole number"),
]

VALUES = [
    said("no rows at all", ribbon({"rows": "0"}), "ribbon.rows = 0 must be 1 or more"),
    said("negative rows", ribbon({"rows": "-3"}), "ribbon.rows = -3 must be 1 or more"),
    said("huge rows", ribbon({"rows": "1000000000000"}), "ribbon.rows", "must be at most 100000"),
    said("no length at all", ribbon({"length": "0"}), "ribbon.length = 0 must be more than 0"),
    said("length nan", ribbon({"length": "nan"}), "ribbon.length = nan must be a finite number"),
    said("length inf", ribbon({"length": "inf"}), "ribbon.length = inf must be a finite number"),
    said("huge length", ribbon({"length": "1" + "0" * 400}), "hundreds of digits", "too large"),
    said("many sites", ribbon({"rows": "100000", "length": "1e7"}), "sites", "memory"),
    said(
        "negative twists", ribbon({"half_twists": "-1"}), "half_twists = -1", "handedness", "space"
    ),
    said("twists without end", ribbon({"half_twists": "1001"}), "must be at most 1000"),
    said("spacing zero", ribbon({"spacing": "0.0"}), "ribbon.spacing = 0.0 must be 1e-06 or more"),
    said("negative width", ribbon({"rows": None, "width_nm": "-1.0"}), "ribbon.width_nm = -1.0"),
    said("empty lattice", ribbon({"lattice": '""'}), 'ribbon.lattice = "" must not be empty'),
    said("lattice long", ribbon({"lattice": f'"{"x" * 1001}"'}), "at most 1000 characters"),
    said("NUL in a path", ribbon({"lattice": r'"\u0000.toml"'}), "control characters"),
    said("title of two lines", 'title = "a\\nb"\n' + ribbon(), "title", "without line breaks"),
    said("unknown orbital", ribbon({"orbital": '"Pz"'}), 'must be "s" or "pz"; did you mean "pz"?'),
    said("unknown unit", ribbon(hopping='unit = "ev"'), 'hopping.unit = "ev"', 'you mean "eV"?'),
    said("no shells", ribbon(hopping="shells = []"), "hopping.shells = [] must have at least 1"),
    said("four shells", ribbon(hopping="shells = [1, 1, 1, 1]"), "at most 3", "third neighbours"),
    said("shell nan", ribbon(hopping="shells = [1, nan]"), "hopping.shells[1] = nan must be a fin"),
    said("massless", ribbon(hopping="mass = 0"), "hopping.mass = 0 must be 1e-06 or more"),
    said("mass in t", ribbon(hopping='mass = 0.1\nunit = "t"'), 'unit = "t" does not go', "meV"),
    said("energy inf", ribbon(hopping="site_energy = -inf"), "site_energy = -inf must be a finite"),
    said("no energies", ribbon(hopping="site_energy = {}"), "site_energy = {", "at least 1 entry"),
    said(
        "unknown gauge", ribbon(field='gauge = "seem"'), '"uniform" or "seam"; did you mean "seam"'
    ),
    said("flux nan", ribbon(field="flux = nan"), "field.flux = nan must be a finite number"),
    said(
        "flux huge",
        ribbon(field="flux = -1e300"),
        "field.flux = -1e+300 must be -1000 or more",
        "period one",
    ),
    said(
        "negative strength",
        ribbon(disorder="strength = -0.1"),
        "disorder.strength = -0.1 must be 0",
    ),
    said("all vacant", ribbon(disorder="vacancies = 1.0"), "must be less than 1", "fraction"),
    said("negative seed", ribbon(disorder="seed = -1"), "disorder.seed = -1 must be 0 or more"),
    said("no levels", ribbon(levels="count = 0"), "levels.count = 0 must be 1 or more"),
    said("huge count", ribbon(levels="count = 1000000000000"), "levels.count", "levels.all = true"),
    said("one bound", ribbon(levels="between = [1]"), "levels.between = [1.0] must be two numbers"),
    said("bounds crossed", ribbon(levels="between = [1, 0]"), "levels.between", "ascending"),
    said("broadening zero", ribbon(levels="broadening = 0"), "levels.broadening = 0 must be more"),
    said("one flux", ribbon(sweep="flux = { points = 1 }"), "sweep.flux.points = 1 must be 2"),
    said("many fluxes", ribbon(sweep="flux = { points = 1000000000 }"), "at most 100001"),
    said("no sweep", ribbon(sweep="flux = { from = 1.0 }"), "sweep.flux.from = 1 must be below"),
    said("electrons", ribbon(sweep="electrons = -1"), "sweep.electrons = -1 must be 0 or more"),
    said("electron word", ribbon(sweep='electrons = "neutrl"'), 'did you mean "neutral"?'),
    said("spin three", ribbon(sweep="spin = 3"), "sweep.spin = 3 must be 1 or 2", "electrons"),
    said("cold", ribbon(sweep="temperature = -1"), "sweep.temperature = -1 must be 0 or more"),
    said("warm", ribbon(hopping='unit = "t"', sweep="temperature = 4"), "eV or meV", '"t" has no'),
    said("no reach", ribbon(edges="within_nm = 0"), "edges.within_nm = 0 must be more than 0"),
    said("reach in words", ribbon(edges='within_nm = "1"'), "edges.within_nm"),
    said("edge unknown", ribbon(edges="within = 1.0"), "edges.within", "within_nm"),
    said("refined backwards", ribbon(continuum="refinements = -1"), "refinements = -1 must be 0"),
    said(
        "refined forever", ribbon(continuum="refinements = 40"), "refinements = 40 must be at most"
    ),
    said(
        "control unknown", ribbon(control='compare = ["plane"]'), "control.compare[0]", '"plain"?'
    ),
    said("control twice", ribbon(control='compare = ["open", "open"]'), 'names "open" twice'),
]

EXCLUSIVE = [
    said("rows and width", ribbon({"width_nm": "2.0"}), "ribbon.rows and ribbon.width_nm exclude"),
    said("two lengths", ribbon({"length_nm": "2.0"}), "ribbon.length and ribbon.length_nm exclude"),
    said(
        "shells, mass", ribbon(hopping="shells = [1]\nmass = 1"), "shells and hopping.mass exclude"
    ),
    said(
        "energy and table",
        ribbon(hopping='site_energy = 0.0\nsite_table = "x.csv"'),
        "hopping.site_energy and hopping.site_table exclude each other; keep one",
    ),
    said(
        "count, all", ribbon(levels="count = 3\nall = true"), "levels.count and levels.all exclude"
    ),
    said(
        "count, between", ribbon(levels="count = 3\nbetween = [0, 1]"), "count and levels.between"
    ),
    said(
        "count, all and between",
        ribbon(levels="count = 3\nall = true\nbetween = [0, 1]"),
        "levels.count, levels.all and levels.between exclude each other",
    ),
    said("all, between", ribbon(levels="all = true\nbetween = [0, 1]"), "all and levels.between"),
    said(
        "electrons and potential",
        ribbon(sweep="electrons = 0\nchemical_potential = 0"),
        "sweep.electrons and sweep.chemical_potential exclude each other",
    ),
]

OVERRIDES = [
    set_to("ribbon.rows", "--set", "table.key=value", "ribbon.rows=9"),
    set_to("=3", "table.key=value"),
    set_to("ribbon..rows=3", "table.key=value"),
    set_to("ribbon.rows=", "gives no value"),
    set_to("levels.between=[0, 1", "the value is not valid TOML"),
    set_to("title=a\nribbon.rows", "the value is not valid TOML"),
    set_to("ribbon.rows=many", '--set ribbon.rows: ribbon.rows = "many" must be a whole number'),
    set_to("ribbon.rowz=3", "ribbon.rowz is not a key here; did you mean ribbon.rows?"),
    set_to("ribbon.rows.x=3", "ribbon.rows is a value, not a table"),
    set_to("ribbon=3", "ribbon = 3 must be a table of keys"),
    set_to("ribbon.length=nan", "ribbon.length = nan must be a finite number"),
    set_to("ribbon.half_twists=-1", "handedness"),
]

LATTICES = [
    said("not on the shelf", ribbon({"lattice": '"honeycomb"'}), '"honeycomb"', "honeycomb-zigzag"),
    said("no such lattice file", ribbon({"lattice": '"gone.toml"'}), "gone.toml", "No such file"),
    said("lattice is a folder", ribbon({"lattice": '"../"'}), "folder"),
    lattice("empty", "", "missing"),
    lattice("broken", "name = \n", "not valid TOML", "line 1"),
    lattice("not UTF-8", b"name = '\xff'\n", "UTF-8"),
    lattice("unknown key", TWISTED + LINES + "colour = 1\n", "colour"),
    lattice("no lines", TWISTED, "lines", "missing"),
    lattice("empty lines", TWISTED + "lines = []\n", "lines must be a list"),
    lattice("line without x", TWISTED + "lines = [{ y = 0.0 }]\n", "lines[0]", "y and x"),
    lattice("line with a typo", TWISTED + "lines = [{ y = 0, x = [0], z = 1 }]\n", "'z'"),
    lattice("nan", TWISTED + "lines = [{ y = nan, x = [0] }]\n", "lines[0].y", "finite"),
    lattice("flat", (TWISTED + LINES).replace("[0.0, 1.0]", "[0.0, 0.0]"), "repeat", "positive"),
    lattice("spacing", (TWISTED + LINES).replace("0.2", "-0.2"), "spacing = -0.2", "positive"),
    lattice("a text", (TWISTED + LINES).replace("0.2", "'0.2'"), "spacing = '0.2'", "number"),
    lattice("two on one place", TWISTED + "lines = [{ y = 0, x = [0, 1.0] }]\n", "same place"),
    lattice("no such shell", TWISTED + LINES + "shells = [1.0, 1.3]\n", "1.3", "nearest"),
    lattice("labels", TWISTED + "lines = [{ y = 0, x = [0], species = 3 }]\n", "species", "text"),
]

RINGS = [
    said(
        "zigzag, odd rows, whole length",
        ribbon({**ZIGZAG, "rows": "3", "length": "10"}),
        "does not close with half_twists = 1",
        "rows = 3 with length = 9.5",
        "rows = 3 with length = 10.5",
    ),
    said(
        "armchair, even rows, whole length",
        ribbon({"lattice": '"honeycomb-armchair"', "rows": "4", "length": "6"}),
        "rows = 4 with length = 5.5",
    ),
    said(
        "kagome, unequal edges",
        ribbon({"lattice": '"kagome"', "rows": "4", "length": "6"}),
        "does not close",
        "rows = 3",
        "rows = 5",
    ),
    said("a third of a period", ribbon({"length": "8.3"}), "does not close", "length = 8"),
    said(
        "closing, told by describe",
        ribbon({**ZIGZAG, "rows": "3", "length": "10"}),
        "rows = 3 with length = 9.5",
        verb="describe",
        options=("--json",),
    ),
    said(
        "armchair, one row",
        ribbon({"lattice": '"honeycomb-armchair"', "rows": "1", "length": "6"}),
        "rows = 1",
        verb="describe",
    ),
    said(
        "staggered energies on a one-sided zigzag ring",
        ribbon({**ZIGZAG, "rows": "4"}, hopping="site_energy = { A = 0.1, B = -0.1 }"),
        "hopping.site_energy",
        "domain wall",
    ),
    said("sublattice", ribbon(hopping="site_energy = { Q = 0.1 }"), "'Q'", "has A"),
    said("mass on honeycomb", ribbon({**ZIGZAG, "rows": "4"}, hopping="mass = 0.07"), "square"),
    said("too many electrons", ribbon(sweep="electrons = 100"), "electrons", "48", verb="flux"),
]

TABLES = [
    csv("empty", "", "line 1", "site,energy"),
    csv("wrong header", "place,energy\n0,1\n", "line 1", '"place,energy"', "must be site,energy"),
    csv("missing site", sites(23), "without site 23", "0 to 23"),
    csv("missing sites", sites(20), "without site 20 and 3 more"),
    csv("site twice", sites() + "3,0.1\n", "line 26", "site 3 was given before"),
    csv("site beyond", sites() + "24,0.1\n", "line 26", "site 24 is not in the ring"),
    csv("site far beyond", sites() + "9" * 5000 + ",0.1\n", "line 26", "is not in the ring"),
    csv("negative site", sites() + "-1,0.1\n", "line 26", '"-1"', "whole number"),
    csv("energy nan", "site,energy\n0,nan\n", "line 2", '"nan"', "finite"),
    csv("energy inf", "site,energy\n0,1e999\n", "line 2", '"1e999"', "finite"),
    csv("energy a word", "site,energy\n0,high\n", "line 2", '"high"', "must be a number"),
    csv("energy left out", "site,energy\n0,\n", "line 2", "must be a number"),
    csv("three columns", "site,energy\n0,1,2\n", "line 2", "3 columns"),
    csv("quote not closed", 'site,energy\n0,"1\n', "not valid CSV"),
    csv("not UTF-8", b"site,energy\n0,\xff\n", "line 2", "not UTF-8"),
    said("csv gone", ribbon(hopping='site_table = "gone.csv"'), "gone.csv", "no such file"),
]

CASES = [
    *FILES, *KEYS, *TYPES, *VALUES, *EXCLUSIVE, *OVERRIDES, *LATTICES, *RINGS, *TABLES
]  # fmt: skip


def run(capsys: pytest.CaptureFixture[str], *arguments: str) -> tuple[int, str, str]:
    status = main([str(argument) for argument in arguments])
    captured = capsys.readouterr()
    return status, captured.out, captured.err


def refused(outcome: tuple[int, str, str], *words: str) -> None:
    """Exit status 2, one line on stderr with all the words, nothing on stdout."""
    status, out, err = outcome
    assert status == 2
    assert out == ""
    assert err.startswith("ribbon: ")
    assert err.count("\n") == 1
    assert err.endswith("\n")
    assert "Traceback" not in err
    assert len(err) < 700
    assert [word for word in words if word not in err] == [], err


def files_in(folder: Path) -> dict[str, bytes]:
    return {
        str(path.relative_to(folder)): path.read_bytes() if path.is_file() else b""
        for path in sorted(folder.rglob("*"))
    }


@contextmanager
def untouched(folder: Path) -> Iterator[None]:
    """Whatever happens inside leaves the folder as it was."""
    before = files_in(folder)
    yield
    assert files_in(folder) == before


@pytest.fixture(scope="module")
def made(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A study folder, made once."""
    folder = tmp_path_factory.mktemp("made")
    (folder / "study.toml").write_text(ribbon(control="compare = []"))
    assert main(["study", str(folder / "study.toml"), "--out", str(folder / "old")]) == 0
    return folder / "old"


@pytest.fixture
def here(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    monkeypatch.chdir(tmp_path)
    (tmp_path / "study.toml").write_text(ribbon())
    return tmp_path


def test_there_are_many_cases_and_none_twice():
    """The table covers every class of wrong input, and each case has a name of its own."""
    names = [case.name for case in CASES]
    assert len(names) >= 130
    assert len(set(names)) == len(names)


@pytest.mark.parametrize("case", CASES, ids=lambda case: case.name.replace("\n", " "))
def test_wrong_input_gets_one_sentence(case, tmp_path, monkeypatch, capsys):
    """Each wrong input: one sentence that names the thing, exit status 2, nothing written."""
    monkeypatch.chdir(tmp_path)
    for name, text in {**case.beside, "study.toml": case.text}.items():
        data = text if isinstance(text, bytes) else text.encode()
        (tmp_path / name).write_bytes(data)
    with untouched(tmp_path):
        refused(run(capsys, case.verb, "study.toml", *case.options), *case.words)


@pytest.mark.parametrize("verb", ["study", "describe", "levels", "flux"])
def test_every_verb_refuses_a_bad_file_alike(verb, here, capsys):
    """The sentence does not depend on the verb."""
    (here / "study.toml").write_text(ribbon({"rows": "0"}))
    with untouched(here):
        refused(run(capsys, verb, "study.toml"), "study.toml: ribbon.rows = 0 must be 1 or more")


@pytest.mark.parametrize(
    ("name", "words"),
    [
        ("gone.toml", ["gone.toml: there is no such file"]),
        ("no/where.toml", ["no/where.toml: there is no such file"]),
        (".", ["this is a folder"]),
        ("study.toml/x", ["study.toml/x: cannot be read", "Not a directory"]),
        ("x" * 300, ["cannot be read", "too long"]),
        ("/dev/zero", ["/dev/zero", "larger than 1 MB"]),
        ("/dev/null", ["/dev/null: is empty"]),
    ],
)
def test_a_file_that_cannot_be_read(name, words, here, capsys):
    """Missing files, folders, endless devices: the sentence says which and why."""
    with untouched(here):
        refused(run(capsys, "levels", name), *words)


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (["levls", "study.toml"], ["levls", "'levels'", "ribbon --help"]),
        (["levels"], ["FILE", "ribbon --help"]),
        (["levels", "study.toml", "more"], ["more"]),
        (["levels", "study.toml", "--jsn"], ["--jsn", "--json"]),
        (["levels", "study.toml", "--set"], ["--set"]),
        (["edgs", "study.toml"], ["edgs", "edges"]),
        (["--nothing"], ["--nothing"]),
    ],
)
def test_a_command_line_that_cannot_be_read(arguments, words, here, capsys):
    """Unknown verbs and options are refused like any other input."""
    with untouched(here):
        refused(run(capsys, *arguments), *words)


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (["levels", "study.toml", "--out", "no/x.csv"], ["no/x.csv", "no folder no"]),
        (["levels", "study.toml", "--out", "."], ["is a folder"]),
        (["levels", "study.toml", "--out", "study.toml"], ["ribbon file itself"]),
        (["levels", "study.toml", "--out", "study.toml/x"], ["no folder study.toml"]),
        (["levels", "study.toml", "--out", "x" * 300], ["too long"]),
        (["flux", "study.toml", "--out", "a", "--totals", "a"], ["--out and --totals"]),
        (["flux", "study.toml", "--totals", "no/x.csv"], ["no folder no"]),
        (["export", "study.toml", "no/ring.mtx"], ["no folder no"]),
        (["export", "study.toml", "ring.docx"], [".docx", ".mtx"]),
        (["export", "study.toml", "ring"], [".mtx", ".xyz"]),
        (["export", "study.toml", "study.toml"], ["ribbon file itself"]),
        (["new", "study.toml"], ["study.toml: exists already"]),
        (["new", "no/x.toml"], ["no folder no"]),
        (["new", "."], ["is a folder"]),
        (["new", "x.toml", "--lattice", "nothing"], ['"nothing"', "honeycomb-zigzag"]),
        (["study", "study.toml", "--out", "no/where/else"], ["no/where"]),
        (["study", "study.toml", "--out", "study.toml/x"], ["study.toml"]),
    ],
)
def test_a_place_that_cannot_be_written(arguments, words, here, capsys):
    """Wrong targets are refused, and neither the target nor a temporary file is left."""
    with untouched(here):
        refused(run(capsys, *arguments), *words)


@contextmanager
def full_disk(size: int) -> Iterator[None]:
    """The system refuses to write any file beyond ``size`` bytes."""
    soft, hard = resource.getrlimit(resource.RLIMIT_FSIZE)
    resource.setrlimit(resource.RLIMIT_FSIZE, (size, hard))
    try:
        yield
    finally:
        resource.setrlimit(resource.RLIMIT_FSIZE, (soft, hard))


SUFFIXES = ["mtx", "npz", "graphml", "csv", "xyz"]
WRITERS = [
    ["levels", "study.toml", "--out", "levels.csv"],
    ["flux", "study.toml", "--out", "flux.csv"],
    ["flux", "study.toml", "--totals", "totals.csv", "--out", "flux.csv"],
    ["new", "other.toml"],
    ["study", "study.toml"],
    ["study", "study.toml", "--out", "old", "--replace"],
    *(
        ["export", "study.toml", f"ring.{suffix}"]
        for suffix in ["mtx", "npz", "graphml", "csv", "xyz"]
    ),
]


@pytest.mark.parametrize("arguments", WRITERS, ids=" ".join)
def test_a_disk_that_fills_up_leaves_nothing(arguments, here, made, capsys):
    """The system cuts the writing short after 64 bytes: one sentence, and all is as before."""
    if "--replace" in arguments:
        shutil.copytree(made, here / "old")
    capsys.readouterr()
    with untouched(here), full_disk(64):
        # quiet: on a busy machine progress lines would stand beside the sentence
        quiet = run(capsys, *arguments, "--quiet")
        refused(quiet, "cannot be written", "File too large")


@pytest.mark.parametrize("arguments", [WRITERS[0], WRITERS[3]], ids=" ".join)
def test_a_disk_found_full_at_the_very_end_leaves_nothing(arguments, here, capsys, monkeypatch):
    """Some systems tell only when the file is flushed to the disk."""

    def full(_: int) -> None:
        raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))

    monkeypatch.setattr(os, "fsync", full)
    with untouched(here):
        refused(run(capsys, *arguments), "cannot be written", "No space left on device")


@pytest.mark.parametrize("arguments", [WRITERS[0], WRITERS[4]], ids=" ".join)
def test_an_unwritable_folder_is_refused(arguments, here, capsys, monkeypatch):
    """Where the system says no the sentence says so; made so for the superuser too."""
    monkeypatch.setattr(os, "access", lambda *_, **__: False)

    def refuse(*_: Any, **__: Any) -> None:
        raise PermissionError(errno.EACCES, os.strerror(errno.EACCES), "here")

    monkeypatch.setattr(os, "mkdir", refuse)
    with untouched(here):
        status, _, err = run(capsys, *arguments)
    assert status == 2
    assert err.count("\n") == 1


def test_a_full_device_is_told(here, capsys):
    """Writing a table straight to a full device fails in words."""
    refused(run(capsys, "levels", "study.toml", "--out", "/dev/full"), "/dev/full", "No space")


def test_a_folder_that_is_no_study_is_never_replaced(here, capsys):
    """Neither without nor with --replace; its content stays."""
    (here / "thesis").mkdir()
    (here / "thesis" / "chapter.tex").write_text("years of work")
    with untouched(here):
        refused(run(capsys, "study", "study.toml", "--out", "thesis"), "thesis")
        options = ("--out", "thesis", "--replace")
        refused(run(capsys, "study", "study.toml", *options), "thesis", "no study wrote")


def test_a_file_in_the_place_of_the_folder_is_never_replaced(here, capsys):
    """A file of that name is not a study folder either."""
    (here / "study-study").write_text("a file")
    with untouched(here):
        refused(run(capsys, "study", "study.toml", "--replace"), "study-study")


def test_an_existing_study_is_replaced_only_when_asked(here, made, capsys):
    """Without --replace the sentence names the option; with it the old folder is gone."""
    shutil.copytree(made, here / "study-study")
    (here / "study-study" / "stray.txt").write_text("of the old study")
    capsys.readouterr()
    with untouched(here):
        refused(run(capsys, "study", "study.toml"), "study-study", "--replace")
    options = ("--set", "ribbon.rows=4", "--set", "control.compare=[]", "--quiet")
    assert run(capsys, "study", "study.toml", "--replace", *options)[0] == 0
    assert "rows = 4" in (here / "study-study" / "study.toml").read_text()
    assert not (here / "study-study" / "stray.txt").exists()
    assert sorted(path.name for path in here.iterdir()) == ["study-study", "study.toml"]


def test_a_disk_that_fills_up_at_the_results_leaves_nothing(here):
    """The binary results are by far the largest file; their library must not crash on it.

    All states of 240 sites take 900 kB; the shell limits files to 500 kB, figures are smaller.
    """
    options = "--set ribbon.length=80 --set levels.all=true --set sweep.flux.points=2"
    command = f"{sys.executable} -m ribbon.cli study study.toml --quiet {options}"
    with untouched(here):
        done = subprocess.run(
            ["bash", "-c", f"ulimit -f 500; {command} --set 'control.compare=[]'"],
            env={**os.environ, "PYTHONPATH": os.pathsep.join(sys.path)},
            capture_output=True,
            text=True,
            timeout=180,
            check=False,
        )
        refused((done.returncode, done.stdout, done.stderr), "cannot be written")


def test_the_shelf_is_not_touched_by_a_lattice_path(here, capsys):
    """A copy of a shelf file beside the ribbon file is as good as the name."""
    (here / "own.toml").write_text(shelf()["square"].read_text())
    (here / "study.toml").write_text(ribbon({"lattice": '"own.toml"'}))
    assert run(capsys, "levels", "study.toml")[0] == 0
