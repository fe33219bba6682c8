"""Results opened again: the same bits, complex states, and a sentence for foreign files."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
import xarray as xr

import ribbon
from ribbon.errors import BadInput
from ribbon.study import RibbonFile, StudyResult, read_results, run_study
from ribbon.study.store import write_results

TABLES = {
    "ribbon": {"lattice": "honeycomb-zigzag", "rows": 4, "length": 6, "orbital": "pz"},
    "levels": {"all": True, "broadening": 0.1},
    "sweep": {"flux": {"from": 0.0, "to": 1.0, "points": 5}},
    "control": {"compare": ["plain", "open"]},
    "continuum": {"refinements": 2},
    "field": {"flux": 0.1},
}


@pytest.fixture(scope="module")
def result() -> StudyResult:
    """A small study with everything in it."""
    return run_study(RibbonFile.model_validate(TABLES))


@pytest.fixture(scope="module")
def path(result: StudyResult, tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Its results as a file."""
    place = tmp_path_factory.mktemp("results") / "results.nc"
    write_results(result, place)
    return place


def test_every_case_comes_back_to_the_bit(result: StudyResult, path: Path) -> None:
    """Levels, states, edges, densities, continuum: equal arrays, not close ones."""
    tree = read_results(path)
    assert list(tree.children) == [case.name for case in result.cases]
    for case in result.cases:
        data = tree[case.name]
        assert case.edges is not None
        assert case.density is not None
        pairs = {
            "energy": case.levels.energies,
            "level": case.levels.index,
            "state": case.levels.states,
            "edge_weight": case.edges.edge_weight,
            "decay_length": case.edges.decay_length,
            "edge_momentum": case.edges.edge_momentum,
            "density": case.density.density,
            "levels_below": case.density.integrated,
            "histogram_count": case.density.counts,
            "site_energy": case.hamiltonian.site_energies,
            "position": case.network.positions,
        }
        for name, values in pairs.items():
            np.testing.assert_array_equal(data[name].values, values, err_msg=name)
        if case.continuum is not None:
            np.testing.assert_array_equal(data["compared_energy"].values, case.continuum.meshes)
            np.testing.assert_array_equal(data["continuum_energy"].values, case.continuum.continuum)
    assert result.ribbon.continuum is not None


def test_dimensions_and_units_have_names(path: Path) -> None:
    """No dimension without a name of its own, no energy without a unit."""
    data = read_results(path)["ribbon"]
    for name, variable in data.variables.items():
        assert not any(str(dim).startswith("dim_") for dim in variable.dims), name
        if "energy" in str(name):
            assert variable.attrs["units"] == "eV", name
    assert data["state"].dims == ("site", "level_found")
    assert data["density"].attrs["units"] == "1/eV"
    assert data["edge0_along"].attrs["units"] == "nm"


def test_a_folder_opens_like_its_file(path: Path) -> None:
    """`ribbon.read_results` takes the study folder too, and keeps no file open."""
    assert ribbon.read_results(path.parent).identical(read_results(path))
    path.rename(path.with_name("moved.nc"))
    path.with_name("moved.nc").rename(path)


def test_complex_states_solve_the_exported_matrix(result: StudyResult, path: Path) -> None:
    """H psi = E psi with the matrix assembled afresh (numpy)."""
    data = read_results(path)["ribbon"]
    matrix = result.ribbon.hamiltonian.matrix(float(data.attrs["flux"])).toarray()
    states = data["state"].values
    assert np.iscomplexobj(states)
    np.testing.assert_allclose(matrix @ states, states * data["energy"].values, rtol=0, atol=1e-10)


def test_foreign_files_are_refused_in_a_sentence(tmp_path: Path) -> None:
    """Text, an empty file and a NetCDF file of something else."""
    text = tmp_path / "notes.nc"
    text.write_text("not a NetCDF file", encoding="utf-8")
    with pytest.raises(BadInput, match="no results file of a study"):
        read_results(text)
    empty = tmp_path / "empty.nc"
    empty.touch()
    with pytest.raises(BadInput, match="no results file of a study"):
        read_results(empty)
    other = tmp_path / "other.nc"
    xr.Dataset({"a": ("x", [1.0])}).to_netcdf(other, engine="h5netcdf")
    with pytest.raises(BadInput, match="not the results of a study"):
        read_results(other)
    with pytest.raises(BadInput, match="no such file"):
        read_results(tmp_path)
