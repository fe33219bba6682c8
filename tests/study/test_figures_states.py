"""Figures of the ribbon in space, of edge states, densities and the continuum: what they show."""

from __future__ import annotations

import re
from dataclasses import replace
from functools import cache
from typing import Any

import numpy as np
import pytest
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.collections import PathCollection
from matplotlib.colors import to_hex
from matplotlib.figure import Figure
from matplotlib.text import Text
from numpy.testing import assert_allclose, assert_array_equal
from small_study import make_case, make_study

from ribbon.analysis import (
    compare_continuum,
    density_of_states,
    edge_states,
    levels_between,
    levels_density,
    levels_near,
)
from ribbon.hopping import Hopping, assemble
from ribbon.lattice import (
    close_strip,
    lay_strip,
    open_strip,
    remove_sites,
    walk_edges,
)
from ribbon.study.figures import (
    draw_all,
    draw_continuum,
    draw_density,
    draw_edge_state,
    draw_edges,
    draw_space,
    figure_data,
    space_points,
    to_svg,
)
from ribbon.study.figures.band import EDGE_COLOURS, band_of, face_seen, project
from ribbon.study.figures.look import DARK, FACES, FULL, HALF, look_of, styled
from ribbon.study.figures.unrolled import edge_wave
from ribbon.study.result import Case, StudyResult

NAMES = ("space", "edge-state", "edges", "density", "continuum")


def described(case: Case, *, broadening: float = 0.2, states: bool = True) -> Case:
    """A case with everything that the figures of states can show."""
    hamiltonian = case.hamiltonian
    levels = levels_near(hamiltonian, 0.0, count=10_000, flux=case.flux, states=states)
    case = replace(case, levels=levels, edges=edge_states(hamiltonian, levels))
    density = density_of_states(hamiltonian, broadening=broadening, flux=case.flux)
    case = replace(case, density=density)
    if hamiltonian.ring is None or np.ptp(hamiltonian.site_energies) or case.network.n % 2:
        return case
    return replace(case, continuum=compare_continuum(hamiltonian, levels=levels))


@cache
def study(lattice: str, rows: int, length: float, **more: Any) -> StudyResult:
    """A small study, everything described."""
    made = make_study(lattice, rows, length, points=0, unit="t", amplitude=1.0, **more)
    return replace(made, cases=tuple(described(case) for case in made.cases))


def zigzag() -> StudyResult:
    return study("honeycomb-zigzag", 8, 12, controls=("plain", "double"))


def square() -> StudyResult:
    return study("square", 7, 24, orbital="s", controls=("plain", "open"))


def bare_case(network: Any, **more: Any) -> Case:
    """A case of any network, with its edge states and density."""
    case = make_case("ribbon", "a ribbon", network, Hopping(**more), electrons=4.0, points=0)
    found = edge_states(case.hamiltonian, with_states(case))
    density = density_of_states(case.hamiltonian, broadening=0.2)
    return replace(case, levels=with_states(case), edges=found, density=density)


def with_states(case: Case) -> Any:
    return levels_near(case.hamiltonian, 0.0, count=10_000, states=True)


def texts(figure: Figure) -> list[str]:
    return [text.get_text() for text in figure.findobj(Text) if text.get_text()]


def ring_of(lattice: str, rows: int, length: float, twists: int) -> Any:
    strip = lay_strip(lattice, rows=rows, length=length)
    return close_strip(strip, half_twists=twists, orbital="s")


# --- in space ----------------------------------------------------------------------------------


@pytest.mark.parametrize("twists", [0, 1, 2, 3])
def test_the_band_closes_with_its_flip(twists: int):
    """Once round, (x, y) comes back as (x + L, y), with y turned after odd half twists."""
    ring = ring_of("square", 4, 10, twists)
    x, y = np.linspace(0, 10, 7), np.linspace(-1.5, 1.5, 7)
    turned = -y if twists % 2 else y
    around = space_points(ring, x + ring.circumference, turned)
    assert_allclose(around, space_points(ring, x, y), atol=1e-12)


def test_the_midline_is_a_circle_and_the_width_is_kept():
    """Distance R of the midline from the axis, and y of every place from the midline."""
    ring = ring_of("square", 4, 10, 1)
    x, y = np.linspace(0, 10, 9), np.full(9, 0.7)
    middle = space_points(ring, x, 0 * y)
    assert_allclose(np.linalg.norm(middle, axis=1), ring.circumference / (2 * np.pi))
    assert_allclose(np.linalg.norm(space_points(ring, x, y) - middle, axis=1), 0.7)


def test_the_turn_is_left_handed():
    """Seen along the way round, the frame turns anticlockwise: the normal part of dy/dx."""
    ring = ring_of("square", 4, 40, 1)
    step = np.array([0.0, 0.01])
    edge = space_points(ring, step, np.ones(2)) - space_points(ring, step, np.zeros(2))
    along = space_points(ring, step, np.zeros(2))
    turn = np.cross(edge[0], edge[1] - edge[0]) @ (along[1] - along[0])
    assert turn < 0


def test_a_plain_ring_stands_as_a_cylinder():
    """Every site at the same distance from the axis, y its height."""
    ring = ring_of("square", 4, 10, 0)
    places = space_points(ring, *ring.positions.T)
    assert_allclose(np.hypot(*places[:, :2].T), ring.circumference / (2 * np.pi))
    assert_allclose(places[:, 2], ring.positions[:, 1])


def test_the_projection_is_straight_and_not_mirrored():
    """Lengths across the line of sight are kept; right, up and toward are right-handed."""
    axes = np.eye(3)
    seen, depth = project(axes)
    frame = np.column_stack([seen, depth])
    assert_allclose(frame @ frame.T, np.eye(3), atol=1e-12)
    assert np.linalg.det(frame) == pytest.approx(1.0)


@pytest.mark.parametrize(("twists", "meets"), [(0, False), (1, True), (2, False), (3, True)])
def test_tints_meet_at_the_seam_of_a_one_sided_band(twists: int, meets: bool):
    """The same place seen from either end of the strip shows the other face, or the same."""
    band = band_of(ring_of("square", 4, 20, twists))
    y = np.linspace(-1, 1, 5)
    here = face_seen(band, np.full(5, band.seam), y)
    there = face_seen(
        band, np.full(5, band.seam + band.ring.circumference), -y if twists % 2 else y
    )
    assert_allclose(there, -here if meets else here, atol=1e-6)


def test_the_face_seen_is_that_of_the_drawing():
    """Facets turn round on the page where one looks at the lower side: signed areas agree."""
    band = band_of(ring_of("square", 4, 20, 1))
    x = np.linspace(0, 20, 57)
    step = 1e-5
    corners = [(x, 0 * x), (x + step, 0 * x), (x, 0 * x + step)]
    origin, right, up = (project(band.points(*corner))[0] for corner in corners)
    one, two = right - origin, up - origin
    area = one[:, 0] * two[:, 1] - one[:, 1] * two[:, 0]
    facing = face_seen(band, x, 0 * x)
    assert (facing > 0).any()
    assert (facing < 0).any()
    assert_array_equal(np.sign(area), np.sign(facing))


def painting(figure: Figure) -> PathCollection:
    return next(c for c in figure.axes[0].collections if isinstance(c, PathCollection))


def drawn_length(figure: Figure, colour: str) -> int:
    """Pieces of line in one colour."""
    collection = painting(figure)
    return sum(
        len(path.vertices) // 2
        for path, rgba in zip(collection.get_paths(), collection.get_edgecolors(), strict=True)
        if to_hex(rgba) == colour
    )


def test_both_faces_are_painted():
    """Tints of the upper and of the lower side are both in the drawing of a twisted band."""
    svg = to_svg(draw_space(square().ribbon))
    for tints in FACES:
        assert sum(tint in svg for tint in tints) >= 2


@pytest.mark.parametrize(("twists", "names"), [(0, ["L", "L"]), (1, ["2L"]), (3, ["2L"])])
def test_the_key_names_every_edge_with_its_length(twists: int, names: list[str]):
    """One edge of length 2L, or two of length L, as the loops are walked."""
    ring = ring_of("square", 4, 20, twists)
    said = texts(draw_space(bare_case(ring)))
    found = [text for text in said if text.startswith("edge of length")]
    length = sum(loop.length for loop in walk_edges(ring))
    assert [text.split()[3] for text in found] == names
    assert sum(float(text.split()[5]) for text in found) == pytest.approx(length)


def test_one_edge_is_drawn_as_long_as_two():
    """Pieces of the edge line: 2L round a one-sided band, L for the first of two edges."""
    one = draw_space(bare_case(ring_of("square", 4, 20, 1)))
    two = draw_space(bare_case(ring_of("square", 4, 20, 0)))
    assert drawn_length(one, EDGE_COLOURS[0]) == 2 * drawn_length(two, EDGE_COLOURS[0])
    assert drawn_length(one, EDGE_COLOURS[1]) == 0
    assert drawn_length(two, EDGE_COLOURS[1]) > 0


@pytest.mark.parametrize(
    ("rows", "length", "says"), [(20, 20, "width drawn at 0.2"), (2, 400, "width drawn at 11")]
)
def test_a_changed_width_is_owned_up_to(rows: int, length: int, says: str):
    """Wider than 0.6 R and the band would cover itself; slender, and nothing would be seen."""
    ring = ring_of("square", rows, length, 1)
    band = band_of(ring)
    assert band.half <= 0.6 * band.radius * (1 + 1e-9)
    assert band.half / band.enlarged == pytest.approx((rows - 1) / 2)
    assert any(says in text.lower().replace("\n", " ") for text in texts(draw_space(case_on(ring))))


def case_on(network: Any) -> Case:
    """A case whose levels do not matter."""
    case = make_study(points=0, controls=()).ribbon
    return replace(case, network=network, hamiltonian=assemble(network, Hopping()))


def test_too_many_bonds_are_left_out_and_said():
    """Band and edges of 20,100 bonds and more stand alone."""
    figure = draw_space(case_on(ring_of("square", 30, 400, 1)))
    assert any("too many to draw" in text.replace("\n", " ") for text in texts(figure))
    assert len(to_svg(figure)) < 1_000_000


def test_a_strip_has_no_band_in_space():
    """`ValueError`: only rings are bent round a circle."""
    with pytest.raises(ValueError, match="not closed into a ring"):
        draw_space(case_on(open_strip(lay_strip("square", rows=3, length=8))))


def test_positions_in_space_are_in_the_data():
    """As drawn: the sites of the table are `space_points` where the width is not changed."""
    ring = ring_of("square", 4, 40, 1)
    case = case_on(ring)
    band = band_of(ring)
    assert band.enlarged == 1.0
    made = replace(make_study(points=0, controls=()), cases=(case,))
    table = figure_data(made)["space"]
    drawn = np.column_stack([table.columns[name] for name in "xyz"])
    assert_allclose(drawn, space_points(ring, *ring.positions.T))


# --- edge states -------------------------------------------------------------------------------


def test_the_edge_state_is_shown_along_the_whole_edge():
    """Twice L on a one-sided ribbon, once for each edge of a plain one, the seam in between."""
    ribbon, plain = zigzag().cases[:2]
    length = ribbon.hamiltonian.ring.circumference  # type: ignore[union-attr]
    along = draw_edge_state(ribbon).axes[-2:]
    assert all(axes.get_xlim() == pytest.approx((0, 2 * length)) for axes in along)
    both = draw_edge_state(plain).axes[-4:]
    assert all(axes.get_xlim() == pytest.approx((0, length)) for axes in both)
    marks = [line for line in along[0].lines if len(np.asarray(line.get_xdata())) == 2]
    crossings = {float(np.asarray(line.get_xdata())[0]) for line in marks}
    assert any(0 < place < 2 * length for place in crossings)


def test_the_wave_holds_the_probability_of_its_sites():
    """Squares of the amplitudes are the density where the level stands alone in its shell."""
    case = zigzag().ribbon
    wave = edge_wave(case)
    assert_allclose(
        np.abs(wave.amplitude[0]) ** 2, wave.density[wave.loops[0].sites], rtol=0, atol=1e-9
    )
    assert wave.density.sum() == pytest.approx(1.0)
    assert wave.density[np.unique(wave.loops[0].sites)].sum() > 0.5


def test_a_standing_wave_is_made_real():
    """Any phase of the state is taken out, and the largest amplitude is positive."""
    case = bare_case(remove_sites(ring_of("honeycomb-zigzag", 4, 8, 1), [3, 17]))
    states = case.levels.states
    assert states is not None
    turned = replace(case, levels=replace(case.levels, states=states * np.exp(0.83j)))
    one, two = edge_wave(case), edge_wave(turned)
    assert not two.complex
    assert_allclose(two.amplitude[0], one.amplitude[0], rtol=0, atol=1e-9)
    assert one.amplitude[0].real.max() > 0


def test_a_running_wave_says_so():
    """A state with momentum cannot be made real; its partner of the same energy is named."""
    case = zigzag().ribbon
    position = int(np.flatnonzero(np.abs(case.levels.momentum) % 12 > 0.6)[0])  # type: ignore[arg-type]
    assert edge_wave(case, position).complex
    said = texts(draw_edge_state(case, position=position))
    assert any("runs one way" in text for text in said)
    assert any(text.startswith("real part") for text in said)


def test_the_content_peaks_at_the_edge_momentum():
    """The stems stand where `edge_states` found the strongest wave number, and sum to one."""
    case = zigzag().ribbon
    assert case.edges is not None
    wave = edge_wave(case)
    best = wave.numbers[0][np.argmax(wave.content[0])]
    assert abs(best) == pytest.approx(abs(case.edges.edge_momentum[wave.position]))
    assert wave.content[0].sum() == pytest.approx(1.0)
    assert_allclose(np.diff(wave.numbers[0]), 0.5)


def test_tables_hold_what_is_drawn_along_the_edge():
    """Real and imaginary part, density and content, row for row."""
    data = figure_data(zigzag())
    wave = edge_wave(zigzag().ribbon)
    table = data["edge-state"]
    assert_allclose(table.columns["real"], wave.amplitude[0].real)
    assert_allclose(table.columns["imaginary"], wave.amplitude[0].imag)
    assert_allclose(table.columns["density"], wave.density[wave.loops[0].sites])
    assert_allclose(table.columns["place"], wave.place[0])
    assert_allclose(data["edge-content"].columns["share"], wave.content[0])


def test_rounding_is_not_written_as_an_energy():
    """An edge state at the Dirac point stands at 0, not at some 1e-44."""
    case = zigzag().ribbon
    assert case.edges is not None
    tiny = replace(case.edges, energy=np.full(case.edges.level.size, 1e-30))
    title = draw_edge_state(replace(case, edges=tiny))._suptitle  # type: ignore[attr-defined]
    assert "at 0 t" in title.get_text()


def test_no_edge_states_are_refused():
    """Without states, or in a window without levels, there is nothing to draw."""
    case = make_study(points=0, controls=()).ribbon
    with pytest.raises(ValueError, match="no edge states"):
        draw_edge_state(case)
    with pytest.raises(ValueError, match="nothing to draw"):
        draw_edges([case])


def test_long_and_slender_ribbons_are_shown_in_part():
    """Two rows of 400: the stretch that is shown is named."""
    ring = ring_of("square", 2, 400, 1)
    case = make_case("ribbon", "a ribbon", ring, Hopping(), electrons=4.0, points=0)
    levels = levels_near(case.hamiltonian, 0.0, count=6, states=True)
    case = replace(case, levels=levels, edges=edge_states(case.hamiltonian, levels))
    assert any("are shown" in text for text in texts(draw_edge_state(case)))


# --- edges against momentum --------------------------------------------------------------------


def marks(axes: Any) -> tuple[np.ndarray, np.ndarray]:
    """Places and areas of the marks of one panel."""
    groups = [c for c in axes.collections if isinstance(c, PathCollection)]
    places = np.concatenate([np.asarray(group.get_offsets()) for group in groups])
    return places, np.concatenate([group.get_sizes() for group in groups])


def test_marks_stand_at_the_edge_momenta_and_their_area_is_the_weight():
    """Every level once, at the size of its wave number; areas rise linearly with the weight."""
    case = zigzag().ribbon
    assert case.edges is not None
    places, areas = marks(draw_edges(zigzag().cases).axes[0])
    order = np.lexsort((places[:, 0], places[:, 1]))
    x, y = np.abs(case.edges.edge_momentum), case.edges.energy
    own = np.lexsort((x, y))
    assert_allclose(places[order], np.column_stack([x, y])[own])
    assert_allclose(np.sort(areas), np.sort(1.5 + 32 * case.edges.edge_weight), rtol=1e-9)


def test_wave_numbers_lie_half_as_far_apart_on_one_edge():
    """Panels share the axis of the ribbon: steps of 1/2 on it and on its cover, of 1 beside."""
    figure = draw_edges(zigzag().cases)
    steps = []
    for axes in figure.axes:
        x = np.unique(np.round(marks(axes)[0][:, 0], 6))
        steps.append(np.diff(x).min())
    assert_allclose(steps, [0.5, 1.0, 0.5])
    assert len({axes.get_xlim() for axes in figure.axes}) == 1
    assert all("2π/L" in texts_of(axes) for axes in figure.axes)


def texts_of(axes: Any) -> list[str]:
    return [text.get_text() for text in axes.texts]


def test_a_strip_stands_against_the_edge_weight():
    """No way round, no wave number: the part at the edge is shown instead."""
    figure = draw_edges(square().cases)
    open_axes = figure.axes[-1]
    assert open_axes.get_xlabel() == "part at the edge"
    case = square().cases[-1]
    assert case.edges is not None
    assert_allclose(np.sort(marks(open_axes)[0][:, 0]), np.sort(case.edges.edge_weight))


def test_a_flux_keeps_both_directions_apart():
    """At 0.2 quanta k and -k differ in energy: signed wave numbers are shown."""
    ribbon = replace(square().ribbon, flux=0.2)
    figure = draw_edges([described(ribbon)])
    assert figure.axes[0].get_xlabel().startswith("edge wave number")
    assert marks(figure.axes[0])[0][:, 0].min() < -1


# --- density -----------------------------------------------------------------------------------


def line_of(axes: Any, case: Case) -> np.ndarray:
    """Points of the line of a case, known by its colour and dash."""
    wanted = look_of(case.name).colour
    return np.asarray(
        next(line.get_xydata() for line in axes.lines if line.get_color() == wanted), dtype=float
    )


def test_density_is_per_site_and_integrates_to_one():
    """Rings of different size compare: each line holds one level a site."""
    figure = draw_density(zigzag().cases)
    for case in zigzag().cases:
        line = line_of(figure.axes[0], case)
        assert np.trapezoid(line[:, 1], line[:, 0]) == pytest.approx(1.0, abs=1e-6)
        assert line_of(figure.axes[1], case)[-1, 1] == pytest.approx(1.0, abs=1e-6)
    shade = figure.axes[0].patches[0].get_data()
    assert np.sum(shade.values * np.diff(shade.edges)) == pytest.approx(1.0)


def test_the_difference_is_that_of_the_levels_below():
    """Ribbon minus plain ring on the same energies; zero at both ends."""
    figure = draw_density(zigzag().cases)
    ribbon, plain = zigzag().cases[:2]
    moved = line_of(figure.axes[2], ribbon)
    one, two = line_of(figure.axes[1], ribbon), line_of(figure.axes[1], plain)
    assert_allclose(moved[:, 1], one[:, 1] - np.interp(one[:, 0], *two.T), atol=1e-12)
    assert_allclose(moved[[0, -1], 1], 0, atol=1e-6)


def test_density_data_are_the_lines():
    """CSV rows of every case, as drawn."""
    table = figure_data(zigzag())["density"]
    figure = draw_density(zigzag().cases)
    for case in zigzag().cases:
        rows = np.array(table.columns["case"]) == case.name
        line = line_of(figure.axes[0], case)
        assert_allclose(np.asarray(table.columns["density_per_site"])[rows], line[:, 1])


def test_a_window_of_levels_is_drawn_inside_it_only():
    """Lines end with the window, and the figure says that levels beyond it are missed."""
    case = square().ribbon
    levels = levels_between(case.hamiltonian, -1.0, 1.0)
    density = levels_density(levels, broadening=0.1, sites=case.network.n)
    part = replace(case, levels=levels, density=density)
    figure = draw_density([part])
    line = line_of(figure.axes[0], part)
    assert line[:, 0].min() >= levels.energies[0]
    assert line[:, 0].max() <= levels.energies[-1]
    assert any("levels beyond it are missed" in text for text in texts(figure))
    assert len(figure.axes) == 2


def test_a_spectrum_too_wide_to_read_is_shown_around_its_levels():
    """Eight thousand broadenings wide: the part around the levels found, and the whole named."""
    case = square().ribbon
    fine = density_of_states(case.hamiltonian, broadening=0.001)
    levels = levels_near(case.hamiltonian, -3.5, count=4)
    figure = draw_density([replace(case, density=fine, levels=levels)])
    low, high = figure.axes[0].get_xlim()
    assert low < levels.energies[0]
    assert levels.energies[-1] < high
    assert high - low < 1
    assert any("the whole runs from" in text for text in texts(figure))


def test_no_density_is_refused():
    """Nothing to draw is said so."""
    with pytest.raises(ValueError, match="nothing to draw"):
        draw_density([make_study(points=0, controls=()).ribbon])


# --- continuum ---------------------------------------------------------------------------------


def test_errors_are_drawn_against_the_spacing_of_every_mesh():
    """Lines carry the numbers of the comparison: distinct levels, nearest to the bottom first."""
    case = square().ribbon
    found = case.continuum
    assert found is not None
    table = figure_data(square())["continuum"]
    levels = np.unique(table.columns["level"])
    assert 0 < levels.size <= 8
    lines = [line for line in draw_continuum(case).axes[1].lines if line.get_marker() != "None"]
    assert len(lines) == levels.size
    place = {int(level): number for number, level in enumerate(found.level)}
    for line, level in zip(lines, np.asarray(table.columns["level"])[: levels.size], strict=True):
        assert_allclose(np.asarray(line.get_xdata()), found.spacings)
        assert_allclose(np.asarray(line.get_ydata()), np.abs(found.errors[:, place[int(level)]]))


def test_guides_have_the_slopes_they_name():
    """The fan in the corner rises with the first and the second power of the spacing."""
    axes = draw_continuum(square().ribbon).axes[1]
    guides = [line for line in axes.lines if len(np.asarray(line.get_xdata())) == 2][-2:]
    logs = [np.log(np.asarray(line.get_xydata(), dtype=float)) for line in guides]
    slopes = [np.diff(log[:, 1])[0] / np.diff(log[:, 0])[0] for log in logs]
    assert_allclose(slopes, [1, 2])


def test_the_spacing_of_the_file_and_one_percent_are_marked():
    """An upright line at the ribbon's own mesh, a level one at 0.01."""
    case = square().ribbon
    assert case.continuum is not None
    axes = draw_continuum(case).axes[1]
    ends = [np.asarray(line.get_xydata(), dtype=float) for line in axes.lines]
    assert any(np.all(end[:, 1] == 0.01) for end in ends)
    assert any(np.all(end[:, 0] == case.continuum.spacings[0]) for end in ends)
    assert "1 %" in [label.get_text() for label in axes.get_yticklabels()]


def test_levels_beyond_the_formula_are_shown_with_a_remark():
    """An annulene has no level with |k|a up to 0.5: the nearest are drawn, and it is said."""
    case = described(make_study(points=0, controls=()).ribbon)
    assert case.continuum is not None
    none = replace(case.continuum, phase=case.continuum.phase + 1)
    assert not none.holds.any()
    said = " ".join(texts(draw_continuum(replace(case, continuum=none))))
    assert "no level found has |k|a up to 0.5" in said.replace("\n", " ")


def test_errors_that_are_rounding_are_not_drawn():
    """All NaN or exact: the panel says so instead of showing noise."""
    case = square().ribbon
    assert case.continuum is not None
    flat = np.tile(case.continuum.continuum, (4, 1))
    exact = replace(case.continuum, meshes=flat)
    figure = draw_continuum(replace(case, continuum=exact))
    assert any("no level has an error" in text for text in texts(figure))
    nothing = replace(case.continuum, continuum=np.full_like(flat[0], case.continuum.zero))
    assert "<svg" in to_svg(draw_continuum(replace(case, continuum=nothing)))


def test_one_mesh_has_neither_extrapolation_nor_slope():
    """refinements = 0: two columns, single marks."""
    case = square().ribbon
    bare = compare_continuum(case.hamiltonian, levels=case.levels, refinements=0)
    figure = draw_continuum(replace(case, continuum=bare))
    labels = [label.get_text() for label in figure.axes[0].get_xticklabels()]
    assert labels == ["lattice", "continuum"]
    to_svg(figure)


# --- the look ----------------------------------------------------------------------------------


def test_figures_stand_in_order_with_their_numbers():
    """Space after the flat ribbon, the states after the shift; every figure has its table."""
    drawn = draw_all(square())
    assert list(drawn) == ["ribbon", "space", "levels", "shift", *NAMES[1:]]
    assert set(drawn) | {"edge-content", "histogram"} == set(figure_data(square()))


def test_svg_never_varies_and_turns_dark():
    """Byte for byte the same, and each colour has its counterpart on a dark page."""
    for name in NAMES:
        first = to_svg(drawn_again(name))
        assert first == to_svg(drawn_again(name))
        colours = set(re.findall(r"#[0-9a-f]{6}\b", first))
        assert colours <= set(DARK), name
        assert "<text" in first


def drawn_again(name: str) -> Figure:
    draw = {
        "space": lambda: draw_space(zigzag().ribbon),
        "edge-state": lambda: draw_edge_state(zigzag().ribbon),
        "edges": lambda: draw_edges(zigzag().cases),
        "density": lambda: draw_density(zigzag().cases),
        "continuum": lambda: draw_continuum(zigzag().ribbon),
    }
    return draw[name]()


@pytest.mark.parametrize("which", [zigzag, square])
def test_texts_are_readable_and_stand_clear(which: Any):
    """At least 7 pt, on the sheet, and no label of an axis over another one."""
    for name, figure in draw_all(which()).items():
        if name not in NAMES:
            continue
        assert round(figure.get_figwidth() * 25.4, 6) in {HALF, FULL}
        canvas = FigureCanvasAgg(figure)
        with styled():
            canvas.draw()
        renderer = canvas.get_renderer()
        sheet = figure.bbox.padded(0.5)
        assert all(text.get_fontsize() >= 7 for text in figure.findobj(Text) if text.get_text())
        for axes in figure.axes:
            if not axes.axison:
                continue
            for axis in (axes.xaxis, axes.yaxis):
                low, high = sorted(axis.get_view_interval())
                boxes = [
                    tick.label1.get_window_extent(renderer)
                    for tick in axis.get_major_ticks()
                    if low <= tick.get_loc() <= high
                    and tick.label1.get_visible()
                    and tick.label1.get_text()
                ]
                for number, box in enumerate(boxes):
                    assert sheet.x0 <= box.x0 and box.x1 <= sheet.x1, name
                    assert not any(box.overlaps(other) for other in boxes[:number]), name
                    label = axis.label.get_window_extent(renderer)
                    assert not axis.label.get_text() or not box.overlaps(label), name


def hard_cases() -> dict[str, Case]:
    """Networks at the rim of what a file can ask for."""
    kagome = ring_of("kagome", 3, 5, 0)
    holed = remove_sites(ring_of("honeycomb-zigzag", 4, 9, 1), [5, 6, 20, 41])
    dirty = Hopping(shells=(1.0,), disorder=0.7, seed=4)
    return {
        "annulene": bare_case(ring_of("square", 1, 9, 1)),
        "two rows": bare_case(ring_of("square", 2, 7, 1)),
        "three half twists": bare_case(ring_of("square", 3, 9, 3)),
        "kagome": bare_case(kagome),
        "vacancies": bare_case(holed),
        "disorder": replace(
            bare_case(ring_of("square", 3, 9, 1)),
            hamiltonian=assemble(ring_of("square", 3, 9, 1), dirty),
        ),
        "open strip": bare_case(open_strip(lay_strip("square", rows=3, length=8))),
        "shortest": bare_case(ring_of("honeycomb-zigzag", 2, 1, 1)),
    }


def test_hard_cases_are_drawn_all_the_same():
    """One row, two rows, kagome, holes, disorder, a strip: every figure stands."""
    base = make_study(points=0, controls=())
    for name, case in hard_cases().items():
        drawn = draw_all(replace(base, cases=(case,)))
        assert ("space" in drawn) == (case.hamiltonian.ring is not None), name
        assert {"edge-state", "edges", "density"} <= set(drawn), name
        for wanted in {"space", "edge-state", "edges"} & set(drawn):
            assert to_svg(drawn[wanted]).startswith("<?xml"), name
        assert set(drawn) <= set(figure_data(replace(base, cases=(case,))))


def test_windows_of_few_or_no_levels():
    """One level is drawn; none, and the figures of states are left out."""
    base = make_study("square", 3, 8, points=0, controls=(), orbital="s")
    hamiltonian = base.ribbon.hamiltonian
    for low, high, some in ((-4.0, -3.0, True), (20.0, 21.0, False)):
        levels = levels_between(hamiltonian, 2.7 * low, 2.7 * high, states=True)
        found = edge_states(hamiltonian, levels)
        near = compare_continuum(hamiltonian, levels=levels)
        case = replace(base.ribbon, levels=levels, edges=found, continuum=near)
        drawn = draw_all(replace(base, cases=(case,)))
        assert ("edge-state" in drawn) == some
        assert ("continuum" in drawn) == some
        assert all("<svg" in to_svg(drawn[name]) for name in set(NAMES) & set(drawn))
