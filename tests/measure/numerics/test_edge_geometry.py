"""Where an edge lies, against plain geometry of points and lines."""

from dataclasses import replace

import numpy as np
import pytest

from runner.errors import MeasurementRefused
from runner.measure.numerics.edge_geometry import EdgeLine, edge_length, find_edge
from tests.scenes.edges import EdgeScene

DIRECTIONS = [0.0, 5.0, 40.0, 85.0, 96.0, 140.0, 175.0, -5.0, -93.0, -170.0]


def _line(scene: EdgeScene, *more: float) -> EdgeLine:
    return EdgeLine(float(np.radians(scene.direction)), scene.half_length, np.array([scene.offset, *more]))


def _on_screen(line: EdgeLine, v: float) -> tuple[float, float]:
    """The edge's point at v: x to the right, y down, from the region's centre."""
    u = float(np.polynomial.legendre.legval(v / line.half, line.coefficients))
    c, s = np.cos(line.normal), np.sin(line.normal)
    return u * c - v * s, u * s + v * c


@pytest.mark.parametrize("direction", DIRECTIONS)
def test_distances_of_a_straight_edge(direction: float) -> None:
    """Every pixel centre's distance is the scene's, to rounding, in regions of odd and even size, whatever the terms.

    A slope of the line against its normal is the same edge, turned: distance is to the line, not along the normal.
    """
    scene = EdgeScene(size=(41, 64), direction=direction, offset=3.7)
    truth = scene.distance().ravel()
    line = _line(scene)
    assert line.distance(*line.along((64, 41))) == pytest.approx(truth, abs=1e-11)

    for degrees in (-8.0, 3.0):
        angle = np.radians(degrees)
        # u cos a - v sin a = offset, seen from a normal that is turned by -a, is u = offset / cos a + v tan a
        skew = EdgeLine(line.normal + angle, line.half, np.array([3.7 / np.cos(angle), line.half * np.tan(angle)]))
        for each in (skew, skew.turned()):
            assert each.distance(*each.along((64, 41))) == pytest.approx(truth, abs=1e-11)
            assert each.tilt == pytest.approx(line.tilt, abs=1e-12)
        assert skew.turned().coefficients[1] == 0.0


@pytest.mark.parametrize("bend", [-2.0, 0.7])
def test_distances_of_a_curved_edge(bend: float) -> None:
    """Near the edge (10 px) the distance is that to the foot of the perpendicular, to second order.

    From a parabola of slope s and second derivative k a point at the distance d is off by half k s² d²: in a bow of
    2 px over 120 px, k = 2 · 2 / 60² and s <= 4 / 60.
    """
    scene = EdgeScene(size=(90, 120), direction=7.0, offset=-1.3, curve=(bend,))
    line = _line(scene, 0.0, 2 * bend / 3)  # t² = (2 P2 + 1) / 3
    line = replace(line, coefficients=line.coefficients + np.array([bend / 3, 0.0, 0.0]))
    truth, (u, v) = scene.distance().ravel(), line.along((120, 90))
    near = np.abs(truth) < 10
    k, s = 2 * abs(bend) / line.half**2, 2 * abs(bend) / line.half

    # pixels in the corners lie up to 15 % beyond the edge's end
    assert np.abs(line.distance(u, v) - truth)[near].max() < 0.5 * k * (1.15 * s) ** 2 * 10**2
    assert np.abs((u - scene.offset) - truth)[near].max() > 0.5 * abs(bend)  # the straight line would not do


@pytest.mark.parametrize("direction", DIRECTIONS)
def test_tilt_is_clockwise_on_screen(direction: float) -> None:
    """Two points of the edge tell its tilt: seen with y down, clockwise from the nearest axis is positive."""
    for slope in (0.0, 2.0):
        scene = EdgeScene(size=(60, 90), direction=direction, offset=2.0)
        line = _line(scene, slope)
        (x0, y0), (x1, y1) = _on_screen(line, -10.0), _on_screen(line, 10.0)
        angle = np.degrees(np.arctan2(y1 - y0, x1 - x0))  # y is down, so this grows clockwise
        assert np.degrees(line.tilt) == pytest.approx((angle + 45) % 90 - 45, abs=1e-9)
    scene = EdgeScene(direction=direction, fill=0.64)
    assert _line(scene).sides(0.8) == pytest.approx(scene.sides, abs=1e-12)


@pytest.mark.parametrize("direction", DIRECTIONS)
@pytest.mark.parametrize("offset", [0.0, 12.3, -28.0])
def test_length_in_a_box(direction: float, offset: float) -> None:
    """The length is that of all points of the line, 1/1000 px apart, that lie in the region's outer borders."""
    c, s = np.cos(np.radians(direction)), np.sin(np.radians(direction))
    v = np.arange(-100, 100, 1e-3)
    inside = (np.abs(offset * c - v * s) <= 30) & (np.abs(offset * s + v * c) <= 45)

    found = edge_length((90, 60), float(np.radians(direction)), offset)
    assert found == pytest.approx(np.count_nonzero(inside) * 1e-3, abs=2.1e-3)


def test_lengths_known_by_heart() -> None:
    """A diagonal is √2 sides long, an upright edge as long as its rows, an edge beyond the border nothing."""
    assert edge_length((50, 50), np.pi / 4) == pytest.approx(50 * np.sqrt(2))
    assert edge_length((90, 60), 0.0, 29.9) == pytest.approx(90)
    assert edge_length((90, 60), 0.0, 30.1) == 0.0
    assert edge_length((50, 50), np.pi / 4, 25 * np.sqrt(2) + 0.01) == 0.0


@pytest.mark.parametrize("direction", DIRECTIONS)
@pytest.mark.parametrize("mosaic", [False, True])
def test_an_edge_is_found_from_nothing(direction: float, *, mosaic: bool) -> None:
    """Place within a bin, direction within 1.5°, levels within 5 % of the step, at noise of 4 % of it.

    1.5° move the ends of an edge of 120 px by 1.6 px, about its own width, which a least-squares fit pulls in. The
    same of a mosaic, one site in four, all others filled with nonsense: its bins are 2 px wide.
    """
    scene = EdgeScene(size=(80, 120), direction=direction, offset=4.0, low=0.2, high=0.7)
    signal = scene.signal() + np.random.default_rng(7).normal(0, 0.02, (120, 80))
    sites = None
    if mosaic:
        sites = np.zeros((120, 80), dtype=bool)
        sites[1::2, ::2] = True
        signal[~sites] = 5.0
    line, low, high = find_edge(signal, sites)

    off = np.angle(np.exp(1j * (line.normal - np.radians(direction))), deg=True)
    assert abs(off) < 1.5
    assert line.coefficients[0] == pytest.approx(4.0, abs=2.0 if mosaic else 1.0)
    assert (low, high) == pytest.approx((0.2, 0.7), abs=0.025)
    assert line.half == pytest.approx(edge_length((120, 80), np.radians(direction), 4.0) / 2, rel=0.1)


@pytest.mark.parametrize("seed", range(10))
def test_no_edge_is_found_in_noise(seed: int) -> None:
    """A region without an edge is refused, with what was found and what is needed."""
    flat = np.random.default_rng(seed).normal(0.5, 0.01, (100, 80))

    with pytest.raises(MeasurementRefused, match=r"no step stands out .*step / scatter [0-5]\.\d\)") as refused:
        find_edge(flat)
    assert refused.value.cause == "no edge"
