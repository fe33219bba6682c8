"""The ribbon file: defaults, limits, overrides, and the way back to text."""

from __future__ import annotations

import tomllib
from pathlib import Path
from typing import Any, get_args

import numpy as np
import pytest
import tomli_w
from hypothesis import given, settings
from hypothesis import strategies as st

from ribbon.errors import BadInput
from ribbon.hopping.units import UNITS
from ribbon.lattice import close_strip, lay_strip, shelf
from ribbon.study.keys import Unit
from ribbon.study.ribbonfile import (
    RibbonFile,
    complete_toml,
    json_schema,
    read_site_table,
    read_study,
    starter,
)
from ribbon.study.sentences import known_keys, shown
from ribbon.study.toml_text import toml_value

SMALL = {"ribbon": {"lattice": "square", "rows": 3, "length": 8, "orbital": "s"}}


def write(folder: Path, text: str, name: str = "study.toml") -> Path:
    path = folder / name
    path.write_text(text, encoding="utf-8")
    return path


def model(**tables: Any) -> RibbonFile:
    return RibbonFile.model_validate({**SMALL, **tables})


def test_every_default_is_the_one_that_is_documented():
    """A file of four keys gets the defaults of the documented example."""
    file = model()
    assert file.ribbon.half_twists == 1
    assert file.ribbon.spacing is None
    assert (file.hopping.unit, file.hopping.shells) == ("eV", (2.7,))
    assert (file.hopping.mass, file.hopping.site_energy, file.hopping.site_table) == (None, 0, None)
    assert (file.field.flux, file.field.gauge) == (0.0, "uniform")
    assert (file.disorder.strength, file.disorder.vacancies, file.disorder.seed) == (0.0, 0.0, 1)
    assert (file.levels.count, file.levels.near, file.levels.all) == (40, 0.0, False)
    assert (file.levels.between, file.levels.broadening) == (None, 0.02)
    flux = file.sweep.flux
    assert (flux.from_, flux.to, flux.points) == (0.0, 1.0, 101)
    assert (file.sweep.electrons, file.sweep.chemical_potential) == ("neutral", None)
    assert (file.sweep.spin, file.sweep.temperature) == (2, 0.0)
    assert file.continuum.refinements == 3
    assert file.control.compare == ("plain", "double")


def test_the_model_is_frozen():
    """A file that was checked stays as it was checked."""
    file = model()
    with pytest.raises(ValueError, match="frozen"):
        file.ribbon.rows = 4  # type: ignore[misc]


@pytest.mark.parametrize(
    ("hopping", "unit", "shells"),
    [
        ({}, "eV", (2.7,)),
        ({"unit": "t"}, "t", (1.0,)),
        ({"unit": "beta"}, "beta", (1.0,)),
        ({"unit": "GHz", "shells": [0.3]}, "GHz", (0.3,)),
        ({"mass": 0.067}, "meV", None),
        ({"mass": 0.067, "unit": "eV"}, "eV", None),
        ({"shells": [2.7, 0.1, 0.2]}, "eV", (2.7, 0.1, 0.2)),
    ],
)
def test_unit_and_amplitudes_depend_on_each_other(hopping, unit, shells):
    """Unit meV goes with a mass; amplitudes have a default where they have a usual value."""
    found = model(hopping=hopping).hopping
    assert (found.unit, found.shells) == (unit, shells)


def test_units_are_those_of_the_hopping_room():
    """The file offers exactly the units that can be computed with."""
    assert get_args(Unit) == UNITS


@pytest.mark.parametrize(
    ("levels", "expected"),
    [
        ({}, (40, False, None)),
        ({"all": True}, (None, True, None)),
        ({"all": False}, (40, False, None)),
        ({"all": False, "count": 7}, (7, False, None)),
        ({"between": [-1, 1]}, (None, False, (-1.0, 1.0))),
        ({"between": [-1, 1], "all": False}, (None, False, (-1.0, 1.0))),
    ],
)
def test_one_choice_of_levels_is_left(levels, expected):
    """Of count, all and between one is set; `all = false` chooses nothing."""
    found = model(levels=levels).levels
    assert (found.count, found.all, found.between) == expected


@pytest.mark.parametrize(
    ("sweep", "electrons", "potential"),
    [
        ({}, "neutral", None),
        ({"electrons": 0}, 0.0, None),
        ({"electrons": 7.5}, 7.5, None),
        ({"chemical_potential": 0}, None, 0.0),
    ],
)
def test_filling_is_by_number_or_by_potential(sweep, electrons, potential):
    """Zero electrons and a chemical potential of zero are choices like any other."""
    found = model(sweep=sweep).sweep
    assert (found.electrons, found.chemical_potential) == (electrons, potential)


def test_zero_electrons_and_zero_potential_exclude_each_other():
    """A number equal to false still counts as given."""
    with pytest.raises(ValueError, match="exclude"):
        model(sweep={"electrons": 0, "chemical_potential": 0})


def test_site_table_replaces_the_default_site_energy(tmp_path):
    """A table of site energies leaves no second source of them; it is found beside the file."""
    path = write(tmp_path, tomli_w.dumps({**SMALL, "hopping": {"site_table": "sites.csv"}}))
    file = read_study(path)
    assert file.hopping.site_energy is None
    assert file.site_table_path == tmp_path / "sites.csv"
    assert model().site_table_path is None


@pytest.mark.parametrize(
    ("lattice", "expected"),
    [
        ("square", "square"),
        ("mine.toml", "HERE/mine.toml"),
        ("sub/mine", "HERE/sub/mine"),
        ("/abs/mine.toml", "/abs/mine.toml"),
    ],
)
def test_lattice_is_a_name_or_a_path_from_the_file(tmp_path, lattice, expected):
    """Relative paths start at the folder of the file, whatever the working folder is."""
    path = write(tmp_path, tomli_w.dumps({"ribbon": {**SMALL["ribbon"], "lattice": lattice}}))
    found = read_study(path).lattice_path_or_name
    assert str(found) == expected.replace("HERE", str(tmp_path))
    assert isinstance(found, str) == (lattice == "square")


def test_heading_says_what_the_ribbon_is_where_there_is_no_title():
    """The report has a heading either way."""
    assert model(title="Mine").heading == "Mine"
    assert model().heading == "square, 3 by 8, 1 half twist"
    size = {"lattice": "a/b.toml", "width_nm": 2.5, "length_nm": 9, "half_twists": 2}
    heading = RibbonFile.model_validate({"ribbon": size}).heading
    assert heading == "b, 2.5 nm by 9 nm, 2 half twists"


# overrides


@pytest.mark.parametrize(
    ("override", "key", "value"),
    [
        ("ribbon.rows=9", "ribbon.rows", 9),
        (" ribbon.rows = 9 ", "ribbon.rows", 9),
        ("ribbon.length=8.5", "ribbon.length", 8.5),
        ("hopping.unit=t", "hopping.unit", "t"),
        ('hopping.unit="meV"', "hopping.unit", "meV"),
        ("hopping.shells=[1, 0.1]", "hopping.shells", (1.0, 0.1)),
        ("levels.all=true", "levels.all", True),
        ("title=A == b", "title", "A == b"),
        ("sweep.flux.points=5", "sweep.flux.points", 5),
        ("sweep.flux={from = 0.1, to = 0.2, points = 3}", "sweep.flux.to", 0.2),
        ("hopping.site_energy={A = 0.5}", "hopping.site_energy", {"A": 0.5}),
        ("control.compare=[]", "control.compare", ()),
        ("ribbon.lattice=../my lattices/own.toml", "ribbon.lattice", "../my lattices/own.toml"),
    ],
)
def test_an_override_sets_any_key(tmp_path, override, key, value):
    """Values are TOML, and a bare word is a text."""
    base = {**SMALL, "hopping": {"shells": [2.0]}, "levels": {"count": 5}}
    found: Any = read_study(write(tmp_path, tomli_w.dumps(base)), overrides=[override])
    for part in key.split("."):
        found = getattr(found, part)
    assert found == value


@pytest.mark.parametrize(
    ("given", "override", "gone"),
    [
        ({"levels": {"count": 5}}, "levels.all=true", "levels.count"),
        ({"levels": {"between": [0, 1]}}, "levels.count=3", "levels.between"),
        ({"hopping": {"shells": [2.0], "unit": "meV"}}, "hopping.mass=0.1", "hopping.shells"),
        ({"sweep": {"electrons": 4}}, "sweep.chemical_potential=0.0", "sweep.electrons"),
        ({}, "ribbon.width_nm=3.0", "ribbon.rows"),
    ],
)
def test_an_override_puts_aside_what_it_excludes(tmp_path, given, override, gone):
    """One key on the command line is enough to change a choice the file made."""
    file = read_study(write(tmp_path, tomli_w.dumps({**SMALL, **given})), overrides=[override])
    table, key = gone.split(".")
    assert getattr(getattr(file, table), key) is None


def test_overrides_that_exclude_each_other_are_refused(tmp_path):
    """Both were asked for now, so neither wins."""
    path = write(tmp_path, tomli_w.dumps(SMALL))
    with pytest.raises(BadInput, match=r"levels\.count and levels\.all exclude each other"):
        read_study(path, overrides=["levels.all=true", "levels.count=3"])


def test_an_override_does_not_touch_the_file(tmp_path):
    """The file on disk is read only."""
    path = write(tmp_path, tomli_w.dumps(SMALL))
    before = path.read_bytes()
    read_study(path, overrides=["ribbon.rows=9"])
    assert path.read_bytes() == before


def test_a_byte_order_mark_is_forgiven(tmp_path):
    """Some editors put one in front of UTF-8."""
    path = tmp_path / "study.toml"
    path.write_bytes(b"\xef\xbb\xbf" + tomli_w.dumps(SMALL).encode())
    assert read_study(path).ribbon.rows == 3


def test_problems_are_counted(tmp_path):
    """The first problem is told, the others are counted, a refused list once only."""
    text = tomli_w.dumps({"ribbon": {**SMALL["ribbon"], "rows": 0}, "field": {"flux": "x"}})
    path = write(tmp_path, text + 'hopping.shells = ["a"]\n')
    with pytest.raises(
        BadInput, match=r"ribbon\.rows = 0 must be 1 or more \(and 1 more problem\)"
    ):
        read_study(write(tmp_path, text))
    assert path.exists()


# the way back

TITLES = st.text(st.characters(blacklist_categories=["Cs", "Cc"]), max_size=30)
ENERGY = st.floats(-1e12, 1e12)
FLUX = st.floats(-1000, 1000)


@st.composite
def files(draw: st.DrawFn) -> dict[str, Any]:
    """Any valid file as a dictionary, with any of the optional keys left out."""
    ribbon: dict[str, Any] = {"lattice": draw(TITLES.filter(bool)), "orbital": "pz"}
    ribbon |= draw(
        st.sampled_from([{"rows": 4, "length": 7.5}, {"width_nm": 3.0, "length_nm": 1e-3}])
    )
    hopping = draw(
        st.one_of(
            st.fixed_dictionaries(
                {"shells": st.lists(ENERGY, min_size=1, max_size=3)},
                optional={
                    "unit": st.sampled_from(UNITS),
                    "site_energy": ENERGY
                    | st.dictionaries(TITLES.filter(bool), ENERGY, min_size=1),
                },
            ),
            st.fixed_dictionaries({"mass": st.floats(1e-6, 1e6)}, optional={"site_table": TITLES}),
        )
    )
    hopping = {key: value for key, value in hopping.items() if value != ""}
    levels = st.one_of(
        st.fixed_dictionaries({}, optional={"count": st.integers(1, 10**6), "near": ENERGY}),
        st.just({"all": True}),
        st.tuples(ENERGY, ENERGY)
        .filter(lambda pair: pair[0] < pair[1])
        .map(lambda pair: {"between": list(pair)}),
    )
    filling = st.sampled_from([{}, {"electrons": "neutral"}, {"electrons": 0}])
    sweep = filling | ENERGY.map(lambda energy: {"chemical_potential": energy})
    flux = st.fixed_dictionaries(
        {}, optional={"from": st.floats(-1000, 0.9), "points": st.integers(2, 1000)}
    )
    return {
        "title": draw(TITLES),
        "ribbon": {**ribbon, "half_twists": draw(st.integers(0, 1000))},
        "hopping": hopping,
        "field": {"flux": draw(FLUX), "gauge": draw(st.sampled_from(["uniform", "seam"]))},
        "disorder": {"strength": draw(st.floats(0, 1e11)), "seed": draw(st.integers(0, 2**63 - 1))},
        "levels": draw(levels),
        "sweep": {**draw(sweep), "flux": draw(flux), "spin": draw(st.sampled_from([1, 2]))},
        "control": {
            "compare": draw(st.permutations(["plain", "double", "open"]))[: draw(st.integers(0, 3))]
        },
    }


@settings(max_examples=60, deadline=None)
@given(files())
def test_a_completed_file_reads_back_equal(data):
    """Property: the completed text holds everything, bit for bit, and completing is idempotent."""
    file = RibbonFile.model_validate(data)
    text = complete_toml(file)
    again = RibbonFile.model_validate(tomllib.loads(text))
    assert again == file
    assert hash(again) == hash(file)
    assert complete_toml(again) == text


def test_files_that_differ_are_not_equal():
    """One key apart is apart; and a file is not its dictionary."""
    assert model() != model(field={"flux": 0.25})
    assert model() != SMALL


@settings(max_examples=60, deadline=None)
@given(
    st.recursive(
        st.text(st.characters(blacklist_categories=["Cs"]))
        | st.integers(-(2**63), 2**63 - 1)
        | st.booleans()
        | st.floats(allow_nan=False),
        lambda inner: (
            st.lists(inner, max_size=3)
            | st.dictionaries(
                st.text(st.characters(blacklist_categories=["Cs"])), inner, max_size=3
            )
        ),
        max_leaves=6,
    )
)
def test_values_written_inline_are_read_by_the_standard_library(value):
    """Property: the standard TOML reader gives back what was written."""
    assert tomllib.loads(f"value = {toml_value(value)}")["value"] == value


@pytest.mark.parametrize("name", sorted(shelf()))
def test_the_starter_of_every_lattice_reads_and_closes(tmp_path, name):
    """`ribbon new` never writes a file that the other verbs refuse."""
    file = read_study(write(tmp_path, starter(name)))
    ribbon = file.ribbon
    assert ribbon.half_twists == 1
    assert ribbon.rows is not None
    assert ribbon.length is not None
    strip = lay_strip(file.lattice_path_or_name, rows=ribbon.rows, length=ribbon.length)
    ring = close_strip(strip, half_twists=ribbon.half_twists, orbital=ribbon.orbital)
    assert 80 <= ring.n <= 2000


def test_the_starter_shows_every_key(tmp_path):
    """A key that the starter does not show is one nobody finds."""
    text = starter()
    keys = {key.rpartition(".")[2] for key in known_keys(RibbonFile)}
    assert len(keys) > 35
    missing = [key for key in sorted(keys) if key not in text]
    assert missing == []


def test_the_starter_holds_the_defaults(tmp_path):
    """What the starter writes out is what would hold without it."""
    full = read_study(write(tmp_path, starter()))
    ribbon = {"lattice": "honeycomb-zigzag", "rows": 8, "length": 40, "orbital": "pz"}
    assert full == RibbonFile.model_validate({"title": full.title, "ribbon": ribbon})


def test_the_starter_of_a_lattice_file_names_it_from_its_own_folder(tmp_path):
    """The starter may stand in another folder than the lattice file."""
    (tmp_path / "lattices").mkdir()
    (tmp_path / "work").mkdir()
    own = tmp_path / "lattices" / "own.toml"
    own.write_text(shelf()["lieb"].read_text())
    path = tmp_path / "work" / "mine.toml"
    path.write_text(starter(str(own), path=path))
    file = read_study(path)
    assert file.ribbon.lattice == "../lattices/own.toml"
    assert Path(file.lattice_path_or_name).resolve() == own.resolve()


def test_the_starter_of_a_lattice_without_mirror_is_not_twisted(tmp_path):
    """Where no size near closes with a half twist the starter asks for a plain ring."""
    own = tmp_path / "skew.toml"
    own.write_text(
        'name = "skew"\nspacing = 1.0\nperiod = 1.0\nrepeat = [0.25, 1.0]\n'
        'lines = [{ y = 0.0, x = [0.0], species = "a" }]\n'
    )
    file = read_study(write(tmp_path, starter(own, path=tmp_path / "x.toml")))
    assert file.ribbon.half_twists == 0


# the schema


def test_the_schema_knows_every_key_and_says_what_each_is():
    """An editor can complete and explain every key."""
    schema = json_schema()
    tables = schema["$defs"]
    described = [
        key
        for table in tables.values()
        for key, entry in table["properties"].items()
        if entry.get("description")
    ]
    names = [key.rpartition(".")[2] for key in known_keys(RibbonFile) if "." in key]
    assert sorted(described) == sorted(names)
    assert schema["additionalProperties"] is False
    assert {"not": {"required": ["shells", "mass"]}} in tables["Hopping"]["allOf"]


# site tables


def test_a_site_table_may_list_sites_in_any_order(tmp_path):
    """Energies come back in site order, exactly as written, and cannot be changed."""
    path = write(tmp_path, "site,energy\n2,0.3\n0, -1e-3\r\n\n1,7\n", "sites.csv")
    energies = read_site_table(path, 3)
    np.testing.assert_array_equal(energies, [-1e-3, 7.0, 0.3])
    assert not energies.flags.writeable


# how values are shown


@pytest.mark.parametrize(
    ("value", "text"),
    [
        ("8", '"8"'),
        (True, "true"),
        ([True, "a"], '[true, "a"]'),
        ({"A": 1}, "{ A = 1 }"),
        ("a\nb", '"a\\nb"'),
        (10**300, "a number of hundreds of digits"),
        (-(10**300), "a number far below zero"),
        ("x" * 99, '"' + "x" * 56 + "..."),
    ],
)
def test_values_are_shown_as_the_file_would_hold_them(value, text):
    """What was given can be recognised, on one line and at a bearable length."""
    assert shown(value) == text
