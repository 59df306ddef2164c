"""Level and clipping of a region: whether the frame can be evidence at all.

The level is the mean light as a share of the range from black to white level; the clipped share counts pixels whose
stored code lies at or beyond either end of that range, where the sensor no longer tells levels apart. The black end is
code 0: codes below the black level are ordinary noise.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from math import ceil, sqrt

import numpy as np
from numpy.typing import NDArray

from runner.capture.frame import Codes, Crop, linearise
from runner.errors import MeasurementRefused
from runner.measure import planes
from runner.measure.contract import Measurement, QuantityInfo, Sample
from runner.measure.options import lookups, reader
from runner.measure.reading import Component, Reading
from runner.spec.model import Camera

NAME = "exposure"
TITLE = "Level and clipping"
GROUP = "every capture"
NEEDS: frozenset[str] = frozenset()
REFERENCES = ("EMVA Standard 1288 Release 4.0 Linear (2021), mean and saturation of grey values",)

ENOUGH = 100_000
"""Differences that tell the noise, and so the level's u, within 0.5 %.

The standard error of 1.4826 times the median absolute deviation of n normal values is 1.17/√n of it (Rousseeuw and
Croux 1993: an efficiency of 37 %), some 1.2 times as much for differences that share a pixel.
"""

_QUANTITIES: Mapping[str, QuantityInfo] = {
    "level": QuantityInfo("%", "Mean light of the region, in % of the range from black to white level."),
    "clipped": QuantityInfo("%", "Share of the region's pixels at the white level or at code 0."),
}


@dataclass(frozen=True)
class Options:
    """There is nothing to choose."""


read_options = reader(Options)


quantity, quantities = lookups(_QUANTITIES)


def measure(sample: Sample, options: Options) -> Measurement:  # noqa: ARG001 - the contract's form
    """Measure level and clipped share of one region of one frame.

    The level's noise is taken from differences of neighbouring columns, which a scene's edges hardly enter
    (median absolute deviation; 1.4826 turns it into a standard deviation for normal noise). Of large regions every
    so many-th row is taken for it; level and clipped share are always those of all pixels.

    Raises:
        MeasurementRefused: The region holds no pixel of the channel.
    """
    own, camera = _own(sample.crop), sample.camera
    size = sum(codes.size for codes in own)
    step = _steps(own, camera)
    noise = 1.4826 * _median_deviation(step) / sqrt(2) if step.size else 0.0
    u_level = 100 * noise / sqrt(size)
    share = sum(_at_end(codes, camera) for codes in own) / size
    u_share = 100 * sqrt(share * (1 - share) / size)
    region, method = sample.found.region, REFERENCES[0]
    return Measurement(
        (
            Reading(
                region,
                "level",
                "%",
                100 * sum(_light(codes, camera) for codes in own) / size,
                u_level,
                _noise(u_level),
                estimator="mean",
                method=method,
            ),
            Reading(
                region,
                "clipped",
                "%",
                100 * share,
                u_share,
                _noise(u_share),
                estimator="count",
                method=method,
                count=True,
                trials=size,
            ),
        )
    )


def _own(crop: Crop) -> list[Codes]:
    """Return the channel's own pixels: all of them, or each of its places in a mosaic's cell.

    Raises:
        MeasurementRefused: There are none.
    """
    if crop.sites is None:
        return [crop.codes]
    places = np.argwhere(crop.sites[:2, :2]).tolist()
    if not places:
        found = f"the region has {crop.sites.shape[0]} × {crop.sites.shape[1]} px, none of them {crop.channel}"
        raise MeasurementRefused("outside the estimator's limits", found, allowed="a mosaic needs 2 × 2 at least")
    return [crop.codes[y::2, x::2] for y, x in places]


def _at_end(codes: Codes, camera: Camera) -> int:
    """Return how many pixels lie at an end of the range."""
    white = ceil(camera.white_level) if codes.dtype.kind in "iu" else camera.white_level
    count = int(np.count_nonzero(codes >= white)) if codes.max() >= white else 0
    if camera.black_level > 0 and codes.min() <= 0:  # else code 0 is an ordinary dark value, not an end of the range
        count += int(np.count_nonzero(codes <= 0))
    return count


def _light(codes: Codes, camera: Camera) -> float:
    """Return the sum of light over pixels, some rows at a time."""
    if camera.tone.kind == "linear":
        mean = float(planes.sums(codes, 1).sum(dtype=np.float64)) / codes.size
        return codes.size * (mean - camera.black_level) / (camera.white_level - camera.black_level)
    if codes.dtype.kind == "u" and codes.dtype.itemsize <= 2:
        table = linearise(np.arange(int(codes.max()) + 1), camera)
        return sum(float(table.take(strip, mode="clip").sum()) for strip in planes.strips(codes))
    return sum(float(linearise(strip, camera).sum()) for strip in planes.strips(codes))


def _steps(own: Sequence[Codes], camera: Camera) -> NDArray[np.float64]:
    """Return differences of neighbouring pixels of one kind: the next column, or the one after it in a mosaic."""
    some = (codes[:: max(1, codes.size // ENOUGH)] for codes in own)
    return np.concatenate([np.diff(linearise(codes, camera), axis=1).ravel() for codes in some])


def _median_deviation(values: NDArray[np.float64]) -> float:
    """Return the median absolute deviation, within the memory of the values: they are overwritten."""
    values -= np.median(values, overwrite_input=True)
    np.abs(values, out=values)
    return float(np.median(values, overwrite_input=True))


def _noise(u: float) -> tuple[Component, ...]:
    return (Component("noise", u, "A", averages=True),)
