"""Level and clipping of a region: whether the frame can be evidence at all.

The level is the mean light as a share of the range from black to white level; the clipped share counts pixels whose
stored code lies at or beyond either end of that range, where the sensor no longer tells levels apart. The black end is
code 0: codes below the black level are ordinary noise.
"""

from collections.abc import Mapping
from dataclasses import dataclass
from math import sqrt
from typing import Any

import numpy as np
from numpy.typing import NDArray

from runner.capture.frame import Crop
from runner.measure.contract import Measurement, QuantityInfo, Sample
from runner.measure.options import read_record
from runner.measure.reading import Component, Reading

NAME = "exposure"
TITLE = "Level and clipping"
NEEDS: frozenset[str] = frozenset()
REFERENCES = ("EMVA Standard 1288 Release 4.0 Linear (2021), mean and saturation of grey values",)

_QUANTITIES: Mapping[str, QuantityInfo] = {
    "level": QuantityInfo("%", "Mean light of the region, in % of the range from black to white level."),
    "clipped": QuantityInfo("%", "Share of the region's pixels at the white level or at code 0."),
}


@dataclass(frozen=True)
class Options:
    """There is nothing to choose."""


def read_options(asked: Mapping[str, Any]) -> Options:
    """Read the options; none are known."""
    return read_record(Options, asked)


def quantity(name: str) -> QuantityInfo | None:
    """Return what a quantity name means, or None."""
    return _QUANTITIES.get(name)


def quantities() -> Mapping[str, QuantityInfo]:
    """Return the quantities."""
    return _QUANTITIES


def measure(sample: Sample, options: Options) -> Measurement:  # noqa: ARG001 - the contract's form
    """Measure level and clipped share of one region of one frame.

    The level's noise is taken from differences of neighbouring columns, which a scene's edges hardly enter
    (median absolute deviation; 1.4826 turns it into a standard deviation for normal noise).
    """
    codes, signal = _own(sample.crop.codes, sample.crop.sites), _own(sample.crop.signal, sample.crop.sites)
    step = _steps(sample.crop)
    noise = 1.4826 * _median_deviation(step) / sqrt(2) if step.size else 0.0
    u_level = 100 * noise / sqrt(signal.size)
    at_end = int(np.count_nonzero((codes >= sample.camera.white_level) | (codes <= 0)))
    if sample.camera.black_level <= 0:  # code 0 is then an ordinary dark value, not an end of the range
        at_end = int(np.count_nonzero(codes >= sample.camera.white_level))
    share = at_end / signal.size
    u_share = 100 * sqrt(share * (1 - share) / signal.size)
    region, method = sample.found.region, REFERENCES[0]
    return Measurement(
        (
            Reading(
                region,
                "level",
                "%",
                100 * float(signal.mean()),
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
                trials=int(signal.size),
            ),
        )
    )


def _own(values: NDArray[Any], sites: NDArray[np.bool_] | None) -> NDArray[Any]:
    """Return the channel's own pixels; all of them where there is no mosaic."""
    return values if sites is None else values[sites]


def _steps(crop: Crop) -> NDArray[np.float64]:
    """Return differences of neighbouring pixels of one channel: the next column, or the one after it in a mosaic."""
    if crop.sites is None:
        return np.diff(crop.signal, axis=1)
    return (crop.signal[:, 2:] - crop.signal[:, :-2])[crop.sites[:, 2:]]


def _median_deviation(values: NDArray[np.float64]) -> float:
    """Return the median absolute deviation, within the memory of the values: they are overwritten."""
    values -= np.median(values, overwrite_input=True)
    np.abs(values, out=values)
    return float(np.median(values, overwrite_input=True))


def _noise(u: float) -> tuple[Component, ...]:
    return (Component("noise", u, "A", averages=True),)
