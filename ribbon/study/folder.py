"""The study folder: report, figures, tables, results and the input, written whole."""

from __future__ import annotations

import json
import shutil
from dataclasses import asdict
from pathlib import Path
from typing import TYPE_CHECKING

from ribbon.errors import BadInput
from ribbon.lattice import shelf
from ribbon.study.figures import draw_all, figure_data, to_png, to_svg
from ribbon.study.report import render_report
from ribbon.study.ribbonfile import complete_toml
from ribbon.study.state_tables import (
    continuum_shift_table,
    continuum_table,
    density_table,
    edges_table,
    histogram_table,
    meshes_table,
)
from ribbon.study.store import RESULTS, write_results
from ribbon.study.tables import (
    Table,
    bonds_table,
    checks_table,
    flux_table,
    harmonics_table,
    levels_table,
    shift_table,
    sites_table,
    topology_table,
    totals_table,
)
from ribbon.study.whole import whole_folder

if TYPE_CHECKING:
    from ribbon.study.result import Case, StudyResult
    from ribbon.study.ribbonfile import RibbonFile

__all__ = ["check_folder", "write_folder"]

MARK = "provenance.json"


def check_folder(folder: Path, *, replace: bool) -> None:
    """Refuse a folder that cannot or may not be written, before anything is computed."""
    parent = folder.resolve().parent
    if not parent.is_dir():
        raise BadInput(f"{folder}: there is no folder {parent} to put it in")
    if not folder.exists() and not folder.is_symlink():
        return
    if not folder.is_dir():
        raise BadInput(f"{folder}: is a file; --out takes a folder")
    if not _is_study(folder):
        raise BadInput(
            f"{folder}: is a folder that no study wrote, and is left alone; give another --out"
        )
    if not replace:
        raise BadInput(f"{folder}: exists already; --replace replaces it, --out names another")


def write_folder(result: StudyResult, folder: str | Path, *, replace: bool = False) -> Path:
    """Write the study folder and return its path.

    It is written under a temporary name and moved into place whole. Raises `BadInput` where a
    folder of that name stands already (unless ``replace`` and a study wrote it), or the disk
    refuses.
    """
    folder = Path(folder)
    check_folder(folder, replace=replace)
    with whole_folder(folder.resolve()) as part:
        _write_input(result.file, part)
        _write_tables(result, part / "tables")
        svg = _write_figures(result, part / "figures")
        write_results(result, part / RESULTS)
        _text(part / "report.html", render_report(result, svg))
        _text(part / MARK, _provenance(result))
    return folder


def _is_study(folder: Path) -> bool:
    try:
        mark = json.loads((folder / MARK).read_text(encoding="utf-8"))
    except (OSError, ValueError):
        return False
    return isinstance(mark, dict) and "halftwist" in mark and (folder / "study.toml").is_file()


def _text(path: Path, text: str) -> None:
    path.write_text(text, encoding="utf-8", newline="")


def _write_input(file: RibbonFile, part: Path) -> None:
    """The complete input, with lattice file and site table beside it."""
    lattice = file.lattice_path_or_name
    source = shelf()[lattice] if isinstance(lattice, str) else lattice
    shutil.copyfile(source, part / "lattice.toml")
    ribbon = file.ribbon.model_copy(update={"lattice": "lattice.toml"})
    hopping = file.hopping
    if file.site_table_path is not None:
        shutil.copyfile(file.site_table_path, part / "site-energies.csv")
        hopping = hopping.model_copy(update={"site_table": "site-energies.csv"})
    here = file.model_copy(update={"ribbon": ribbon, "hopping": hopping})
    _text(part / "study.toml", complete_toml(here))


def _write_tables(result: StudyResult, part: Path) -> None:
    part.mkdir()
    tables = [checks_table(result.checks), topology_table(result.cases)]
    for case in result.cases:
        tables += _tables_of(case)
    tables += [shift_table(result.ribbon, control) for control in result.controls]
    tables += [
        continuum_shift_table(result.ribbon, control)
        for control in result.controls
        if control.continuum_shift is not None
    ]
    for table in tables:
        _text(part / f"{table.name}.csv", table.to_csv())


def _tables_of(case: Case) -> list[Table]:
    unit = case.levels.unit
    tables = [levels_table(case, unit), sites_table(case), bonds_table(case)]
    if case.response is not None:
        tables.append(flux_table(case, unit))
        if case.response.totals is not None:
            tables.append(totals_table(case, unit))
    if case.harmonics is not None:
        tables.append(harmonics_table(case, unit))
    if case.edges is not None:
        tables.append(edges_table(case))
    if case.density is not None:
        tables += [density_table(case), histogram_table(case)]
    if case.continuum is not None:
        tables += [continuum_table(case), meshes_table(case)]
    return tables


def _write_figures(result: StudyResult, part: Path) -> dict[str, str]:
    """Figures as SVG and PNG with the numbers behind them as CSV; returns the SVG texts."""
    part.mkdir()
    svg = {}
    for name, figure in draw_all(result).items():
        svg[name] = to_svg(figure)
        _text(part / f"{name}.svg", svg[name])
        (part / f"{name}.png").write_bytes(to_png(figure))
    for name, table in figure_data(result).items():
        _text(part / f"{name}.csv", table.to_csv())
    return svg


def _provenance(result: StudyResult) -> str:
    told = {
        **result.provenance,
        "seconds": {name: round(value, 3) for name, value in result.seconds.items()},
        "checks": [asdict(check) for check in result.checks],
        "notes": list(result.notes),
    }
    return json.dumps(told, indent=2, ensure_ascii=False, default=str) + "\n"
