"""Figures of geometry with their uncertainties, read off a fitted view, and the curve and map that show them."""

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from math import atan, degrees, hypot

import numpy as np
from numpy.typing import NDArray

from runner.measure.numerics import view_figures
from runner.measure.numerics.plane_view import View, ViewFit
from runner.measure.reading import Component, Curve, Map

Real = NDArray[np.float64]

BEYOND = 1.75
"""Figures are read so many times as far from the middle as points were seen, at most."""
MAP_COLUMNS, MAP_ROWS = 33, 25
SMALL_STEP = 1e-4
"""Relative change of pitch or distance by which a figure's derivative is taken."""


@dataclass(frozen=True)
class Setting:
    """What is known besides the view."""

    frame: tuple[int, int]
    """Columns and rows."""
    places: Real
    """Columns and rows of the points that were seen, (n, 2)."""
    height: float
    """Greatest image height of a point, over half the diagonal."""
    pitch_mm: float | None
    """Of the chart."""
    pitch_u: float
    """Its relative standard uncertainty."""
    distance_mm: float | None
    """From the chart to the entrance pupil."""
    distance_u: float
    """Its relative standard uncertainty."""
    pixel_mm: float | None
    """Pixel pitch on the sensor."""
    fields: tuple[float, ...] = ()
    """Image heights, over half the diagonal, at which distortion is asked for."""

    @property
    def heights(self) -> Real:
        """Image heights of the curve of distortion."""
        return np.linspace(0, self.height, view_figures.ALONG)

    def needed(self, name: str) -> float:
        """Return how far from the middle, over half the diagonal, a figure looks at the lens."""
        if name.startswith("at field "):
            return self.fields[int(name.rpartition(" ")[2])]
        if name.startswith("tv_"):
            return 1.0
        if not name.startswith("field_"):
            return 0.0
        w, h = (n / hypot(*self.frame) for n in self.frame)
        ends = {"width": w, "horizontal": w, "height": h, "vertical": h, "diagonal": 1.0}
        return float(ends[name.rpartition("_")[2]])


def figures(view: View, setting: Setting, pitch: float, distance: float) -> dict[str, float]:
    """Return every figure by its name; NaN where there is none.

    Args:
        view: The view.
        setting: What is known besides.
        pitch: mm.
        distance: mm.
    """
    frame = setting.frame
    at = view_figures.outlook(view, frame)
    scale, turn, ratio = view_figures.axes_of(view, at)
    across, down = view_figures.keystone(view, frame)
    wide, high, diagonal = view_figures.reach(at) * pitch
    left, right, up, low, one, two = (degrees(atan(a * pitch / distance)) for a in view_figures.arms(at))
    sag, smia = view_figures.picture_height(view, frame)
    offset = view.centre - np.array(frame) / 2
    made = {
        "magnification": scale * (setting.pixel_mm or np.nan) / pitch,
        "object_pixel_size": 1000 * pitch / scale,
        "field_of_view_width": wide,
        "field_of_view_height": high,
        "field_of_view_diagonal": diagonal,
        "field_angle_horizontal": left + right,
        "field_angle_vertical": up + low,
        "field_angle_diagonal": one + two,
        "rotation": turn,
        "scale_ratio": ratio,
        "keystone_horizontal": across,
        "keystone_vertical": down,
        "optical_centre_x": float(view.centre[0]),
        "optical_centre_y": float(view.centre[1]),
        "optical_centre_offset": float(hypot(*offset)),
        "tv_distortion_ebu": sag,
        "tv_distortion_smia": smia,
        "row_bow": view_figures.largest_bow(view, setting.places, 1),
        "column_bow": view_figures.largest_bow(view, setting.places, 0),
        "tangential_p1": float(view.tangential[0]),
        "tangential_p2": float(view.tangential[1]),
    }
    made |= {f"radial_k{i}": float(k) for i, k in enumerate(view.radial, 1)}
    for i, value in enumerate(view_figures.distortion(view, setting.fields)):
        made[f"at field {i}"] = float(value)
    for i, value in enumerate(view_figures.distortion(view, setting.heights)):
        made[f"at height {i}"] = float(value)
    return {name: float(value) for name, value in made.items()}


@dataclass(frozen=True)
class Figure:
    """One figure with the parts of its uncertainty."""

    value: float
    """The value."""
    components: tuple[Component, ...]
    """Parts of u."""

    @property
    def u(self) -> float:
        """Combined standard uncertainty."""
        return hypot(*(part.u for part in self.components))


def figures_of(fit: ViewFit, more: ViewFit | None, setting: Setting, *, shows: bool) -> dict[str, Figure]:
    """Return every figure with its uncertainty.

    Args:
        fit: The fit with the terms asked for.
        more: One with a further radial term. Its difference is part of u if that term shows, and of figures that look
            farther out than points were seen in any case.
        setting: What is known besides.
        shows: The further term is more than its uncertainty explains.
    """
    pitch, distance = setting.pitch_mm or np.nan, setting.distance_mm or np.nan
    names = list(figures(fit.view, setting, pitch, distance))
    values, covariance = fit.spread(lambda view: _ordered(figures(view, setting, pitch, distance), names))
    noise = np.sqrt(np.maximum(np.diag(covariance), 0))
    longer = _ordered(figures(more.view, setting, pitch, distance), names) if more is not None else values
    chart = _slopes(lambda s: figures(fit.view, setting, pitch * (1 + s), distance), names) * setting.pitch_u
    away = _slopes(lambda s: figures(fit.view, setting, pitch, distance * (1 + s)), names) * setting.distance_u
    made = {}
    for i, name in enumerate(names):
        parts = [Component("noise", float(noise[i]), "A", averages=True)]
        parts += _part("lens and chart", float(noise[i] * fit.excess), "A")
        far = more is not None and setting.needed(name) > setting.height
        if shows or far:
            parts += _part("radial terms", float(abs(longer[i] - values[i])), "B")
        if far and not np.isfinite(longer[i]):  # the lens with one term more shows no such place: nobody knows
            values[i] = np.nan
        parts += _part("pitch", float(abs(chart[i])), "B", shared="pitch of the chart")
        parts += _part("distance", float(abs(away[i])), "B", shared="distance of the chart")
        made[name] = Figure(float(values[i]), tuple(parts))
    return made


def _part(name: str, u: float, kind: str, shared: str | None = None) -> list[Component]:
    return [Component(name, u, kind, shared=shared)] if np.isfinite(u) and u > 0 else []


def _ordered(made: Mapping[str, float], names: Sequence[str]) -> Real:
    return np.array([made.get(name, np.nan) for name in names])


def _slopes(of: Callable[[float], Mapping[str, float]], names: Sequence[str]) -> Real:
    """Return derivatives by a relative change; 0 where a figure does not exist."""
    change = (_ordered(of(SMALL_STEP), names) - _ordered(of(-SMALL_STEP), names)) / (2 * SMALL_STEP)
    return np.nan_to_num(change)


def curve(region: str, made: Mapping[str, Figure], setting: Setting, estimator: str) -> Curve:
    """Return the distortion over the image height, as far as points were seen."""
    heights = [float(h) for h in setting.heights]
    some = [made[f"at height {i}"] for i in range(len(heights))]
    return Curve(
        region,
        "distortion",
        tuple(round(h, 6) for h in heights),
        tuple(round(one.value, 6) for one in some),
        tuple(round(one.u, 6) for one in some),
        "1",
        "%",
        estimator=estimator,
    )


def displacement_map(region: str, view: View, points: Real) -> Map:
    """Return by how many px the lens moves each part of the picture outwards, as far as points were seen.

    Args:
        region: Region's name.
        view: The view.
        points: The points, px of the frame.
    """
    low, high = points.min(axis=0), points.max(axis=0)
    x, y = np.linspace(low[0], high[0], MAP_COLUMNS), np.linspace(low[1], high[1], MAP_ROWS)
    at = np.stack(np.meshgrid(x, y), axis=-1).reshape(-1, 2)
    ideal = view.undistorted(at)
    moved = at - view.centre - ideal
    outwards = np.einsum("ni,ni->n", moved, ideal) / np.maximum(np.hypot(*ideal.T), 1e-9)
    values = np.round(np.nan_to_num(outwards), 3).reshape(MAP_ROWS, MAP_COLUMNS)
    centre = (round(float(view.centre[0]), 2), round(float(view.centre[1]), 2), "centre of distortion")
    inside = low[0] <= centre[0] <= high[0] and low[1] <= centre[1] <= high[1]
    return Map(
        region,
        "distortion",
        tuple(round(float(v), 2) for v in x),
        tuple(round(float(v), 2) for v in y),
        tuple(tuple(float(v) for v in row) for row in values),
        "px",
        "px",
        (centre,) if inside else (),
    )
