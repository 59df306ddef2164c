"""Veiling glare: light in the image of a black area, over that of the bright field around it.

`veiling_glare_index_iso9358` takes the area's light as it is; `image_flare_iso18844` takes off what the area itself
sends out (`black_luminance`, its luminance over that of the field). Both are ratios of linear light over the dark
level: that of the companion `dark`, else the stated black level. Where the black is exposed longer than the white can
bear, the companion `flat` gives the white at the shorter exposure, and `exposure_ratio` says how much longer.

Bright fields: keep to local rules for lamps, and do not look into light boxes or lasers without the protection they ask
for.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from math import sqrt

import numpy as np
from numpy.typing import NDArray

from runner.capture.frame import Crop
from runner.errors import MeasurementRefused
from runner.measure.contract import Measurement, QuantityInfo, Sample
from runner.measure.numerics.black_area import AreaLost, BlackArea, find_black_area, surround_at
from runner.measure.options import lookups, number, reader
from runner.measure.reading import Component, Reading

NAME = "veiling glare"
TITLE = "Veiling glare"
GROUP = "stray light and time"
NEEDS = frozenset({"black area"})
REFERENCES = (
    "ISO 9358:1994 (veiling glare index)",
    "ISO 18844:2017 (image flare)",
    "JCGM 100:2008 (uncertainty)",
)
ESTIMATOR = "black over surround"

MOST_CLIPPED = 0.001
"""Share of the surround at the white level."""
MOST_UNEVEN = 0.1
"""Change of the surround over the region, (largest - least) / mean of its quarters: with more, its light at the black
area's place is not known."""
STATED = 0.5
"""DN by which a stated black level may be off either way: it is a whole number."""

_QUANTITIES: Mapping[str, QuantityInfo] = {
    "veiling_glare_index_iso9358": QuantityInfo(
        "%", "Light of the black area over that of the bright field around it.", least=-5.0, most=100.0
    ),
    "image_flare_iso18844": QuantityInfo(
        "%", "The same with the black area's own light taken off both.", least=-100.0, most=100.0
    ),
}


@dataclass(frozen=True)
class Options:
    """How glare is read."""

    margin: float | str = field(
        default=0.15,
        metadata={"sentence": "Share of the area's shorter side kept clear on both sides of its border, e.g. 15 %."},
    )
    black_luminance: float | str = field(
        default=0.0, metadata={"sentence": "Luminance of the black area itself over that of the field, e.g. 0.033 %."}
    )
    black_luminance_uncertainty: float | str = field(
        default=0.0, metadata={"sentence": "Its standard uncertainty, e.g. 0.005 %."}
    )
    exposure_ratio: float = field(
        default=1.0, metadata={"sentence": "Exposure of these frames over that of the companion `flat`, e.g. 8."}
    )

    def __post_init__(self) -> None:
        """Turn shares into numbers and keep each option inside its meaning."""
        object.__setattr__(self, "margin", number("margin", self.margin, "%", 0.0, 0.4))
        for name in ("black_luminance", "black_luminance_uncertainty"):
            object.__setattr__(self, name, number(name, getattr(self, name), "%", 0.0, 0.5))
        object.__setattr__(self, "exposure_ratio", number("exposure_ratio", self.exposure_ratio, "", 1.0, 1e4))


@dataclass(frozen=True)
class _Lights:
    """Linear light, as shares of the range, and their standard uncertainties by name."""

    black: float
    """Of the black area over the dark level."""
    white: float
    """Of the surround at the area's place over the dark level, at the frames' own exposure."""
    black_u: Mapping[str, float]
    """Parts of the black area's."""
    white_u: Mapping[str, float]
    """Parts of the surround's."""
    zero_u: tuple[str, float]
    """Where the dark level comes from, and its own."""


read_options = reader(Options)


quantity, quantities = lookups(_QUANTITIES)


def measure(sample: Sample, options: Options) -> Measurement:
    """Measure one black area of one frame in one channel.

    Raises:
        MeasurementRefused: The surround is clipped or uneven, a companion is missing, or the light is no light.
    """
    try:
        area = find_black_area(_filled(sample.crop), float(options.margin))
    except AreaLost as lost:
        raise MeasurementRefused("another scene", str(lost)) from lost
    lights = _lights(sample, area, options)
    if lights.white <= 0:
        raise MeasurementRefused("too dark", "the surround is not brighter than the dark level")
    ratio = lights.black / lights.white
    by = {"black": 1 / lights.white, "white": -ratio / lights.white, "zero": -(1 - ratio) / lights.white}
    parts = [
        Component(f"black: {name}", 100 * by["black"] * u, "A", averages=True) for name, u in lights.black_u.items()
    ]
    parts += [
        Component(
            f"surround: {name}", 100 * abs(by["white"]) * u, "A" if name == "noise" else "B", averages=name == "noise"
        )
        for name, u in lights.white_u.items()
    ]
    name, u = lights.zero_u
    parts.append(Component(name, 100 * abs(by["zero"]) * u, "A" if name == "dark frames" else "B"))
    flags = () if name == "dark frames" else ("the dark level is the stated black level, no dark frames were used",)
    index = _reading(sample, "veiling_glare_index_iso9358", 100 * ratio, tuple(parts), REFERENCES[0], flags)
    own, own_u = float(options.black_luminance), float(options.black_luminance_uncertainty)
    flare = 100 * (ratio - own) / (1 - own)
    slope = 1 / (1 - own)
    scaled = tuple(replace(part, u=slope * part.u) for part in parts)
    chart = Component("black's own luminance", 100 * own_u * abs(ratio - 1) / (1 - own) ** 2, "B", shared="black areas")
    return Measurement((index, _reading(sample, "image_flare_iso18844", flare, (*scaled, chart), REFERENCES[1], flags)))


def _filled(crop: Crop) -> NDArray[np.float64]:
    """Return the crop's light; in a mosaic, other colours' pixels take that of the nearest own one."""
    if crop.sites is None:
        return crop.signal
    from scipy import ndimage  # noqa: PLC0415 - mosaics only

    nearest = ndimage.distance_transform_edt(~crop.sites, return_distances=False, return_indices=True)
    return np.asarray(crop.signal[tuple(nearest)])


def _own(crop: Crop, mask: NDArray[np.bool_]) -> NDArray[np.bool_]:
    return mask if crop.sites is None else mask & crop.sites


def _lights(sample: Sample, area: BlackArea, options: Options) -> _Lights:
    crop, camera = sample.crop, sample.camera
    span = camera.white_level - camera.black_level
    inner, around = _own(crop, area.inner), _own(crop, area.around)
    bright = _white(sample, options)
    clipped = float(np.mean(bright.codes[around] >= camera.white_level))
    if clipped > MOST_CLIPPED:
        found = f"{100 * clipped:.1f} % of the surround lie at the white level, at most 0.1 % may"
        step = "" if bright is not crop else "; expose less, or give the white at a shorter exposure as companion flat"
        raise MeasurementRefused("clipped", found + step)
    _refuse_uneven(bright, around)
    zero, zero_u = _zero(sample, inner)
    white, bend = surround_at(bright.signal, around, area.inner)
    scale = 1.0 if bright is crop else options.exposure_ratio
    white = (white - zero) * scale
    black = float(crop.signal[inner].mean()) - zero
    rounding = 1 / span / sqrt(12)  # of codes without noise enough to smooth it
    black_noise = float(crop.signal[inner].std(ddof=1)) / sqrt(int(inner.sum()))
    dither = float(crop.codes[inner].std()) >= 0.5
    white_noise = float(bright.signal[around].std(ddof=1)) / sqrt(int(around.sum()))
    return _Lights(
        black,
        white,
        {"noise": black_noise, **({} if dither else {"rounding": rounding})},
        {"noise": scale * white_noise, "slope": scale * bend / sqrt(3)},
        zero_u,
    )


def _white(sample: Sample, options: Options) -> Crop:
    """Return the frame that the surround is taken from."""
    if "flat" in sample.companions:
        return sample.companions["flat"][0]
    if "flat" in sample.lost_companions or options.exposure_ratio != 1:
        found = "the surround's light is to come from companion 'flat', which gave no frames"
        raise MeasurementRefused("missing companion", found)
    return sample.crop


def _zero(sample: Sample, inner: NDArray[np.bool_]) -> tuple[float, tuple[str, float]]:
    """Return the dark level as a share of the range over the stated black, and its uncertainty with its name."""
    if "dark" in sample.lost_companions:
        found = (
            f"the dark frames of '{sample.lost_companions['dark']}' cannot be used, and the dark level is most of it"
        )
        raise MeasurementRefused("missing companion", found)
    darks = sample.companions.get("dark", ())
    span = sample.camera.white_level - sample.camera.black_level
    if not darks:
        return 0.0, ("black level as stated", STATED / span / sqrt(3))
    means = [float(dark.signal[inner].mean()) for dark in darks]
    own = float(np.mean([dark.signal[inner].std() for dark in darks])) / sqrt(int(inner.sum()) * len(darks))
    drift = float(np.std(means, ddof=1)) / sqrt(len(darks)) if len(darks) > 1 else 0.0
    return float(np.mean(means)), ("dark frames", max(own, drift))


def _refuse_uneven(bright: Crop, around: NDArray[np.bool_]) -> None:
    rows, columns = (size // 2 for size in around.shape)
    quarters: Sequence[tuple[slice, slice]] = [
        (y, x) for y in (slice(None, rows), slice(rows, None)) for x in (slice(None, columns), slice(columns, None))
    ]
    means = [float(bright.signal[q][around[q]].mean()) for q in quarters if around[q].any()]
    change = (max(means) - min(means)) / max(1e-12, float(np.mean(means)))
    if change > MOST_UNEVEN:
        found = f"the surround changes by {100 * change:.0f} % over the region, at most {100 * MOST_UNEVEN:g} % may"
        raise MeasurementRefused("uneven", found)


def _reading(
    sample: Sample, name: str, value: float, parts: tuple[Component, ...], method: str, flags: tuple[str, ...]
) -> Reading:
    u = sqrt(sum(part.u**2 for part in parts))
    return Reading(sample.found.region, name, "%", value, u, parts, estimator=ESTIMATOR, method=method, flags=flags)
