"""Sub-pixel points of a dot grid or a chequered board in one crop, on the channel's own pixels."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from runner.capture.frame import Crop, linearise
from runner.errors import MeasurementRefused
from runner.measure.contract import Found
from runner.measure.numerics.corner_fit import fit_corners
from runner.measure.numerics.disc_fit import fit_discs
from runner.measure.numerics.mark_pixels import Pixels
from runner.measure.numerics.plane_view import Marks

Real = NDArray[np.float64]

MOST_CLIPPED = 0.05
"""Share of the lattice's pixels at the white level or at code 0: a border cut off there is not where it seems."""
LEAST_POINTS = 25
MOST_LOST = 0.1
"""Share of the points found that may turn out not to fit."""
STRANGE = 4.0
"""A fit that leaves so many times what most leave is of something else: dirt, a shadow, a finger."""
FLOOR = 0.002
"""px: bound on what the model of a border leaves of a centre's place (0.001 px in closed-form scenes, twice that)."""
SHARP_DISC, SHARP_CORNER = (0.42, 0.07), (0.58, 0.08)
"""px: borders sharper than the first are undersampled; the bound grows by e for every so much of the second.

Closed-form discs at blurs of 0.42, 0.37, 0.32 px lie off by up to 0.0016, 0.0033, 0.008 px, corners at 0.58, 0.50,
0.42, 0.35 px by up to 0.0017, 0.004, 0.011, 0.029 px.
"""
LEAST_PIXELS = 32.0
"""Own pixels on a point: four to each of a disc's parameters."""


@dataclass(frozen=True)
class Centres:
    """Points of one crop."""

    points: Real
    """(n, 2), px of the frame, pixel centres at +0.5."""
    places: Real
    """Columns and rows on the chart, (n, 2)."""
    u: Real
    """Standard uncertainty from noise in each direction, px, (n,)."""
    marks: Marks
    """What they are, for the view."""
    kept: NDArray[np.bool_]
    """Which of the target's points they are."""
    blur: float
    """Median standard deviation of the borders' Gaussian, px."""


def pixels_of(crop: Crop) -> Pixels:
    """Return a crop's own pixels: of a mosaic, one or two lattices of every second row and column."""
    codes = np.ascontiguousarray(crop.codes)
    if crop.sites is None:
        return Pixels(codes, lambda some: linearise(some, crop.camera))
    origins = tuple((int(r), int(c)) for r, c in np.argwhere(crop.sites[:2, :2]))
    return Pixels(codes, lambda some: linearise(some, crop.camera), 2, origins)


def centres_of(found: Found, crop: Crop) -> Centres:
    """Fit every point that a target found, on one crop.

    Args:
        found: Of a dot grid (`dots`) or a chequered board (`corners`), with `places`.
        crop: Of its box, in any frame and channel that shows the same.

    Raises:
        MeasurementRefused: Clipped, too few pixels, or points that cannot be fitted.
    """
    dots = "dots" in found.points
    words = "dots" if dots else "corners"
    start = np.array(found.points[words]) - [crop.box.x0, crop.box.y0]
    places = np.array(found.points["places"])
    _refuse_clipped(crop, start)
    pixels = pixels_of(crop)
    steps = _steps(start, places)
    if dots:
        radius = found.geometry["radius"]
        factor = _factors(found, places)
        shapes = steps * (radius * factor)[:, None, None]
        _refuse_small(np.pi * float(np.median(np.abs(np.linalg.det(shapes)))) * 2 * pixels.share, words)
        # the ground reaches to the middle between the borders of two neighbours
        made = fit_discs(pixels, start, shapes, (1 - radius * (np.maximum(factor, 1) - 1)) * 0.5 / (radius * factor))
        size, marks = made.size * radius, Marks("discs", float(np.median(made.size)) * radius * factor)
        good = np.abs(size / np.median(size) - 1) < 0.35
        centres, covariance, misfit, step = made.centres, made.covariance, made.misfit, made.step
        settled, blur = made.settled, made.blur
    else:
        _refuse_small(float(np.median(np.abs(np.linalg.det(steps)))) * 0.36 * pixels.share, words)
        fits = fit_corners(pixels, start, steps)
        marks, good = Marks("crossings", fits.extent), np.ones(len(start), dtype=bool)
        centres, covariance, misfit, step = fits.centres, fits.covariance, fits.misfit, 2 * fits.swing
        settled, blur = fits.settled, fits.blur
    rest = misfit / np.maximum(np.abs(step), 1e-9)
    good &= settled & (rest < np.maximum(STRANGE * np.median(rest), 0.02)) & np.isfinite(covariance[:, 0, 0])
    good &= np.einsum("nii->n", covariance) >= 0  # an ill-posed fit may leave a negative variance
    lost = int(np.count_nonzero(~good))
    if lost > MOST_LOST * len(start) or len(start) - lost < LEAST_POINTS:
        found_words = f"{lost} of {len(start)} {words} do not look like {words}: their borders cannot be fitted"
        allowed = f"at most {100 * MOST_LOST:g} % may, and {LEAST_POINTS} must remain"
        raise MeasurementRefused("another scene", found_words, allowed=allowed)
    knee, scale = SHARP_DISC if dots else SHARP_CORNER
    bound = FLOOR * np.exp(np.maximum(0.0, knee - float(np.median(blur[good]))) / scale)
    u = np.hypot(np.sqrt(np.einsum("nii->n", covariance[good]) / 2), bound)
    at = centres[good] + [crop.box.x0, crop.box.y0]
    marks = Marks(marks.kind, np.asarray(marks.extent)[good])
    return Centres(at, places[good], u, marks, good, float(np.median(blur[good])))


def _steps(points: Real, places: Real) -> Real:
    """Return the steps of one column and one row about each point, from its neighbours."""
    low = places.min(axis=0).astype(int)
    at = places.astype(np.intp) - low
    columns, rows = at.max(axis=0) + 1
    number = np.full((columns + 2, rows + 2), -1, dtype=np.intp)
    number[at[:, 0] + 1, at[:, 1] + 1] = np.arange(len(at))
    out = np.full((len(at), 2, 2), np.nan)
    for axis, step in ((0, (1, 0)), (1, (0, 1))):
        before = number[at[:, 0] + 1 - step[0], at[:, 1] + 1 - step[1]]
        after = number[at[:, 0] + 1 + step[0], at[:, 1] + 1 + step[1]]
        mine = np.arange(len(at))
        count = (before >= 0).astype(float) + (after >= 0)
        start, end = np.where(before >= 0, before, mine), np.where(after >= 0, after, mine)
        some = count > 0
        out[some, :, axis] = ((points[end] - points[start]) / np.maximum(count, 1)[:, None])[some]
    whole = np.isfinite(out).all(axis=(1, 2))
    if not whole.all():
        out[~whole] = np.median(out[whole], axis=0)
    return out


def _factors(found: Found, places: Real) -> Real:
    """Return each dot's radius over that of most."""
    larger = {tuple(one) for one in found.points.get("larger", ())}
    is_larger = np.array([tuple(one) in larger for one in places.tolist()])
    return np.where(is_larger, found.geometry["larger"], 1.0)


def _refuse_small(count: float, words: str) -> None:
    if count < LEAST_PIXELS:
        found = f"each of the {words} has {count:.0f} pixels of this colour; {LEAST_PIXELS:g} are needed"
        raise MeasurementRefused("undersampled", found, next_step="go nearer or take a chart with larger marks")


def _refuse_clipped(crop: Crop, points: Real) -> None:
    """Refuse a lattice whose pixels lie at an end of the range."""
    (x0, y0), (x1, y1) = points.min(axis=0).astype(int), points.max(axis=0).astype(int) + 1
    part = crop.codes[y0:y1, x0:x1]
    some = max(1, int(np.sqrt(part.size / 200_000))) | 1  # odd, so that all sites of a mosaic are met
    codes = part[::some, ::some]
    if crop.sites is not None:
        codes = codes[crop.sites[y0:y1, x0:x1][::some, ::some]]
    for share, end, step in (
        (float(np.mean(codes >= crop.camera.white_level)), "at the white level", "give less light"),
        (float(np.mean(codes <= 0)), "at code 0", "raise the camera's black level or give more light"),
    ):
        if share > MOST_CLIPPED:
            found = f"{100 * share:.1f} % of the lattice's pixels lie {end}"
            allowed = f"at most {100 * MOST_CLIPPED:g} % may"
            raise MeasurementRefused("clipped", found, where=crop.file, allowed=allowed, next_step=step)
