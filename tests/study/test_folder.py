"""The study folder: what is in it, that it reruns by itself, and that it comes whole or not at all.

Results are read back with xarray, tables with the csv module, the input with the TOML reader of
the standard library.
"""

from __future__ import annotations

import csv
import errno
import json
import os
import re
import shutil
import tomllib
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import matplotlib.figure
import numpy as np
import pytest
import xarray as xr

from ribbon.errors import BadInput
from ribbon.lattice import shelf
from ribbon.study import folder as folder_module
from ribbon.study.folder import check_folder, write_folder
from ribbon.study.result import StudyResult
from ribbon.study.ribbonfile import read_study
from ribbon.study.run import run_study

INPUT = """
title = "Folder"
[ribbon]
lattice = "own.toml"
rows = 3
length = 3.5
orbital = "pz"
[hopping]
site_table = "energies.csv"
[disorder]
strength = 0.5
vacancies = 0.1
seed = 3
[levels]
count = 6
[sweep]
flux = { points = 5 }
temperature = 300.0
[control]
compare = ["plain", "double", "open"]
"""
SITES = 21


def lay_input(folder: Path) -> Path:
    """A ribbon file with a lattice file and a site table beside it."""
    folder.mkdir(parents=True, exist_ok=True)
    own = shelf()["honeycomb-zigzag"].read_text(encoding="utf-8").replace("0.142", "0.15", 2)
    (folder / "own.toml").write_text(own, encoding="utf-8")
    energies = np.random.default_rng(1).uniform(-0.2, 0.2, SITES)
    rows = "".join(f"{site},{float(energy)!r}\n" for site, energy in enumerate(energies))
    (folder / "energies.csv").write_text("site,energy\n" + rows, encoding="utf-8")
    (folder / "ring.toml").write_text(INPUT, encoding="utf-8")
    return folder / "ring.toml"


@pytest.fixture(scope="module")
def result(tmp_path_factory: pytest.TempPathFactory) -> StudyResult:
    """A disordered study with vacancies, its own lattice file and a site table."""
    return run_study(read_study(lay_input(tmp_path_factory.mktemp("input"))))


@pytest.fixture(scope="module")
def made(result: StudyResult, tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Its folder, written once, figures included."""
    return write_folder(result, tmp_path_factory.mktemp("made") / "ring-study")


@pytest.fixture(scope="module")
def small(tmp_path_factory: pytest.TempPathFactory) -> StudyResult:
    """The least study: one case, three fluxes."""
    file = lay_input(tmp_path_factory.mktemp("small"))
    keys = ["control.compare=[]", "sweep.flux.points=3", "levels.count=2"]
    return run_study(read_study(file, overrides=keys))


@pytest.fixture
def plain_figures(monkeypatch: pytest.MonkeyPatch) -> None:
    """One empty figure in place of all: drawing takes most of the time of a folder."""

    def draw(_: StudyResult) -> dict[str, matplotlib.figure.Figure]:
        return {"levels": matplotlib.figure.Figure(figsize=(1, 1))}

    monkeypatch.setattr(folder_module, "draw_all", draw)


def files_of(folder: Path) -> set[str]:
    return {path.relative_to(folder).as_posix() for path in folder.rglob("*") if path.is_file()}


def rows_of(path: Path) -> list[dict[str, str]]:
    with path.open(encoding="utf-8", newline="") as stream:
        return list(csv.DictReader(stream))


# --- what is in it -------------------------------------------------------------------------------


def test_a_folder_holds_what_was_promised(made: Path, result: StudyResult) -> None:
    """Report, figures twice over with their numbers, tables of every case, results, input."""
    files = files_of(made)
    assert {"report.html", "results.nc", "study.toml", "provenance.json"} <= files
    assert {"lattice.toml", "site-energies.csv"} <= files
    figures = {name for name in files if name.startswith("figures/")}
    drawn = {Path(name).stem for name in figures if name.endswith(".svg")}
    assert {"ribbon", "levels", "flux", "currents", "shift"} <= drawn
    for name in drawn:
        assert {f"figures/{name}.png", f"figures/{name}.csv"} <= figures
    tables = {Path(name).stem for name in files if name.startswith("tables/")}
    assert {"checks", "topology"} <= tables
    assert len(result.cases) == 5
    for case in result.cases:
        kinds = {"levels", "sites", "bonds"} | ({"flux", "totals"} if case.response else set())
        assert {f"{kind}-{case.name}" for kind in kinds} <= tables
        assert case is result.ribbon or f"shift-ribbon-{case.name}" in tables
    assert not any(name.startswith(".") or name.endswith(".part") for name in files)


def test_nothing_in_the_folder_points_outside(made: Path) -> None:
    """The report opens offline; no path of this machine is written anywhere."""
    page = (made / "report.html").read_text(encoding="utf-8")
    assert not re.search(r'(?:src|href)="(?!#|data:)', page)
    for name in ("study.toml", "provenance.json", "report.html"):
        assert str(made.parent) not in (made / name).read_text(encoding="utf-8")


def test_the_input_is_complete(made: Path) -> None:
    """Defaults filled in, lattice and site table by the names they have in the folder."""
    with (made / "study.toml").open("rb") as stream:
        table = tomllib.load(stream)
    assert table["ribbon"]["lattice"] == "lattice.toml"
    assert table["hopping"]["site_table"] == "site-energies.csv"
    assert table["hopping"]["shells"] == [2.7]
    assert table["sweep"]["flux"] == {"from": 0.0, "to": 1.0, "points": 5}
    assert table["disorder"] == {"strength": 0.5, "vacancies": 0.1, "seed": 3}
    assert set(table) == {
        *("title", "ribbon", "hopping", "field", "disorder", "levels", "sweep"),
        *("edges", "continuum", "control"),
    }


def test_provenance(made: Path, result: StudyResult) -> None:
    """Versions, seed, times, every check with its number, every note."""
    with (made / "provenance.json").open(encoding="utf-8") as stream:
        told = json.load(stream)
    assert told["seed"] == 3
    assert told["packages"]["numpy"] == np.__version__
    assert told["notes"] == list(result.notes)
    assert set(told["seconds"]) == set(result.seconds)
    assert [(c["name"], c["passed"], c["value"]) for c in told["checks"]] == [
        (check.name, check.passed, check.value) for check in result.checks
    ]


def test_tables_hold_the_numbers_bit_for_bit(made: Path, result: StudyResult) -> None:
    """Levels, site energies and checks, read back as floats."""
    ribbon = result.ribbon
    rows = rows_of(made / "tables" / "levels-ribbon.csv")
    assert [int(row["level"]) for row in rows] == ribbon.levels.index.tolist()
    assert [float(row["energy"]) for row in rows] == ribbon.levels.energies.tolist()
    sites = rows_of(made / "tables" / "sites-ribbon.csv")
    energies = ribbon.hamiltonian.site_energies.tolist()
    assert [float(row["site_energy"]) for row in sites] == energies
    checks = rows_of(made / "tables" / "checks.csv")
    assert [float(row["value"]) for row in checks] == [check.value for check in result.checks]


def test_results_open_with_xarray(made: Path, result: StudyResult) -> None:
    """A group for each case, named dimensions, units, every array bit for bit."""
    for case in result.cases:
        with xr.open_dataset(made / "results.nc", group=case.name, engine="h5netcdf") as data:
            data.load()
        assert data.sizes["site"] == case.network.n
        assert data.sizes["bond"] == case.network.bonds.m
        pairs = {
            "position": case.network.positions,
            "site_energy": case.hamiltonian.site_energies,
            "tail": case.network.bonds.tail,
            "head": case.network.bonds.head,
            "displacement": case.network.bonds.displacement,
            "winding": case.network.bonds.winding,
            "amplitude": case.hamiltonian.amplitudes,
            "level": case.levels.index,
            "energy": case.levels.energies,
        }
        for name, array in pairs.items():
            np.testing.assert_array_equal(data[name].values, array)
        assert data["energy"].attrs["units"] == data.attrs["energy_unit"] == "eV"
        assert data["position"].attrs["units"] == "nm"
        states = data["state_real"].values + 1j * data["state_imaginary"].values
        assert case.levels.states is not None
        np.testing.assert_array_equal(states, case.levels.states)
        assert data.attrs["flux"] == case.flux
        assert data.attrs["electrons"] == case.electrons
        assert data.attrs["gap"] == case.gap.gap
        assert data.attrs["title"] == "Folder"
        assert ("sweep_energy" in data) == (case.response is not None)


def test_states_and_sweep_of_the_results(made: Path, result: StudyResult) -> None:
    """States solve the matrix rebuilt from the stored bonds; the sweep is stored whole."""
    with xr.open_dataset(made / "results.nc", group="ribbon", engine="h5netcdf") as data:
        data.load()
    n = data.sizes["site"]
    matrix = np.diag(data["site_energy"].values).astype(complex)
    for tail, head, amplitude in zip(
        data["tail"].values, data["head"].values, data["amplitude"].values, strict=True
    ):
        matrix[tail, head] += amplitude
        matrix[head, tail] += amplitude
    states = data["state_real"].values + 1j * data["state_imaginary"].values
    residual = matrix @ states - states * data["energy"].values
    assert np.abs(residual).max() < 1e-9
    assert states.shape == (n, data.sizes["level_found"])
    response = result.ribbon.response
    assert response is not None
    assert response.totals is not None
    for name in ("flux", "level", "energy", "slope", "branch"):
        np.testing.assert_array_equal(data[f"sweep_{name}"].values, getattr(response, name))
    for name in ("slope", "left", "right", "electrons", "chemical_potential", "energy", "shared"):
        np.testing.assert_array_equal(data[f"total_{name}"].values, getattr(response.totals, name))


# --- running again -------------------------------------------------------------------------------


@pytest.mark.usefixtures("plain_figures")
def test_a_folder_runs_again_by_itself(made: Path, tmp_path: Path) -> None:
    """Moved elsewhere, its input gone: the same tables, figures' numbers and results."""
    moved = tmp_path / "elsewhere"
    shutil.copytree(made, moved)
    again = write_folder(run_study(read_study(moved / "study.toml")), tmp_path / "again")
    tables = {name for name in files_of(made) if name.endswith(".csv")}
    assert tables == {name for name in files_of(again) if name.endswith(".csv")}
    for name in tables | {"study.toml", "lattice.toml"}:
        assert (again / name).read_bytes() == (made / name).read_bytes(), name
    for group in ("ribbon", "shorter", "longer", "double", "open"):
        with (
            xr.open_dataset(made / "results.nc", group=group, engine="h5netcdf") as one,
            xr.open_dataset(again / "results.nc", group=group, engine="h5netcdf") as two,
        ):
            assert one.identical(two)


@pytest.mark.usefixtures("plain_figures")
def test_a_folder_can_be_replaced_by_a_run_of_its_own_input(
    small: StudyResult, tmp_path: Path
) -> None:
    """Reading from the folder that is being replaced: its files are copied before it goes."""
    here = write_folder(small, tmp_path / "study")
    names = ("study.toml", "site-energies.csv", "lattice.toml")
    before = [(here / name).read_bytes() for name in names]
    write_folder(run_study(read_study(here / "study.toml")), here, replace=True)
    assert [(here / name).read_bytes() for name in names] == before
    assert [path.name for path in tmp_path.iterdir()] == ["study"]


@pytest.mark.usefixtures("plain_figures")
def test_a_lattice_of_the_shelf_travels_along(tmp_path: Path) -> None:
    """A later shelf may differ: the file that was used stands in the folder."""
    file = tmp_path / "ring.toml"
    file.write_text(
        '[ribbon]\nlattice = "kagome"\nrows = 3\nlength = 3\norbital = "s"\n'
        '[hopping]\nunit = "t"\n[sweep]\nflux = { points = 3 }\n[control]\ncompare = []\n',
        encoding="utf-8",
    )
    made = write_folder(run_study(read_study(file)), tmp_path / "out")
    assert (made / "lattice.toml").read_bytes() == shelf()["kagome"].read_bytes()
    assert read_study(made / "study.toml").ribbon.lattice == "lattice.toml"


# --- whole or not at all -------------------------------------------------------------------------


@pytest.mark.usefixtures("plain_figures")
def test_only_a_study_folder_is_replaced(small: StudyResult, made: Path, tmp_path: Path) -> None:
    """A file, a foreign folder, an old study without and with the word."""
    study = tmp_path / "study"
    shutil.copytree(made, study)
    (study / "stray.txt").write_text("old")
    with pytest.raises(BadInput, match="exists already; --replace replaces it"):
        write_folder(small, study)
    assert (study / "stray.txt").exists()
    assert write_folder(small, study, replace=True) == study
    assert not (study / "stray.txt").exists()
    foreign = tmp_path / "foreign"
    foreign.mkdir()
    (foreign / "provenance.json").write_text('{"some": "thing"}')
    (foreign / "study.toml").write_text("")
    file = tmp_path / "file"
    file.write_text("text")
    for replace in (False, True):
        with pytest.raises(BadInput, match="no study wrote, and is left alone"):
            write_folder(small, foreign, replace=replace)
        with pytest.raises(BadInput, match="is a file; --out takes a folder"):
            write_folder(small, file, replace=replace)
        with pytest.raises(BadInput, match="there is no folder"):
            write_folder(small, tmp_path / "none" / "study", replace=replace)
    assert sorted(p.name for p in foreign.iterdir()) == ["provenance.json", "study.toml"]
    assert sorted(p.name for p in tmp_path.iterdir()) == ["file", "foreign", "study"]


def test_a_place_is_checked_before_anything_is_computed(made: Path, tmp_path: Path) -> None:
    """The same sentences without a result; a free place says nothing."""
    check_folder(tmp_path / "new", replace=False)
    check_folder(made, replace=True)
    with pytest.raises(BadInput, match="exists already"):
        check_folder(made, replace=False)


STAGES = [
    *("_write_input", "_write_tables", "_write_figures"),
    *("write_results", "render_report", "_provenance"),
]


@pytest.fixture(params=STAGES)
def stage(request: pytest.FixtureRequest) -> Iterator[str]:
    yield request.param


@pytest.mark.usefixtures("plain_figures")
@pytest.mark.parametrize("replace", [False, True])
def test_a_disk_that_fills_up_leaves_nothing(
    stage: str,
    replace: bool,
    small: StudyResult,
    made: Path,
    tmp_path: Path,
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    """At every stage in turn: one sentence, nothing half-written, an old study as it was."""
    study = tmp_path / "study"
    if replace:
        shutil.copytree(made, study)
    before = {name: (study / name).read_bytes() for name in files_of(study)} if replace else {}

    def full(*_: Any) -> Any:
        raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))

    monkeypatch.setattr(folder_module, stage, full)
    with pytest.raises(BadInput, match=r"study: cannot be written \(No space left on device\)"):
        write_folder(small, study, replace=replace)
    assert [path.name for path in tmp_path.iterdir()] == (["study"] if replace else [])
    assert {name: (study / name).read_bytes() for name in files_of(study)} == before


@pytest.mark.usefixtures("plain_figures")
@pytest.mark.parametrize("problem", [KeyboardInterrupt, RuntimeError, MemoryError])
def test_an_interrupt_or_a_mistake_leaves_nothing(
    problem: type[BaseException],
    small: StudyResult,
    tmp_path: Path,
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    """It is passed on as it is, and the temporary folder is gone."""

    def broken(*_: Any) -> Any:
        raise problem("now")

    monkeypatch.setattr(folder_module, "write_results", broken)
    with pytest.raises(problem, match="now"):
        write_folder(small, tmp_path / "study")
    assert list(tmp_path.iterdir()) == []


@pytest.mark.usefixtures("plain_figures")
def test_an_old_study_comes_back_when_the_move_fails(
    small: StudyResult, made: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """The last step of all is refused by the system: the old folder takes its place again."""
    study = tmp_path / "study"
    shutil.copytree(made, study)
    right = Path.rename

    def refuse(self: Path, target: Path) -> Path:
        if self.name.endswith(".part"):
            raise OSError(errno.EACCES, os.strerror(errno.EACCES))
        return right(self, target)

    monkeypatch.setattr(Path, "rename", refuse)
    with pytest.raises(BadInput, match="Permission denied"):
        write_folder(small, study, replace=True)
    assert [path.name for path in tmp_path.iterdir()] == ["study"]
    assert files_of(study) == files_of(made)


@pytest.mark.usefixtures("plain_figures")
def test_a_link_to_a_study_is_followed(small: StudyResult, made: Path, tmp_path: Path) -> None:
    """What it points to is replaced; the link stays a link."""
    target = tmp_path / "target"
    shutil.copytree(made, target)
    link = tmp_path / "link"
    link.symlink_to(target, target_is_directory=True)
    write_folder(small, link, replace=True)
    assert link.is_symlink()
    assert (link / "report.html").is_file()
    assert (target / "report.html").is_file()
