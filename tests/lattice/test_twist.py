"""Linking, twist and writhe against bands known in closed form and against other formulas.

Sources marked [M] are recalled from memory.
"""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from ribbon.errors import BadInput
from ribbon.lattice.twist import Twisting, linking, twist_along, twisting, writhe

EXACT = 1e-9
WHOLE = 1e-6
SHOWN = 1e-3
Band = tuple[np.ndarray, np.ndarray]


def ruled_band(half_turns: int, points: int = 200) -> Band:
    """The circle of radius 1 with its ruling turned evenly, left-handed."""
    u = 2 * np.pi * np.arange(points) / points
    out = np.stack([np.cos(u), np.sin(u), 0 * u], axis=1)
    lean = half_turns * u / 2
    return out, np.cos(lean)[:, None] * out + np.sin(lean)[:, None] * [0, 0, 1]


def torus_band(half_turns: int, reach: float, points: int = 400) -> Band:
    """The edge of that band as a centre line, its directions toward the circle."""
    line, across = ruled_band(half_turns, points)
    return line + reach * across, across


def random_band(seed: int, points: int = 40) -> Band:
    """A smooth closed curve of random harmonics with directions of random half turns."""
    rng = np.random.default_rng(seed)
    u = 2 * np.pi * np.arange(points) / points
    line = np.stack([np.cos(u), np.sin(u), 0 * u], axis=1)
    for order in (1, 2, 3):
        line = line + np.outer(np.cos(order * u), rng.normal(size=3)) * 0.2 / order
        line = line + np.outer(np.sin(order * u), rng.normal(size=3)) * 0.2 / order
    lean = rng.integers(-3, 4) * u / 2 + 0.3 * np.sin(u + rng.normal())
    out = line / np.linalg.norm(line, axis=1)[:, None]
    return line, np.cos(lean)[:, None] * out + np.sin(lean)[:, None] * [0, 0, 1]


def gauss_sum(one: np.ndarray, other: np.ndarray, points: int) -> float:
    """Gauss's double integral by the midpoint rule on sides cut into ``points`` pieces."""
    share = ((np.arange(points) + 0.5) / points)[:, None]

    def cut(line: np.ndarray) -> Band:
        step = np.roll(line, -1, axis=0) - line
        middle = (line[:, None] + share * step[:, None]).reshape(-1, 3)
        return middle, np.repeat(step / points, points, axis=0)

    (p, dp), (q, dq) = cut(one), cut(other)
    apart = p[:, None] - q[None]
    volume = np.einsum("ijk,ijk->ij", apart, np.cross(dp[:, None], dq[None]))
    return float((volume / np.linalg.norm(apart, axis=2) ** 3).sum() / (4 * np.pi))


@pytest.mark.parametrize("half_turns", range(6))
def test_planar_circle_with_half_turns(half_turns: int) -> None:
    """The standard band r = (1 + v cos(pu/2)) ... is left-handed: Lk = Tw = -p/2, Wr = 0 (the
    writhe of a plane curve vanishes; Fuller, PNAS 68, 815 (1971) [M])."""
    found = twisting(*ruled_band(half_turns))
    assert found.linking_half_turns == pytest.approx(-half_turns, abs=WHOLE)
    assert found.twist_half_turns == pytest.approx(-half_turns, abs=EXACT)
    assert found.writhe_half_turns == pytest.approx(0, abs=EXACT)
    assert found.one_sided == (half_turns % 2 == 1)


def test_torus_curve_shares_linking_between_twist_and_writhe() -> None:
    """Edge at 1/4 of the radius of the band of three full turns: Tw -2.4220, Wr -0.5782, Lk -3,
    from two independent integrations of the smooth curve."""
    found = twisting(*torus_band(6, 0.25))
    assert found.linking_half_turns / 2 == pytest.approx(-3, abs=WHOLE)
    assert found.twist_half_turns / 2 == pytest.approx(-2.4220, abs=SHOWN)
    assert found.writhe_half_turns / 2 == pytest.approx(-0.5782, abs=SHOWN)


def test_writhe_of_the_polygon_tends_to_the_smooth_one_quadratically() -> None:
    """Writhe by solid angles is exact for polygons (Klenin & Langowski, Biopolymers 54, 307
    (2000) [M]), so the error is that of the inscribed polygon: four times less per halving."""
    values = [writhe(torus_band(6, 0.25, points)[0]) for points in (60, 120, 240, 480)]
    steps = np.abs(np.diff(values))
    np.testing.assert_allclose(steps[:-1] / steps[1:], 4, rtol=0, atol=0.3)


def test_writhe_is_the_mean_of_signed_crossings_seen_from_all_sides() -> None:
    """Fuller's meaning of writhe: signed self-crossings averaged over directions of view, here
    for a polygon of few sides and 1500 directions; the mean is uncertain to a few hundredths."""
    line = torus_band(6, 0.4, 40)[0]
    rng = np.random.default_rng(3)
    seen = []
    for view in rng.normal(size=(1500, 3)):
        frame = np.linalg.qr(np.column_stack([view, np.eye(3)[:, :2]]))[0]
        frame[:, 0] *= np.sign(frame[:, 0] @ view)
        frame[:, 2] = np.cross(frame[:, 0], frame[:, 1])
        depth, p = line @ frame[:, 0], line @ frame[:, 1:]
        step = np.roll(p, -1, axis=0) - p
        rise = np.roll(depth, -1) - depth
        apart = p[None] - p[:, None]
        det = step[:, None, 0] * step[None, :, 1] - step[:, None, 1] * step[None, :, 0]
        with np.errstate(divide="ignore", invalid="ignore"):
            s = (apart[..., 0] * step[None, :, 1] - apart[..., 1] * step[None, :, 0]) / det
            t = (apart[..., 0] * step[:, None, 1] - apart[..., 1] * step[:, None, 0]) / det
        meets = (s > 0) & (s < 1) & (t > 0) & (t < 1) & np.triu(np.ones(s.shape, dtype=bool), 2)
        i, j = np.nonzero(meets)
        over = depth[i] + s[i, j] * rise[i] > depth[j] + t[i, j] * rise[j]
        seen.append(np.sum(np.sign(det[i, j]) * np.where(over, 1, -1)))
    assert writhe(line) == pytest.approx(np.mean(seen), abs=4 * np.std(seen) / np.sqrt(1500))


@pytest.mark.parametrize("half_turns", [1, 3, 5])
def test_edge_of_a_one_sided_band_links_the_centre_once_a_half_turn(half_turns: int) -> None:
    """The edge at w = 0.3 runs twice round and links the core p times (Gauss's integral)."""
    line, across = ruled_band(half_turns, 120)
    edge = np.concatenate([line + 0.3 * across, line - 0.3 * across])
    assert linking(line, edge) == pytest.approx(-half_turns, abs=WHOLE)
    assert gauss_sum(line, edge, 5) == pytest.approx(-half_turns, abs=SHOWN)


@given(st.integers(0, 10_000))
def test_calugareanu_and_mirror_images_on_random_bands(seed: int) -> None:
    """Lk = Tw + Wr with Lk whole (Calugareanu 1959/61; White, Am. J. Math. 91, 693 (1969)), and
    all three change sign in a mirror. Twist and writhe are computed apart from the linking."""
    line, across = random_band(seed)
    found = twisting(line, across)
    total = twist_along(line, across).sum() + 2 * writhe(line)
    assert found.linking_half_turns == pytest.approx(total, abs=WHOLE)
    assert total == pytest.approx(round(total), abs=WHOLE)
    mirror = np.array([1, 1, -1])
    other = twisting(line * mirror, across * mirror)
    for name in ("linking_half_turns", "twist_half_turns", "writhe_half_turns"):
        assert getattr(other, name) == pytest.approx(-getattr(found, name), abs=EXACT)


@given(st.integers(0, 10_000))
def test_signs_scale_start_and_motion_change_nothing(seed: int) -> None:
    """Directions are lines, and all three numbers are invariant under similarity (definition)."""
    rng = np.random.default_rng(seed)
    line, across = random_band(seed)
    found = twisting(line, across)
    turn = np.linalg.qr(rng.normal(size=(3, 3)))[0]
    turn *= np.sign(np.linalg.det(turn))
    signs = rng.choice([-1.0, 1.0], size=len(line))[:, None]
    moved = np.roll((3 * line + 5) @ turn.T, 7, axis=0)
    other = twisting(moved, np.roll((2 * signs * across) @ turn.T, 7, axis=0))
    assert other.linking_half_turns == pytest.approx(found.linking_half_turns, abs=WHOLE)
    assert other.twist_half_turns == pytest.approx(found.twist_half_turns, abs=EXACT)
    assert other.writhe_half_turns == pytest.approx(found.writhe_half_turns, abs=EXACT)


def test_running_the_other_way_round_keeps_everything() -> None:
    """Handedness does not depend on the direction of travel (definition of a screw)."""
    line, across = torus_band(3, 0.2)
    one, other = twisting(line, across), twisting(line[::-1], across[::-1])
    assert other.twist_half_turns == pytest.approx(one.twist_half_turns, abs=EXACT)
    assert other.linking_half_turns == pytest.approx(one.linking_half_turns, abs=WHOLE)


def test_a_right_handed_screw_is_positive() -> None:
    """r = (cos s, sin s, s) is the right-handed helix; the torus coil that rises in the sense in
    which it goes round is right-handed, so writhe and linking with its axis are positive."""
    u = 2 * np.pi * np.arange(300) / 300
    coil = np.stack([(3 + np.cos(4 * u)) * np.cos(u), (3 + np.cos(4 * u)) * np.sin(u),
                     -np.sin(4 * u)], axis=1)  # fmt: skip
    axis = np.stack([3 * np.cos(u), 3 * np.sin(u), 0 * u], axis=1)
    # near u = 0 the axis runs along y and the coil turns from x to -z: about +y, right-handed
    assert linking(axis, coil) == pytest.approx(4, abs=WHOLE)
    assert writhe(coil) > 0


@pytest.mark.parametrize(
    ("line", "across", "match"),
    [
        (np.zeros((2, 3)), np.zeros((2, 3)), r"centre has the shape \(2, 3\)"),
        (np.full((4, 3), np.nan), np.zeros((4, 3)), "not a finite number"),
        (np.eye(3)[[0, 1, 1, 2]], np.eye(3)[[2, 2, 0, 1]], "points 1 and 2 of centre coincide"),
        (np.eye(3), np.zeros((4, 3)), r"directions have the shape \(4, 3\)"),
        (np.eye(3), np.zeros((3, 3)), "direction 0 is .* across the band"),
        (np.eye(3), np.full((3, 3), np.nan), "direction 0 is"),
        (
            np.array([[0.0, 0, 0], [2, 0, 0], [1, 0, 0]]),
            np.eye(3)[[2, 2, 2]],
            "turns straight back at point",
        ),
    ],
)
def test_refuses_what_is_no_band(line: np.ndarray, across: np.ndarray, match: str) -> None:
    """Each sentence names what was given (a rule of the house)."""
    with pytest.raises(BadInput, match=match):
        twisting(line, across)


def test_refuses_a_turn_that_could_go_either_way() -> None:
    """A line turned by a quarter turn can have turned either way."""
    line, _ = ruled_band(0, 8)
    across = np.tile([0.0, 0, 1], (8, 1))
    across[3] = line[3]
    with pytest.raises(BadInput, match="quarter turn from point 2 to point 3"):
        twisting(line, across)


@pytest.mark.parametrize("start", [0.0, 0.5])
def test_refuses_a_line_that_meets_itself(start: float) -> None:
    """A figure eight through one point has no writhe: it jumps by 2 where sides cross."""
    u = 2 * np.pi * (np.arange(40) + start) / 40
    eight = np.stack([np.sin(2 * u), np.sin(u), 0 * u], axis=1)
    with pytest.raises(BadInput, match="meets the one from point"):
        twisting(eight, np.tile([0.3, 0.2, 1.0], (40, 1)))


def test_refuses_edges_that_cross_the_line_between_close_strands() -> None:
    """Two strands nearer to each other than the edge is to the line: linking is not its own."""
    u = 2 * np.pi * np.arange(40) / 40
    eight = np.stack([np.sin(2 * u), np.sin(u), 1e-5 * np.cos(u)], axis=1)
    with pytest.raises(BadInput, match="meets itself or folds back"):
        twisting(eight, np.tile([0.0, 0.0, 1.0], (40, 1)))


def test_result_is_read_only() -> None:
    """Results are frozen (a rule of the house)."""
    with pytest.raises(AttributeError):
        twisting(*ruled_band(1)).linking_half_turns = 0.0  # type: ignore[misc]
    assert not Twisting(linking_half_turns=2, twist_half_turns=1, writhe_half_turns=1).one_sided
