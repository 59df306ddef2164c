"""Puts regions that a spec gives on the chart into a frame: mm to px, with the view that the marks gave."""

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from runner.capture.frame import Frame
from runner.measure.chart_options import feature_of
from runner.measure.contract import Found, NotFound
from runner.measure.numerics.chart_pose import ChartPose
from runner.measure.plan import CapturePlan
from runner.spec.chart_model import ChartFile
from runner.spec.model import Amount, Capture, Chart, Region

Real = NDArray[np.float64]

WHOLE = frozenset({"dot grid", "checkerboard", "sine star", "tri-bar elements", "square wave bars", "hyperbolic wedge"})
"""Kinds whose features are looked at whole, ground around them included. Of others nothing beyond them may be seen."""
SIDE = 9
"""Places along each side of a region that are followed: a bent side is seen between its ends."""


def in_frame(regions: Sequence[Region], pose: ChartPose | None, chart: Chart) -> tuple[Region, ...]:
    """Return the regions, those on the chart with their places in px.

    A region becomes the largest upright box of its proportions, about its centre, that lies within it; a feature of a
    kind that is looked at whole becomes the smallest upright box around it. A size in px stays as it is.
    """
    if pose is None or chart.file is None:
        return tuple(regions)
    return tuple(_placed(one, pose, chart.file) if one.on == "chart" else one for one in regions)


def _placed(region: Region, pose: ChartPose, file: ChartFile) -> Region:
    centre = np.array([[part.value for part in region.position]])
    if region.size[0].unit == "px":
        return _region(region, pose.to_frame(centre)[0], np.array([part.value for part in region.size]))
    size = np.array([part.value for part in region.size])
    rim = centre + size / 2 * _rim()
    seen = pose.to_frame(rim)
    if region.feature and file.features[region.feature].kind in WHOLE:
        low, high = seen.min(axis=0), seen.max(axis=0)
        return _region(region, (low + high) / 2, high - low)
    middle = pose.to_frame(centre)[0]
    return _region(region, middle, _inner(middle, np.ptp(seen, axis=0), pose, centre[0], size))


def _inner(middle: Real, box: Real, pose: ChartPose, centre: Real, size: Real) -> Real:
    """Return the largest box of a proportion about a place whose rim lies in a rectangle on the chart."""
    low, high = 0.0, 1.0
    for _ in range(20):
        share = (low + high) / 2
        places = pose.to_chart(middle + share * box / 2 * _rim())
        fits = bool(np.all(np.abs(places - centre) <= size / 2 * (1 + 1e-9)))
        low, high = (share, high) if fits else (low, share)
    return low * box


def _rim() -> Real:
    """Return places along the rim of a box from -1 to 1."""
    along = np.linspace(-1, 1, SIDE)
    ones = np.ones(SIDE)
    sides = [(along, -ones), (along, ones), (-ones, along), (ones, along)]
    return np.concatenate([np.column_stack(side) for side in sides])


def _region(region: Region, middle: Real, size: Real) -> Region:
    x, y, width, height = (Amount(float(part), "px") for part in (*middle, *size))
    return replace(region, position=(x, y), size=(width, height), on="frame")


def locate(one: CapturePlan, frame: Frame, pose: ChartPose | None) -> list[Found | NotFound]:
    """Let the target find every region of a capture in a frame, those on the chart where the pose has them.

    Regions on features with values of their own are looked for with these.

    Args:
        one: The capture, bound.
        frame: Colours as one grey.
        pose: Where the chart lies, or None without a chart file.
    """
    regions = in_frame(one.capture.regions, pose, one.capture.chart)
    camera = one.capture.camera
    if one.own:
        found = [
            found
            for region in regions
            for found in one.target.locate([frame], [region], camera, one.own.get(region.name, one.target_options))
        ]
    else:
        found = list(one.target.locate([frame], regions, camera, one.target_options))
    return [replace(f, pose=pose) if isinstance(f, Found) and pose is not None else f for f in found]


def own_transfer(capture: Capture, found: Found) -> Chart:
    """Return a capture's chart with its feature's own transfer function at the scale at which a region sees it.

    A spec's own table goes before the file's. The scale is that of the region's centre, the mean over directions.
    """
    pose, chart = found.pose, capture.chart
    region = next((one for one in capture.regions if one.name == found.region), None)
    feature = feature_of(region, capture) if region is not None else None
    if pose is None or region is None or feature is None or not feature.transfer or chart.transfer:
        return chart
    place = np.array([[part.value for part in region.position]])
    slope = (pose.to_frame(place + np.eye(2) / 2) - pose.to_frame(place - np.eye(2) / 2)).T
    scale = float(np.sqrt(abs(np.linalg.det(slope))))
    return replace(chart, transfer=tuple((f / scale, m) for f, m in feature.transfer), transfer_u=feature.transfer_u)
