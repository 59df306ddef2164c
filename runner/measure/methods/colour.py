"""How truly a camera shows colours: CIEDE2000 to the references of a chart, white balance, chroma, hue, neutral axis.

Colours come from linear light of the three channels: sRGB as delivered (the spec's tone undone), through a stated 3 × 3
matrix, or through one fitted to these very patches, and every value says which. References are L*a*b* under a stated
illuminant; colours under another white are adapted to it. The exposure is matched to the references on the neutral
patches unless it is to count.

Values of all three channels together are those of channel green; white balance is that of red and blue against green.
Sizes are told without what noise adds to them, the largest one without what picking it adds.
"""

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field, replace
from math import sqrt
from typing import Any

import numpy as np
from numpy.typing import NDArray

from runner.capture.frame import Box, Crop
from runner.errors import MeasurementRefused
from runner.measure.colour_figures import Colours, Told, figures, ratios
from runner.measure.contract import Measurement, QuantityInfo, Sample
from runner.measure.numerics.colour_conversion import Way, left_of_fit
from runner.measure.numerics.colour_spaces import SRGB, SRGB_WHITE, WHITES, white_of, xyz_of
from runner.measure.numerics.patch_order import arrangements
from runner.measure.options import number, read_record
from runner.measure.patch_finding import boxes_of, colours
from runner.measure.patch_levels import MOST_AT_END, levels_of, part, refuse_uneven
from runner.measure.reading import Component, Curve, Reading, Refusal

Real = NDArray[np.float64]

NAME = "colour"
TITLE = "Colour"
GROUP = "tone and colour"
TOGETHER = True
NEEDS = frozenset({"colour patches"})
REFERENCES = (
    "ISO/CIE 11664-6 (CIEDE2000)",
    "ISO/CIE 11664-4 (L*a*b*)",
    "IEC 61966-2-1:1999 (sRGB)",
    "ISO 17321-1:2012 (colour characterisation)",
    "JCGM 101:2008 (uncertainty by draws)",
)
ESTIMATOR = "patch means"
TOGETHER_IN = "green"
"""Channel in which values of all channels together stand."""

LEAST_PATCHES = 6
"""Fewer tell neither the order of a chart nor a matrix."""
LEFT = 0.15
"""Share of the references that no matrix explains, above which they are not those of this chart."""
BETTER = 0.5
"""Of that share: what another way to lie must leave to be told."""
DIM = 0.02
"""Light of a patch, share of the range, below which its evenness is not looked at."""
SRGB_WAY, STATED, FITTED = "srgb", "matrix", "fitted"
MATCHED, DELIVERED = "matched", "as delivered"

_SIZES = {"mean_ciede2000": "mean", "worst_ciede2000": "worst", "hue_error": "hue", "neutral_axis_error": "neutral"}
_QUANTITIES: Mapping[str, QuantityInfo] = {
    "mean_ciede2000": QuantityInfo("1", "Mean CIEDE2000 of all patches to their references.", least=0),
    "worst_ciede2000": QuantityInfo("1", "Largest CIEDE2000 of any patch.", least=0),
    "ciede2000": QuantityInfo("1", "CIEDE2000 of one patch (`patch`, counted from 1).", {"patch": "1"}, least=0),
    "hue_error": QuantityInfo("deg", "Mean size of the turn in hue of patches with chroma above 10.", least=0),
    "neutral_axis_error": QuantityInfo("1", "Mean chroma off the references of neutral patches.", least=0),
    "chroma_ratio": QuantityInfo("%", "Chroma of the patches that have a hue over that of their references.", least=0),
    "white_balance_error": QuantityInfo(
        "%", "Red (or blue) over green on the neutral patches in linear sRGB, off that of the references."
    ),
}


@dataclass(frozen=True)
class Options:
    """What the references are, and how light becomes colour."""

    lab: Sequence[Sequence[float]] = field(
        default=(), metadata={"sentence": "L*, a*, b* of every patch, row by row from the upper left."}
    )
    illuminant: str | Sequence[float] = field(
        default="",
        metadata={
            "sentence": f"What lab: holds under: {', '.join(WHITES)}, or a chromaticity [x, y]; it must be stated."
        },
    )
    lab_uncertainty: float = field(
        default=0.0, metadata={"sentence": "Standard uncertainty of each of these numbers, e.g. 0.3."}
    )
    light_uncertainty: float | str = field(
        default=0.0, metadata={"sentence": "Standard uncertainty of each patch's illumination, as a share, e.g. 2 %."}
    )
    conversion: str = field(
        default=SRGB_WAY,
        metadata={
            "sentence": "`srgb`: the camera delivers sRGB; `matrix`: through matrix:; `fitted`: through one fitted to "
            "these patches, which hides what it can."
        },
    )
    matrix: Sequence[Sequence[float]] | None = field(
        default=None, metadata={"sentence": "For conversion: matrix, three rows that take R, G, B to X, Y, Z."}
    )
    matrix_illuminant: str | Sequence[float] | None = field(
        default=None, metadata={"sentence": "White that the matrix's values are seen under; without it, that of lab:."}
    )
    adaptation: str = field(
        default="bradford", metadata={"sentence": "From the camera's white to that of lab:, `bradford` or `none`."}
    )
    exposure: str = field(
        default=MATCHED,
        metadata={"sentence": "`matched` to the references on the neutral patches, or `as delivered`: then it counts."},
    )

    def __post_init__(self) -> None:
        """Turn names into numbers and keep each option inside its meaning."""
        object.__setattr__(self, "lab", colours(self.lab))
        if len(self.lab) < LEAST_PATCHES:
            raise ValueError(f"lab names {len(self.lab)} patches, at least {LEAST_PATCHES} are needed")
        if self.illuminant == "":
            raise ValueError(f"the illuminant of lab: is not stated; allowed are {', '.join(WHITES)}, or [x, y]")
        white("illuminant", self.illuminant)
        if self.matrix_illuminant is not None:
            white("matrix_illuminant", self.matrix_illuminant)
        object.__setattr__(self, "lab_uncertainty", number("lab_uncertainty", self.lab_uncertainty, "", 0.0, 10.0))
        object.__setattr__(
            self, "light_uncertainty", number("light_uncertainty", self.light_uncertainty, "%", 0.0, 0.3)
        )
        for name, allowed in (
            ("conversion", (SRGB_WAY, STATED, FITTED)),
            ("adaptation", ("bradford", "none")),
            ("exposure", (MATCHED, DELIVERED)),
        ):
            if getattr(self, name) not in allowed:
                raise ValueError(f"{name} is {getattr(self, name)!r}; allowed are {', '.join(allowed)}")
        if (self.conversion == STATED) != (self.matrix is not None):
            raise ValueError("conversion: matrix and matrix: belong together")
        if self.matrix is not None:
            object.__setattr__(self, "matrix", _matrix(self.matrix))


def white(name: str, asked: object) -> Real:
    """Return X, Y, Z of an illuminant's name or chromaticity.

    Raises:
        ValueError: It is neither.
    """
    if isinstance(asked, str) and asked in WHITES:
        return np.array(WHITES[asked])
    good = isinstance(asked, Sequence) and not isinstance(asked, str) and len(asked) == 2
    if good and all(isinstance(part, float) and 0.05 < part < 0.8 for part in asked):  # type: ignore[attr-defined]
        return white_of(*asked)  # type: ignore[misc]
    raise ValueError(f"{name} is {asked!r}; allowed are {', '.join(WHITES)}, or a chromaticity [x, y]")


def _matrix(asked: object) -> tuple[tuple[float, ...], ...]:
    try:
        made = np.array(asked, dtype=np.float64)
    except (TypeError, ValueError) as error:
        raise ValueError(f"matrix is {asked!r}; allowed are three rows of three numbers") from error
    if made.shape != (3, 3) or abs(np.linalg.det(made)) < 1e-9:
        raise ValueError(f"matrix is {asked!r}; allowed are three rows of three numbers that can be inverted")
    return tuple(tuple(float(part) for part in row) for row in made)


def read_options(asked: Mapping[str, Any]) -> Options:
    """Read the options from a spec's keys.

    Raises:
        UsageError: A key or value is not allowed.
    """
    return read_record(Options, asked)


def quantity(name: str) -> QuantityInfo | None:
    """Return what a quantity name means, or None."""
    return _QUANTITIES.get(name)


def quantities() -> Mapping[str, QuantityInfo]:
    """Return the quantities."""
    return _QUANTITIES


def measure(sample: Sample, options: Options) -> Measurement:
    """Measure the patches over all frames of a capture.

    Raises:
        MeasurementRefused: Frames without colour, clipped or uneven patches, another chart or one that lies otherwise.
    """
    channel = sample.crop.channel
    if channel == "mono":
        raise MeasurementRefused("not defined", "frames of one channel have no colours")
    boxes = boxes_of(sample.found.points["patches"])
    if len(boxes) != len(options.lab):
        found = f"lab: names {len(options.lab)} patches, the chart has {len(boxes)}"
        raise MeasurementRefused("outside the estimator's limits", found)
    colour = _colours(sample, options, boxes)
    way = _way(options, white("illuminant", options.illuminant))
    told = ratios(colour, way) | (figures(colour, way) if channel == TOGETHER_IN else {})
    flags = (_words(options), *_at_black(sample, boxes))
    curves = (_curve(sample, told, len(boxes)),) if channel == TOGETHER_IN else ()
    return Measurement(tuple(_readings(sample, options, told, flags)), curves)


def _colours(sample: Sample, options: Options, boxes: Sequence[Box]) -> Colours:
    lights = [_lights(sample, name, boxes) for name in sample.camera.channels]
    rgb, u = (np.column_stack([of[n] for of in lights]) for n in (0, 1))
    rgb = rgb / _shading(sample, boxes)
    lab = np.array(options.lab)
    _refuse_order(sample, rgb, xyz_of(lab, white("illuminant", options.illuminant)))
    return Colours(rgb, u, lab, options.lab_uncertainty, float(options.light_uncertainty))


def _curve(sample: Sample, told: Mapping[str, Told], count: int) -> Curve:
    """Return the difference of every patch over its number."""
    each = [told[f"patch {n}"] for n in range(1, count + 1)]
    x = tuple(float(n) for n in range(1, count + 1))
    y, u = (tuple(float(f"{v:.6g}") for v in of) for of in ([t.value for t in each], [_u(t) for t in each]))
    return Curve(sample.found.region, "ciede2000", x, y, u, "1", "1", estimator=ESTIMATOR)


def _way(options: Options, target: Real) -> Way:
    adapt, matched = options.adaptation == "bradford", options.exposure == MATCHED
    if options.conversion == FITTED:
        return Way(None, target, target)
    if options.conversion == SRGB_WAY:
        return Way(SRGB, SRGB_WHITE, target, adapt, matched)
    own = target if options.matrix_illuminant is None else white("matrix_illuminant", options.matrix_illuminant)
    return Way(np.array(options.matrix), own, target, adapt, matched)


def _lights(sample: Sample, channel: str, boxes: Sequence[Box]) -> tuple[Real, Real]:
    """Return light and its u of every patch in one channel, means over all frames.

    Raises:
        MeasurementRefused: A patch is clipped or not even.
    """
    crops = sample.channels[channel]
    levels = [levels_of(crop, boxes) for crop in crops]
    clipped = [n for n in range(len(boxes)) if any(of[n].at_white > MOST_AT_END for of in levels)]
    if clipped:
        numbers = ", ".join(str(n + 1) for n in clipped)
        found = f"{len(clipped)} of {len(boxes)} patches lie at the white level in {channel}: {numbers}"
        raise MeasurementRefused("clipped", found, next_step="give less light")
    lit = [n for n, level in enumerate(levels[0]) if level.light > DIM]
    try:
        refuse_uneven([levels[0][n] if n in lit else replace(levels[0][n], uneven=0.0) for n in range(len(boxes))])
    except MeasurementRefused as refused:
        raise MeasurementRefused(refused.cause, f"in {channel}: {refused}") from refused
    return _means(crops, boxes, [level.light_u for level in levels[0]])


def _means(crops: Sequence[Crop], boxes: Sequence[Box], single: Sequence[float]) -> tuple[Real, Real]:
    """Return means over frames; what stays from frame to frame is seen as scatter of the mean frame's pixels."""
    if len(crops) == 1:
        return np.array([level.light for level in levels_of(crops[0], boxes)]), np.array(single)
    light, u = [], []
    for box, own_u in zip(boxes, single, strict=True):
        cuts = [part(crop, box) for crop in crops]
        mean = np.mean([cut.signal if cut.sites is None else cut.signal[cut.sites] for cut in cuts], axis=0).ravel()
        light.append(float(mean.mean()))
        scatter = float(mean.std(ddof=1)) / sqrt(mean.size)
        u.append(scatter if scatter > 0 else own_u)
    return np.array(light), np.array(u)


def _shading(sample: Sample, boxes: Sequence[Box]) -> Real:
    """Return the light at every patch over its mean, from green of the companion `flat`; 1 without one."""
    if "flat" in sample.lost_companions:
        found = f"the even field of '{sample.lost_companions['flat']}' cannot be used"
        raise MeasurementRefused("missing companion", found)
    flats = sample.companion_channels.get("flat", {}).get(TOGETHER_IN, ())
    if not flats:
        return np.ones((len(boxes), 1))
    light = np.mean([[level.light for level in levels_of(flat, boxes)] for flat in flats], axis=0)
    if light.min() < 0.01:
        found = f"the even field lies {100 * float(light.min()):.2f} % of the range over black at patch "
        raise MeasurementRefused("missing companion", f"{found}{int(light.argmin()) + 1}", allowed="1 % is needed")
    return np.asarray(light / light.mean())[:, None]


def _refuse_order(sample: Sample, rgb: Real, reference: Real) -> None:
    """Refuse a chart whose colours are not the stated ones in the stated order, as far as any matrix could tell.

    Raises:
        MeasurementRefused: `another scene`.
    """
    left = left_of_fit(rgb, reference)
    columns, rows = (int(sample.found.geometry.get(name, 0)) for name in ("columns", "rows"))
    if columns * rows == len(rgb):
        others = {words: left_of_fit(rgb, reference[list(order)]) for words, order in arrangements(columns, rows)}
        words = min(others, key=lambda of: others[of])
        if others[words] < min(BETTER * left, LEFT):
            raise MeasurementRefused("another scene", f"the patches stand as if the chart were {words}")
    if left > LEFT:
        found = (
            f"the patches are not those of lab:, or in another order: {100 * left:.0f} % of their colours' scatter is "
            "explained by no matrix"
        )
        raise MeasurementRefused("another scene", found, allowed=f"at most {100 * LEFT:g} % may be")


# ---- readings


def _readings(sample: Sample, options: Options, told: Mapping[str, Told], words: tuple[str, ...]) -> Iterator[Reading]:
    channel = sample.crop.channel
    joint = channel == TOGETHER_IN
    for name, key in _SIZES.items():
        if joint:
            yield replace(_of(_blank(sample, name), told.get(key), 1.0, "such"), flags=words)
    if joint:
        yield replace(_of(_blank(sample, "chroma_ratio"), told.get("chroma"), 100.0, "coloured"), flags=words)
    else:
        balance = _blank(sample, "white_balance_error")
        yield replace(_of(balance, told.get(channel), 100.0, "neutral", less=100.0), flags=words)
    given = {"white_balance_error"} if not joint else {*_SIZES, "chroma_ratio"}
    for wanted in sample.wanted:
        blank = replace(_blank(sample, wanted.quantity), parameters=wanted.parameters, part=wanted.part)
        if wanted.quantity in given:
            continue
        if joint != (wanted.quantity != "white_balance_error"):
            yield replace(blank, refusal=Refusal("not defined", _elsewhere(joint=joint)))
        else:
            place = wanted.at["patch"]
            one = told.get(f"patch {place:.0f}") if place == round(place) else None
            because = f"there is no patch {place:g}, there are {len(options.lab)}"
            yield _of(blank, one, 1.0, "") if one else replace(blank, refusal=Refusal("not defined", because))


def _elsewhere(*, joint: bool) -> str:
    if joint:
        return "green is what red and blue are held against; write channel: red or channel: blue"
    return f"it is one value of all channels together; write channel: {TOGETHER_IN}"


def _at_black(sample: Sample, boxes: Sequence[Box]) -> Iterator[str]:
    """Say which patches lie at code 0, where less light reads the same: colours beyond what the camera delivers."""
    for channel in sample.camera.channels:
        levels = levels_of(sample.channels[channel][0], boxes)
        numbers = ", ".join(str(n) for n, level in enumerate(levels, 1) if level.at_black > MOST_AT_END)
        if numbers:
            yield f"at code 0 in {channel}: patch {numbers}"


def _words(options: Options) -> str:
    """Say how light became colour."""

    def named(illuminant: object) -> str:
        return str(illuminant) if isinstance(illuminant, str) else f"x, y = {illuminant[0]:g}, {illuminant[1]:g}"  # type: ignore[index]

    under = f"references under {named(options.illuminant)}"
    if options.conversion == FITTED:
        return f"{under}; a matrix was fitted to these patches, which hides what it can"
    how = "sRGB as delivered" if options.conversion == SRGB_WAY else "through the stated matrix"
    own = "D65" if options.conversion == SRGB_WAY else named(options.matrix_illuminant or options.illuminant)
    adapted = f"from {own} by Bradford's adaptation" if options.adaptation == "bradford" else "not adapted"
    exposed = "exposure matched" if options.exposure == MATCHED else "exposure as delivered"
    return f"{under}; {how}, {adapted}; {exposed}"


def _u(told: Told) -> float:
    return sqrt(sum(u**2 for u in told.parts.values()))


def _of(blank: Reading, told: Told | None, scale: float, kind: str, less: float = 0.0) -> Reading:
    if told is None:
        return replace(blank, refusal=Refusal("not defined", f"the references hold no {kind} patches"))
    parts = tuple(
        Component(
            name,
            scale * u,
            "A" if name == "noise" else "B",
            shared="colour references" if name == "references" else None,
        )
        for name, u in told.parts.items()
        if u > 0
    )
    return replace(blank, value=scale * told.value - less, u=scale * _u(told), components=parts)


def _blank(sample: Sample, name: str) -> Reading:
    unit = _QUANTITIES[name].unit
    method = REFERENCES[0] if "ciede2000" in name else REFERENCES[1]
    return Reading(sample.found.region, name, unit, None, None, estimator=ESTIMATOR, method=method)
