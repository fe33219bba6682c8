"""Results as NetCDF: one group a case, named dimensions and units, and back again."""

from __future__ import annotations

import io
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from ribbon.errors import BadInput

if TYPE_CHECKING:
    import xarray as xr

    from ribbon.study.result import Case, StudyResult

__all__ = ["RESULTS", "case_dataset", "read_results", "write_results"]

RESULTS = "results.nc"


def write_results(result: StudyResult, path: Path) -> None:
    """Write every case into a group of its own name in one NetCDF file.

    The file is made in memory first: HDF5 takes the process down when a disk fills up under it.
    """
    stream = io.BytesIO()
    for number, case in enumerate(result.cases):
        data = case_dataset(case)
        data.attrs["title"] = result.title
        data.to_netcdf(stream, mode="a" if number else "w", group=case.name, engine="h5netcdf")
    path.write_bytes(stream.getvalue())


def read_results(path: str | Path) -> xr.DataTree:
    """Open the results of a study again: one group a case, its name as the study gives it.

    ``path`` is ``results.nc`` or the study folder that holds it. Everything is loaded, so that
    the file is free again; states come back complex, as ``state`` with the dimensions ``site``
    and ``level_found``. Raises `BadInput` where there are no results that a study wrote.

    >>> read_results("nowhere")
    Traceback (most recent call last):
    ribbon.errors.BadInput: nowhere: there is no such file; give a study folder or its results.nc
    """
    import xarray as xr

    place = Path(path)
    place = place / RESULTS if place.is_dir() else place
    if not place.is_file():
        raise BadInput(f"{place}: there is no such file; give a study folder or its {RESULTS}")
    try:
        tree = xr.load_datatree(place, engine="h5netcdf")
    except (OSError, ValueError, KeyError) as problem:
        raise BadInput(f"{place}: is no results file of a study ({problem})") from None
    if "ribbon" not in tree.children or "energy" not in tree["ribbon"]:
        raise BadInput(f"{place}: is a NetCDF file, but not the results of a study")
    return tree.map_over_datasets(_with_complex_states)


def _with_complex_states(data: xr.Dataset) -> xr.Dataset:
    """Real and imaginary parts of the states made one variable again."""
    if "state_real" not in data:
        return data
    state = data["state_real"] + 1j * data["state_imaginary"]
    return data.drop_vars(["state_real", "state_imaginary"]).assign(state=state)


def case_dataset(case: Case) -> xr.Dataset:
    """What is known of one case, as a labelled dataset; states as real and imaginary parts."""
    import xarray as xr

    unit = case.levels.unit
    variables: dict[str, Any] = {
        "position": (("site", "axis"), case.network.positions, {"units": "nm"}),
        "site_energy": (("site",), case.hamiltonian.site_energies, {"units": unit}),
        **_bonds(case),
        **_levels(case),
        **_response(case),
        **_edges(case),
        **_density(case),
        **_continuum(case),
    }
    attributes = {
        "label": case.label,
        "flux": case.flux,
        "flux_scale": case.flux_scale,
        "electrons": case.electrons,
        "spin": case.spin,
        "gap": case.gap.gap,
        "gap_lower": case.gap.lower,
        "gap_upper": case.gap.upper,
        "energy_unit": unit,
        "flux_unit": "h/e",
        "state_gauge": "uniform",
    }
    return xr.Dataset(variables, attrs=attributes)


def _bonds(case: Case) -> dict[str, Any]:
    bonds = case.network.bonds
    return {
        "tail": (("bond",), bonds.tail),
        "head": (("bond",), bonds.head),
        "displacement": (("bond", "axis"), bonds.displacement, {"units": "nm"}),
        "winding": (("bond",), bonds.winding),
        "shell": (("bond",), bonds.shell),
        "amplitude": (("bond",), case.hamiltonian.amplitudes, {"units": case.levels.unit}),
    }


def _levels(case: Case) -> dict[str, Any]:
    levels = case.levels
    found: dict[str, Any] = {
        "level": (("level_found",), levels.index),
        "energy": (("level_found",), levels.energies, {"units": levels.unit}),
    }
    if levels.momentum is not None:
        found["momentum"] = (("level_found",), levels.momentum, {"units": "2 pi / L"})
    if levels.parity is not None:
        found["parity"] = (("level_found",), levels.parity)
    if levels.slopes is not None:
        units = f"{levels.unit} per flux quantum"
        found["slope"] = (("level_found",), levels.slopes, {"units": units})
    if levels.states is not None:
        states = np.asarray(levels.states)
        found["state_real"] = (("site", "level_found"), states.real.copy())
        found["state_imaginary"] = (("site", "level_found"), states.imag.copy())
    return found


def _response(case: Case) -> dict[str, Any]:
    response = case.response
    if response is None:
        return {}
    per_quantum = f"{response.unit} per flux quantum"
    rows = ("flux_point", "level_followed")
    found: dict[str, Any] = {
        "sweep_flux": (("flux_point",), response.flux, {"units": "h/e"}),
        "sweep_level": (rows, response.level),
        "sweep_energy": (rows, response.energy, {"units": response.unit}),
        "sweep_slope": (rows, response.slope, {"units": per_quantum}),
        "sweep_branch": (rows, response.branch),
    }
    if response.totals is not None:
        units = {
            "slope": per_quantum,
            "left": per_quantum,
            "right": per_quantum,
            "electrons": "1",
            "chemical_potential": response.unit,
            "energy": response.unit,
        }
        for name, unit in units.items():
            values = getattr(response.totals, name)
            found[f"total_{name}"] = (("flux_point",), values, {"units": unit})
        shared = response.totals.shared.astype(np.int8)
        found["total_shared"] = (("flux_point",), shared)
    return found


def _edges(case: Case) -> dict[str, Any]:
    found = case.edges
    if found is None:
        return {}
    rows = ("level_found",)
    variables: dict[str, Any] = {
        "edge_weight": (rows, found.edge_weight, {"within_nm": found.within}),
        "hole_weight": (rows, found.hole_weight),
        "decay_length": (rows, found.decay_length, {"units": "nm"}),
        "participation": (rows, found.participation),
        "edge_momentum": (rows, found.edge_momentum, {"units": "2 pi / L"}),
        "edge_share": (rows, found.edge_share),
    }
    for number, loop in enumerate(loop for loop in found.loops if loop.is_edge):
        variables[f"edge{number}_site"] = ((f"edge{number}",), loop.sites)
        variables[f"edge{number}_along"] = ((f"edge{number}",), loop.along, {"units": "nm"})
    return variables


def _density(case: Case) -> dict[str, Any]:
    found = case.density
    if found is None:
        return {}
    unit = {"units": found.unit}
    error = {} if found.error is None else {
        "density_error": (("density_point",), found.error, {"units": f"1/{found.unit}"})
    }  # fmt: skip
    return {
        **error,
        "density_energy": (("density_point",), found.energies, unit),
        "density": (
            ("density_point",),
            found.density,
            {"units": f"1/{found.unit}", "broadening": found.broadening},
        ),
        "levels_below": (("density_point",), found.integrated),
        "histogram_edge": (("histogram_edge_point",), found.edges, unit),
        "histogram_count": (("histogram_bin",), found.counts),
    }


def _continuum(case: Case) -> dict[str, Any]:
    found = case.continuum
    if found is None:
        return {}
    unit, rows = {"units": found.unit}, ("level_compared",)
    return {
        "compared_level": (rows, found.level),
        "compared_energy": (("mesh", *rows), found.meshes, unit),
        "mesh_spacing": (("mesh",), found.spacings, {"units": "nm"}),
        "continuum_energy": (rows, found.continuum, {**unit, "zero": found.zero}),
        "extrapolated_energy": (rows, found.extrapolated, unit),
        "relative_error": (rows, found.relative_error),
        "continuum_order": (rows, found.order),
        "continuum_wave": (rows, found.modes.wave, {"units": "2 pi / L"}),
        "continuum_band": (rows, found.modes.band),
        "continuum_holds": (rows, found.holds.astype(np.int8)),
    }
