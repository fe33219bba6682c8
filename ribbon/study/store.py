"""Results as NetCDF: one group a case, named dimensions and units."""

from __future__ import annotations

import io
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

if TYPE_CHECKING:
    import xarray as xr

    from ribbon.study.result import Case, StudyResult

__all__ = ["case_dataset", "write_results"]


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
