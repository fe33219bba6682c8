"""Figures: what they show, how they look, and that they never vary."""

from __future__ import annotations

import itertools
import subprocess
import sys
from dataclasses import fields, replace
from typing import Any

import closed_forms as known
import numpy as np
import pytest
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.text import Text
from numpy.testing import assert_allclose
from small_study import make_study

from ribbon.analysis import levels_between
from ribbon.hopping import Hopping, assemble
from ribbon.lattice import Network, certify_topology, close_strip, lay_strip, remove_sites
from ribbon.study.figures import (
    draw_all,
    draw_currents,
    draw_flux,
    draw_levels,
    draw_ribbon,
    draw_shift,
    figure_data,
    to_png,
    to_svg,
)
from ribbon.study.figures.currents import broken_current
from ribbon.study.figures.flux import branch_lines
from ribbon.study.figures.levels import level_window
from ribbon.study.figures.look import DARK, FULL, HALF, INK, LOOKS, NIGHT, PAPER, QUIET, styled
from ribbon.study.result import StudyResult
from ribbon.study.tables import harmonics_table, shift_table

# Machado, Oliveira & Fernandes, IEEE Trans. Vis. Comput. Graph. 15, 1291 (2009), severity 1,
# recalled from memory (each row sums to one, as it must for greys to stay grey)
DEUTERANOPIA = [
    [0.367322, 0.860646, -0.227968],
    [0.280085, 0.672501, 0.047413],
    [-0.011820, 0.042940, 0.968881],
]
PROTANOPIA = [
    [0.152286, 1.052583, -0.204868],
    [0.114503, 0.786281, 0.099216],
    [-0.003882, -0.048116, 1.051998],
]
# sRGB to CIE XYZ under D65 (IEC 61966-2-1)
TO_XYZ = np.array([
    [0.4124564, 0.3575761, 0.1804375],
    [0.2126729, 0.7151522, 0.0721750],
    [0.0193339, 0.1191920, 0.9503041],
])  # fmt: skip


@pytest.fixture(scope="module")
def annulene() -> StudyResult:
    return make_study()


@pytest.fixture(scope="module")
def zigzag() -> StudyResult:
    return make_study("honeycomb-zigzag", 4, 8, points=9)


def linear(colour: str) -> np.ndarray:
    """Linear light of a colour written #rrggbb."""
    value = np.array([int(colour[i : i + 2], 16) / 255 for i in (1, 3, 5)])
    return np.where(value <= 0.04045, value / 12.92, ((value + 0.055) / 1.055) ** 2.4)


def lab(light: np.ndarray) -> np.ndarray:
    """CIE 1976 L*a*b* of linear sRGB light, white point D65."""
    ratio = TO_XYZ @ np.clip(light, 0, 1) / (TO_XYZ @ np.ones(3))
    f = np.where(ratio > 216 / 24389, np.cbrt(ratio), (24389 / 27 * ratio + 16) / 116)
    return np.array([116 * f[1] - 16, 500 * (f[0] - f[1]), 200 * (f[1] - f[2])])


def contrast(one: str, two: str) -> float:
    """Contrast ratio as WCAG 2.1 defines it."""
    light = sorted(float(TO_XYZ[1] @ linear(colour)) for colour in (one, two))
    return (light[1] + 0.05) / (light[0] + 0.05)


def texts(figure: Figure) -> list[Text]:
    """Every text that is seen."""
    found = figure.findobj(Text)
    return [text for text in found if text.get_text() and text.get_visible()]


def all_figures(result: StudyResult) -> list[Figure]:
    return list(draw_all(result).values())


# --- the look ----------------------------------------------------------------------------------


@pytest.mark.parametrize("page", ["colour", "dark"])
@pytest.mark.parametrize("sight", [np.eye(3), DEUTERANOPIA, PROTANOPIA])
def test_colours_of_the_cases_are_told_apart(page: str, sight: Any):
    """Twenty units of CIE 1976 colour difference (2.3 are just noticeable) for every pair."""
    seen = [lab(np.asarray(sight) @ linear(getattr(look, page))) for look in LOOKS.values()]
    for one, two in itertools.combinations(seen, 2):
        assert np.linalg.norm(one - two) > 20


def test_cases_differ_in_grey_print_too():
    """No two cases share a line style or a marker."""
    assert len({str(look.dash) for look in LOOKS.values()}) == len(LOOKS)
    assert len({look.marker for look in LOOKS.values()}) == len(LOOKS)


def test_contrast_with_the_page():
    """WCAG 2.1: 3 to 1 for what is drawn (1.4.11), 4.5 to 1 for text (1.4.3), on both pages."""
    for look in LOOKS.values():
        assert contrast(look.colour, PAPER) >= 3
        assert contrast(look.dark, NIGHT) >= 3
    for ink in (INK, QUIET):
        assert contrast(ink, PAPER) >= 4.5
        assert contrast(DARK[ink], NIGHT) >= 4.5


def test_figures_fit_printed_columns(zigzag: StudyResult):
    """Widths of one or two columns, no text below 7 pt, none beyond the edge of the sheet."""
    for figure in all_figures(zigzag):
        assert round(figure.get_figwidth() * 25.4, 6) in {HALF, FULL}
        canvas = FigureCanvasAgg(figure)
        with styled():
            canvas.draw()
            sheet = figure.bbox.padded(0.5)
            for text in texts(figure):
                assert text.get_fontsize() >= 7
                box = text.get_window_extent(canvas.get_renderer())
                inside = sheet.x0 <= box.x0 and box.x1 <= sheet.x1
                inside = inside and sheet.y0 <= box.y0 and box.y1 <= sheet.y1
                # tick labels outside the limits are made but not drawn
                assert inside or text in ticks_out_of_view(figure), text.get_text()


def ticks_out_of_view(figure: Figure) -> list[Text]:
    found = []
    for axes in figure.axes:
        for axis in (axes.xaxis, axes.yaxis):
            low, high = sorted(axis.get_view_interval())
            for tick in axis.get_major_ticks():
                if not low <= tick.get_loc() <= high:
                    found += [tick.label1, tick.label2]
    return found


def test_svg_is_the_same_every_time(annulene: StudyResult):
    """Drawn twice from the same study, byte for byte; no date, texts as text."""
    first = {name: to_svg(figure) for name, figure in draw_all(annulene).items()}
    again = {name: to_svg(figure) for name, figure in draw_all(annulene).items()}
    assert first == again
    assert set(first) == {"ribbon", "space", "levels", "flux", "currents", "shift"}
    for svg in first.values():
        assert "dc:date" not in svg
        assert "<text" in svg
        assert "half-twisted ribbon" in svg


def test_png_holds_the_sheet_at_its_size(annulene: StudyResult):
    """178 mm at 300 dots an inch are 2102 dots."""
    data = to_png(draw_levels(annulene.cases))
    assert data[:8] == b"\x89PNG\r\n\x1a\n"
    assert int.from_bytes(data[16:20]) == int(178 / 25.4 * 300)


def test_drawing_needs_no_window_and_leaves_no_trace():
    """Figures are made without pyplot, and the settings of the session stay as they were."""
    program = (
        "import sys, matplotlib as mpl\n"
        "def now(): return {k: mpl.rcParams[k] for k in mpl.rcParams if k != 'backend'}\n"
        "before = now()\n"
        "from ribbon.study.figures.look import new_figure, styled, to_svg\n"
        "with styled():\n"
        "    figure = new_figure(86, 60)\n"
        "    figure.subplots().plot([0, 1])\n"
        "to_svg(figure)\n"
        "assert 'matplotlib.pyplot' not in sys.modules\n"
        "assert now() == before\n"
    )
    subprocess.run([sys.executable, "-W", "error", "-c", program], check=True, env={"PATH": ""})


# --- the ribbon --------------------------------------------------------------------------------


def drawn_ribbon(lattice: str, rows: int, length: float, twists: int = 1) -> tuple[Any, Figure]:
    ring = close_strip(
        lay_strip(lattice, rows=rows, length=length), half_twists=twists, orbital="s"
    )
    return ring, draw_ribbon(case_of(ring))


def case_of(network: Any) -> Any:
    study = make_study(points=0, controls=())
    return replace(study.ribbon, network=network, topology=certify_topology(network))


def letters(figure: Figure) -> dict[str, list[tuple[float, float]]]:
    """Places of the letters at the two ends, left first."""
    found: dict[str, list[tuple[float, float]]] = {"P": [], "Q": []}
    for text in texts(figure):
        if text.get_text() in found:
            found[text.get_text()].append(text.xy)  # type: ignore[attr-defined]
    return {letter: sorted(places) for letter, places in found.items()}


@pytest.mark.parametrize(("twists", "flips"), [(0, False), (1, True), (2, False), (3, True)])
def test_letters_show_which_edges_are_glued(twists: int, flips: bool):
    """After an odd number of half twists P at the lower left meets P at the upper right."""
    _, figure = drawn_ribbon("square", 3, 8, twists)
    place = letters(figure)
    left, right = place["P"]
    assert left[0] < right[0]
    assert (left[1] * right[1] < 0) == flips
    assert place["Q"][0][1] == -left[1]
    sentence = next(text for text in texts(figure) if "Glue" in text.get_text())
    assert ("not flipped" in sentence.get_text()) != flips


@pytest.mark.parametrize(
    ("lattice", "rows", "length"),
    [
        ("square", 2, 6),
        ("honeycomb-zigzag", 3, 4.5),
        ("honeycomb-armchair", 5, 3),
        ("kagome", 3, 4),
    ],
)
def test_every_bond_is_drawn_once(lattice: str, rows: int, length: float):
    """Lines inside, plus two stubs for each bond that crosses the seam, make all the bonds."""
    ring, figure = drawn_ribbon(lattice, rows, length)
    inner, stubs = (line.get_xydata() for line in figure.axes[0].lines[:2])
    crossing = int(np.count_nonzero(ring.bonds.winding))
    assert len(stubs) == 3 * 2 * crossing
    assert len(inner) == 3 * (ring.bonds.m - crossing)


def test_stubs_point_at_the_mirrored_partner():
    """Glued with a flip, the stub that leaves at y on the right is met at -y on the left."""
    _, figure = drawn_ribbon("square", 4, 5)
    stubs = figure.axes[0].lines[1].get_xydata().reshape(-1, 3, 2)  # type: ignore[union-attr]
    leaving, arriving = stubs[: len(stubs) // 2], stubs[len(stubs) // 2 :]
    assert_allclose(leaving[:, 0, 1], -arriving[:, 0, 1], atol=1e-12)
    assert_allclose(leaving[:, 0, 0] - arriving[:, 0, 0], 4.0, atol=1e-12)


@pytest.mark.parametrize("twists", [0, 1])
def test_both_stubs_of_a_bond_lie_on_one_line(twists: int):
    """The seam map (x + L, +-y) carries the end of one stub onto the line of the other."""
    ring, figure = drawn_ribbon("honeycomb-zigzag", 4, 5, twists)
    stubs = figure.axes[0].lines[1].get_xydata().reshape(-1, 3, 2)  # type: ignore[union-attr]
    leaving, arriving = stubs[: len(stubs) // 2], stubs[len(stubs) // 2 :]
    image = arriving[:, :2] * [1, -1 if twists else 1] + [ring.circumference, 0]
    step = image[:, 0] - leaving[:, 0]
    assert np.abs(step[:, 1]).min() > 0.01
    assert_allclose(leaving[:, 1], leaving[:, 0] + 0.62 * step, atol=1e-12)
    assert_allclose(image[:, 1], leaving[:, 0] + 0.38 * step, atol=1e-12)


def test_a_long_ribbon_is_drawn_whole_and_at_its_ends():
    """2,000 sites: an outline to scale and two enlarged ends, in a file of moderate size."""
    ring, figure = drawn_ribbon("honeycomb-zigzag", 8, 125)
    assert ring.n == 2000
    whole, first, last = figure.axes
    assert whole.get_xlim()[1] - whole.get_xlim()[0] > ring.circumference
    assert first.get_xlim()[1] < last.get_xlim()[0]
    assert "to scale" in whole.get_title(loc="left")
    assert len(to_svg(figure)) < 400_000
    assert len(letters(figure)["P"]) == 2


def test_a_huge_ribbon_says_what_is_left_out():
    """Bonds that would melt into a grey band are not drawn, and the figure says so."""
    _, figure = drawn_ribbon("square", 20, 1000)
    assert "too many to draw" in figure.axes[0].get_title(loc="left")
    assert len(to_svg(figure)) < 400_000
    _, thin = drawn_ribbon("square", 1, 3000)
    assert "width enlarged" in thin.axes[0].get_title(loc="left")


def test_a_stout_ribbon_is_drawn_whole():
    """40 rows by 50 columns: one drawing, with small marks."""
    _, figure = drawn_ribbon("square", 40, 50)
    assert len(figure.axes) == 1


def test_vacancies_are_crossed_out():
    """Removed sites are shown where they stood."""
    ring = close_strip(lay_strip("square", rows=3, length=8), half_twists=1, orbital="s")
    figure = draw_ribbon(case_of(remove_sites(ring, [5, 11])))
    crosses = [line for line in figure.axes[0].lines if line.get_label() == "vacancy"]
    assert_allclose(crosses[0].get_xydata(), ring.positions[[5, 11]])


def test_a_bare_network_has_no_seam():
    """A molecule of one's own: bonds and sites, no letters, no walls in the headline."""
    corners = np.column_stack([np.cos(np.arange(6) * np.pi / 3), np.sin(np.arange(6) * np.pi / 3)])
    benzene = Network.from_pairs([(i, (i + 1) % 6) for i in range(6)], positions=corners)
    figure = draw_ribbon(case_of(benzene))
    assert letters(figure) == {"P": [], "Q": []}
    assert not any("hard walls" in text.get_text() for text in texts(figure))


# --- levels ------------------------------------------------------------------------------------


def ticks_drawn(figure: Figure, column: int) -> np.ndarray:
    """Energies of all ticks of one column."""
    found = []
    for line in figure.axes[0].lines:
        x, y = np.asarray(line.get_xdata()), np.asarray(line.get_ydata())
        if x.size == 2 and np.all(np.abs(x - column) < 0.5):
            found.append(float(y[0]))
    return np.sort(found)


def test_every_level_of_a_small_ring_has_a_tick(annulene: StudyResult):
    """Heilbronner's pairs beside Hückel's: two short ticks for each pair."""
    figure = draw_levels(annulene.cases[:2])
    assert_allclose(ticks_drawn(figure, 0), 2.7 * known.moebius_annulene(16), atol=1e-9)
    assert_allclose(ticks_drawn(figure, 1), 2.7 * known.cycle(16), atol=1e-9)
    assert figure.axes[0].get_ylabel() == "energy (eV)"


def test_large_shells_carry_their_number():
    """An armchair ring of 5 lines has flat levels at t and -t, four and more times."""
    study = make_study("honeycomb-armchair", 5, 6, points=0, controls=())
    figure = draw_levels(study.cases)
    energies = study.ribbon.levels.energies
    flat = int(np.count_nonzero(np.abs(energies - 2.7) < 1e-9))
    assert flat > 4
    assert any(text.get_text() == f"×{flat}" for text in texts(figure))


def test_the_gap_is_named_below_each_column(annulene: StudyResult):
    """4 t sin(pi/16) for the Möbius annulene (table of Heilbronner), none for the planar one."""
    figure = draw_levels(annulene.cases[:2])
    labels = [text.get_text() for text in figure.axes[0].get_xticklabels()]
    assert f"gap {4 * 2.7 * np.sin(np.pi / 16):.4g} eV" in labels[0]
    assert "open shell" in labels[1]


def test_the_window_holds_the_levels_nearest_to_the_gap(zigzag: StudyResult):
    """Ten levels around the gap, all inside, and the next ones outside or degenerate."""
    low, high = level_window(zigzag.ribbon, most=10)
    energies = zigzag.ribbon.levels.energies
    held = energies[(energies > low) & (energies < high)]
    middle = (zigzag.ribbon.gap.lower + zigzag.ribbon.gap.upper) / 2
    nearest = np.sort(np.abs(energies - middle))[:10]
    assert np.all(np.isin(np.round(nearest, 9), np.round(np.abs(held - middle), 9)))
    assert held.size <= 14


# --- flux, currents, shift ---------------------------------------------------------------------


def test_branches_run_through_crossings(annulene: StudyResult):
    """Every branch is one cosine -2t cos(2 pi (n + 1/2 + phi)/16), kinks would be 0.1 eV off."""
    assert annulene.ribbon.response is not None
    _, lines = branch_lines(annulene.ribbon.response)
    assert lines.shape == (16, 25)
    flux = annulene.ribbon.response.flux
    exact = -5.4 * np.cos(2 * np.pi * (np.arange(16)[:, None] + 0.5 + flux) / 16)
    for line in lines:
        assert np.min(np.max(np.abs(exact - line), axis=1)) < 1e-9


def test_flux_panels_share_the_axes_and_the_flux_of_the_ribbon(annulene: StudyResult):
    """The cover, swept to two quanta, is shown against the flux through the ribbon."""
    figure = draw_flux(annulene.cases)
    assert [axes.get_title(loc="left") for axes in figure.axes] == [
        "half-twisted ribbon", "plain ring", "double cover (flux × 2)",
    ]  # fmt: skip
    assert len({axes.get_xlim() for axes in figure.axes}) == 1
    assert len({axes.get_ylim() for axes in figure.axes}) == 1
    for axes in figure.axes:
        assert np.nanmax(np.asarray(axes.lines[0].get_xdata(), dtype=float)) == 1.0
    assert draw_flux(annulene.cases[:1]).get_figwidth() == pytest.approx(HALF / 25.4)


def test_lines_end_where_a_branch_leaves_the_window(annulene: StudyResult):
    """A level that is not in the window at some flux leaves a hole in its branch."""
    response = annulene.ribbon.response
    assert response is not None
    energy = response.energy.copy()
    energy[7, 3] = np.nan
    names, lines = branch_lines(replace(response, energy=energy))
    hole = lines[list(names).index(response.branch[7, 3])]
    assert np.flatnonzero(np.isnan(hole)).tolist() == [7]


def test_nothing_swept_is_refused(annulene: StudyResult):
    """Without a response there is no flux figure and no current figure."""
    bare = [case for case in annulene.cases if case.response is None]
    assert bare
    with pytest.raises(ValueError, match="no case was swept"):
        draw_flux(bare)
    with pytest.raises(ValueError, match="no case has a total current"):
        draw_currents(bare)


def test_the_current_jumps_where_a_shell_is_shared(annulene: StudyResult):
    """At half a quantum the line ends on one side and starts again on the other."""
    response = annulene.ribbon.response
    assert response is not None
    assert response.totals is not None
    flux, current = broken_current(response.totals, -1.0)
    assert flux.size == 25 + 2
    jump = int(np.flatnonzero(np.isnan(current))[0])
    assert flux[jump] == 0.5
    assert current[jump - 1] < 0 < current[jump + 1]
    assert_allclose(current[jump - 1], -current[jump + 1], rtol=1e-9)


def test_currents_have_a_handy_unit(annulene: StudyResult):
    """Currents of annulenes are some 100 µA; in units of t there is no prefix."""
    figure = draw_currents(annulene.cases)
    assert figure.axes[0].get_ylabel() == "current (µA)"
    plain = make_study(unit="t", amplitude=1.0, controls=(), points=9)
    assert draw_currents(plain.cases).axes[0].get_ylabel() == "current (t per flux quantum)"


def test_harmonics_of_both_rings_agree_where_they_are_even(annulene: StudyResult):
    """Half a quantum apart: even harmonics alike, odd ones opposite (stems in the figure)."""
    figure = draw_currents(annulene.cases[:2])
    stems = [line for line in figure.axes[1].lines if len(np.asarray(line.get_xdata())) >= 4]
    twisted, planar = (np.asarray(line.get_ydata(), dtype=float) for line in stems)
    assert_allclose(twisted[1::2], planar[1::2], rtol=0, atol=1e-6 * np.abs(planar).max())
    assert_allclose(twisted[::2], -planar[::2], rtol=0, atol=1e-6 * np.abs(planar).max())
    assert_allclose(twisted, harmonics_table(annulene.ribbon, "eV").columns["sine"], rtol=1e-12)


def test_shift_shows_the_numbers_of_its_table(annulene: StudyResult):
    """Marks stand at the shifts, filled ones left of the gap."""
    figure = draw_shift(annulene.ribbon, annulene.cases[1])
    table = shift_table(annulene.ribbon, annulene.cases[1])
    marks = {line.get_label(): line.get_xydata() for line in figure.axes[1].lines}
    drawn = np.concatenate([marks["filled"], marks["empty"]])
    assert_allclose(drawn[:, 0], table.columns["from_gap"])
    assert_allclose(drawn[:, 1], table.columns["shift"])


def test_every_figure_has_its_numbers(annulene: StudyResult):
    """One table a figure, and one for the harmonics; lines as drawn."""
    data = figure_data(annulene)
    assert set(draw_all(annulene)) | {"harmonics"} == set(data)
    assert data["ribbon"].rows == 16
    assert set(data["levels"].columns["case"]) == {"ribbon", "plain", "double", "open"}
    assert data["flux"].rows == (16 + 16 + 32) * 25
    assert data["currents"].columns["case"].count("double") == 25  # type: ignore[union-attr]
    half = np.asarray(data["flux"].columns["ribbon_flux"])
    assert half.max() == 1.0


def test_a_study_without_sweep_or_controls_has_three_figures():
    """The ribbon, flat and in space, and its levels; nothing is drawn that was not computed."""
    study = make_study(points=0, controls=())
    assert set(draw_all(study)) == {"ribbon", "space", "levels"}
    assert set(figure_data(study)) == {"ribbon", "space", "levels"}


def test_a_sweep_of_many_levels_becomes_a_picture():
    """Beyond 30,000 points the lines are a bitmap inside the SVG, which stays small."""
    study = make_study("square", 10, 40, points=101, controls=(), unit="t", amplitude=1.0)
    svg = to_svg(draw_flux(study.cases, most=400))
    assert "<image" in svg
    assert len(svg) < 1_500_000
    assert "<image" not in to_svg(draw_flux(study.cases))


def test_a_window_without_levels_is_drawn_empty(annulene: StudyResult):
    """`levels.between` above the spectrum: every figure still stands, with its empty table."""
    empty = slice(0, 0)
    cases = []
    for case in annulene.cases:
        levels = levels_between(case.hamiltonian, 20.0, 21.0, flux=case.flux)
        response = case.response
        if response is not None:
            cut = {k: getattr(response, k)[:, empty] for k in ("level", "energy", "slope")}
            response = replace(response, branch=response.branch[:, empty], **cut)
        cases.append(replace(case, levels=levels, response=response))
    study = replace(annulene, cases=tuple(cases))
    assert all("<svg" in to_svg(figure) for figure in draw_all(study).values())
    assert [figure_data(study)[name].rows for name in ("levels", "flux", "shift")] == [0, 0, 0]


def test_a_window_away_from_the_gap_is_paired_where_both_have_levels(annulene: StudyResult):
    """Between -6 and -4 eV there are four twisted levels and three planar ones."""
    cases = [
        replace(case, levels=levels_between(case.hamiltonian, -6.0, -4.0, flux=case.flux))
        for case in annulene.cases[:2]
    ]
    assert [case.levels.m for case in cases] == [4, 3]
    table = shift_table(cases[0], cases[1])
    assert np.asarray(table.columns["from_gap"]).tolist() == [-8, -7, -6]
    assert "<svg" in to_svg(draw_shift(cases[0], cases[1]))


def test_a_single_flux_is_drawn_as_points():
    """One flux has no line to follow and no harmonics."""
    study = make_study(points=3)
    cases = []
    for case in study.cases[:2]:
        response = case.response
        assert response is not None
        assert response.totals is not None
        names = [field.name for field in fields(response.totals)]
        totals = replace(response.totals, **{k: getattr(response.totals, k)[:1] for k in names})
        rows = {k: getattr(response, k)[:1] for k in ("flux", "level", "energy", "slope", "branch")}
        response = replace(response, totals=totals, **rows)
        cases.append(replace(case, response=response, harmonics=None))
    assert "<svg" in to_svg(draw_flux(cases))
    figure = draw_currents(cases)
    assert len(figure.axes) == 1
    assert any(line.get_marker() == "o" for line in figure.axes[0].lines)


def test_nothing_moved_is_shown_on_the_scale_of_the_hopping(annulene: StudyResult):
    """Rounding must not look like a shift."""
    twin = replace(annulene.ribbon, name="plain", label="twin")
    figure = draw_shift(annulene.ribbon, twin)
    low, high = figure.axes[1].get_ylim()
    assert high - low > 0.1


def test_a_shell_shared_all_along_is_a_band(annulene: StudyResult):
    """Thirteen and more shared points: a band between the sides, one unbroken line."""
    case = annulene.ribbon
    assert case.response is not None
    assert case.response.totals is not None
    totals = case.response.totals
    always = replace(totals, shared=np.ones(25, dtype=bool), left=totals.slope - 1.0)
    figure = draw_currents([replace(case, response=replace(case.response, totals=always))])
    axes = figure.axes[0]
    assert len(axes.collections) == 1
    assert np.asarray(axes.lines[0].get_ydata()).size == 25


def test_small_energies_get_a_prefix_on_the_axis():
    """Gaps of some meV are not written as 0.002 eV; other units get a power of ten."""
    study = make_study(amplitude=0.0027, points=0, controls=())
    assert draw_levels(study.cases).axes[0].get_ylabel() == "energy (meV)"
    study = make_study(amplitude=2e-5, unit="GHz", points=0, controls=())
    figure = draw_levels(study.cases)
    assert figure.axes[0].get_ylabel() == "energy (10⁻⁵ GHz)"
    to_svg(figure)
    labels = [text.get_text().replace("−", "-") for text in figure.axes[0].get_yticklabels()]
    places = figure.axes[0].get_yticks()
    assert_allclose([float(label) for label in labels], 1e5 * places, atol=1e-9)


def test_a_hamiltonian_of_one_site_can_be_drawn():
    """The smallest network: one level, no bonds."""
    dot = Network.from_pairs([], positions=[[0.0, 0.0]])
    case = replace(
        case_of(dot),
        hamiltonian=assemble(dot, Hopping()),
    )
    assert to_svg(draw_ribbon(case)).startswith("<?xml")
