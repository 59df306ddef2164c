"""Transfer function, line spread and what goes with them, from one slanted edge.

Frequencies run along the edge's normal, in cycles per pixel. The program's own estimator fits edge and line spread
jointly (`numerics.edge_fit`); `iso 12233:2014` follows the standard's letter, for comparison with other laboratories.
"""

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field, replace
from math import sqrt
from typing import Any

import numpy as np

from runner.capture.frame import Crop, linearise
from runner.errors import MeasurementRefused
from runner.measure import edge_readings
from runner.measure.contract import Measurement, QuantityInfo, Sample, Wanted
from runner.measure.numerics.edge_checks import check
from runner.measure.numerics.edge_curves import Curves
from runner.measure.numerics.edge_fit import fit_edge
from runner.measure.numerics.edge_rounding import rounding
from runner.measure.numerics.edge_shading import Flat, smooth_flat
from runner.measure.options import number, reader
from runner.measure.reading import Component, Curve, Reading, Refusal

NAME = "edge response"
TITLE = "Edge response"
GROUP = "transfer function"
NEEDS = frozenset({"edge"})
REFERENCES = (
    "ISO 12233:2014 6.2 (edge-based spatial frequency response)",
    "Golub and Pereyra, SIAM J. Numer. Anal. 10 (1973) 413, doi:10.1137/0710036",
    "Patterson and Thompson, Biometrika 58 (1971) 545, doi:10.1093/biomet/58.3.545",
    "JCGM 100:2008, JCGM 101:2008 (uncertainty)",
)

JOINT_FIT = edge_readings.ESTIMATOR
ISO = "iso 12233:2014"
ESTIMATORS = (JOINT_FIT, ISO)
FROM = "from"

MOST_CLIPPED = 0.001
"""Share of the region's pixels at the white level or the black end: hot and dead pixels stay below, a clipped plateau
(+35 % in MTF50) does not."""
MOST_CLAMPED = 0.01
"""The same at code 0 of a camera without a black level: noise of a level two deviations above it reaches 1 %; more
bends the dark side of the edge (+2 % in MTF50 at a level of zero)."""
MOST_CUT = 0.05
"""Share of the region at its own highest code: noise of 1 DN or more leaves one in a hundred there."""
DARKEST = 4.0
"""DN over black that the brightest per cent of the region must reach: below, rounding makes the picture."""

quantity = edge_readings.quantity
quantities = edge_readings.quantities


@dataclass(frozen=True)
class Options:
    """How an edge is measured."""

    estimator: str = field(
        default=JOINT_FIT, metadata={"sentence": "'joint fit' (unbiased), or 'iso 12233:2014' (the standard's letter)."}
    )
    order: int = field(default=1, metadata={"sentence": "Order of the polynomial that the edge follows, 1 to 5."})
    shading: str | Mapping[str, str] = field(
        default="none",
        metadata={"sentence": "'none', 'fitted' (a linear gradient), or {from: ROLE} (divide by that companion)."},
    )
    search: float | str = field(
        default=10.0, metadata={"sentence": "How far the target may move a region to its edge, px."}
    )

    def __post_init__(self) -> None:
        """Keep each option inside its meaning."""
        if self.estimator not in ESTIMATORS:
            raise ValueError(f"estimator is {self.estimator!r}; allowed are: {', '.join(ESTIMATORS)}")
        if isinstance(self.order, bool) or not isinstance(self.order, int) or not 1 <= self.order <= 5:
            raise ValueError(f"order is {self.order!r}; allowed is a whole number from 1 to 5")
        object.__setattr__(self, "search", number("search", self.search, "px", 0.0, 200.0))
        if isinstance(self.shading, Mapping):
            role = self.shading.get(FROM)
            good = set(self.shading) == {FROM} and isinstance(role, str) and bool(role)
        else:
            good = self.shading in ("none", "fitted")  # no set: a list may stand here
        if not good:
            raise ValueError(f"shading is {self.shading!r}; allowed are: none, fitted, {{from: ROLE}}")


read_options = reader(Options)


def measure(sample: Sample, options: Options) -> Measurement:
    """Measure one edge of one frame.

    Raises:
        MeasurementRefused: The region as a whole cannot be measured.
    """
    refuse_exposure(sample)
    signal, flat = _shading_undone(sample, options)
    standard = tuple(Wanted(name, {}, {}) for name in edge_readings.STANDARD)
    asked = _once((*sample.wanted, *standard), options.estimator)
    by_iso = [w for w in asked if (w.estimator or options.estimator) == ISO and _iso_yields(w.quantity)]
    refused = [w for w in asked if w.estimator == ISO and not _iso_yields(w.quantity)]
    by_fit = [w for w in asked if w not in by_iso and w not in refused]
    readings: list[Reading] = [_iso_refusal(sample, w) for w in refused]
    curves: tuple[Curve, ...] = ()
    noise: float | None = None
    try:
        edge = _fitted(sample, options, signal, flat)
    except MeasurementRefused as error:
        if not by_iso:
            raise
        readings += [_blank(sample, w, JOINT_FIT, Refusal(error.cause, str(error))) for w in by_fit]
    else:
        found = edge.curves.fit.noise
        noise = sqrt((found.low + found.high) / 2)
        readings += [edge_readings.read(edge, w) for w in by_fit]
        curves = edge_readings.curves_of(edge)
    if by_iso:
        measured = _by_iso(sample, signal, by_iso, noise)
        readings += measured.readings
        curves += measured.curves
    return Measurement(tuple(readings), curves)


def _fitted(sample: Sample, options: Options, signal: Any, flat: Flat | None) -> edge_readings.Edge:
    camera, crop = sample.camera, sample.crop
    fit = fit_edge(
        signal,
        order=options.order,
        shading="fitted" if options.shading == "fitted" else "none",
        noise_floor=1 / (camera.white_level - camera.black_level) / sqrt(12),
        aperture=sqrt(camera.fill),
        sites=crop.sites,
    )
    curves = Curves(fit)
    band, straight = check(curves, shading_known=fit.shading)
    moved = rounding(fit, (_code(crop, fit.parts.low), _code(crop, fit.parts.low + fit.parts.rise)))
    of_flat = None if flat is None else flat.covariance_of(fit, signal)
    return edge_readings.Edge(sample, curves, band, straight, of_flat, moved)


def _code(crop: Crop, level: float) -> float:
    """Return the width of one code at a level, fraction of range; a tone curve makes it differ from level to level."""
    nearest = int(crop.codes.flat[int(np.argmin(np.abs(crop.signal - level)))])
    one, next_one = linearise(np.array([nearest, nearest + 1]), crop.camera)
    return float(next_one - one)


def refuse_exposure(sample: Sample) -> None:
    """Refuse a region that is clipped, or dark to its last code, before anything is fitted.

    Raises:
        MeasurementRefused: `clipped`, `too bright`, `too dark` or `no picture`.
    """
    camera = sample.camera
    crop = sample.crop
    codes, signal = (each if crop.sites is None else each[crop.sites] for each in (crop.codes, crop.signal))
    span = camera.white_level - camera.black_level
    white = float(np.mean(codes >= camera.white_level))
    black = float(np.mean(codes <= 0))
    if white > 0.5:
        raise MeasurementRefused(
            "too bright", f"{100 * white:.0f} % of the region lies at the white level", next_step="give less light"
        )
    if codes.min() == codes.max():
        raise MeasurementRefused("no picture", f"every pixel of the region has the code {codes.flat[0]}")
    most_black = MOST_CLIPPED if camera.black_level > 0 else MOST_CLAMPED
    for share, most, end in ((white, MOST_CLIPPED, "white level"), (black, most_black, "black end")):
        if share > most:
            raise MeasurementRefused(
                "clipped",
                f"{100 * share:.2f} % of the region's pixels lie at the {end}",
                allowed=f"at most {100 * most:g} %",
                next_step="give less light" if end == "white level" else "raise the black level",
            )
    _refuse_cut_plateau(codes)
    bright = float(np.quantile(signal, 0.99))
    if bright * span < DARKEST:
        raise MeasurementRefused(
            "too dark",
            f"the brightest part of the region lies {bright * span:.1f} DN over black",
            allowed=f"at least {DARKEST:g} DN",
            next_step="give more light",
        )


def _refuse_cut_plateau(codes: Any) -> None:
    """Refuse a bright level that is cut below the stated white level: one single code where the dark side has noise."""
    top = codes.max()
    share = float(np.mean(codes == top))
    dark = codes[codes <= np.quantile(codes, 0.25)].astype(np.float64)
    noise = 1.4826 * float(np.median(np.abs(dark - np.median(dark))))
    if share > MOST_CUT and noise > 1:
        raise MeasurementRefused(
            "clipped",
            f"{100 * share:.0f} % of the region's pixels have its highest code, {top}, while its dark side has noise",
            allowed=f"at most {100 * MOST_CUT:g} %",
            next_step="state the true white level, and give less light",
        )


def _shading_undone(sample: Sample, options: Options) -> tuple[Any, Flat | None]:
    if not isinstance(options.shading, Mapping):
        return sample.crop.signal, None
    role = options.shading[FROM]
    crops = sample.companions.get(role, ())
    if not crops:
        raise MeasurementRefused(
            "missing companion",
            f"the companion '{role}' that shading is taken from is missing or unusable",
            next_step=f"name it under 'uses' ({role}: CAPTURE) and capture it",
        )
    flat = smooth_flat([crop.signal for crop in crops], sample.crop.sites)
    return sample.crop.signal / flat.field, flat


def _once(wishes: Iterable[Wanted], estimator: str) -> tuple[Wanted, ...]:
    """Drop wishes that come twice: asked for by several limits, or asked for and standard too."""
    kept: dict[tuple[object, ...], Wanted] = {}
    for wanted in wishes:
        parameters = tuple(sorted((k, a.value, a.unit) for k, a in wanted.parameters.items()))
        kept.setdefault((wanted.quantity, parameters, wanted.part, wanted.estimator or estimator), wanted)
    return tuple(kept.values())


def _blank(sample: Sample, wanted: Wanted, estimator: str, refusal: Refusal | None = None) -> Reading:
    info: QuantityInfo | None = quantity(wanted.quantity)
    return Reading(
        sample.found.region,
        wanted.quantity,
        info.unit if info is not None else "1",
        None,
        None,
        parameters=wanted.parameters,
        part=wanted.part,
        estimator=estimator,
        method=REFERENCES[0] if estimator == ISO else edge_readings.METHOD,
        refusal=refusal,
    )


def _iso_yields(name: str) -> bool:
    return name.startswith("mtf") and quantity(name) is not None


def _iso_refusal(sample: Sample, wanted: Wanted) -> Reading:
    because = f"'{ISO}' defines no {wanted.quantity}; it yields mtf and mtf1 to mtf99"
    return _blank(sample, wanted, ISO, Refusal("not defined", because))


def _by_iso(sample: Sample, signal: Any, wanted: list[Wanted], noise: float | None) -> Measurement:
    from runner.measure.numerics import iso12233  # noqa: PLC0415 - only specs that ask for it need it

    if sample.crop.sites is not None:
        because = f"'{ISO}' takes whole rows, which a mosaic's channel has not; '{JOINT_FIT}' takes pixels as they lie"
        refusal = Refusal("outside the estimator's limits", because)
        return Measurement(tuple(_blank(sample, w, ISO, refusal) for w in wanted))
    try:
        found = iso12233.estimate(signal, noise=noise)
    except MeasurementRefused as error:
        refusal = Refusal(error.cause, str(error))
        return Measurement(tuple(_blank(sample, w, ISO, refusal) for w in wanted))
    readings = tuple(_iso_reading(sample, w, found) for w in wanted)
    points = [tuple(float(v) for v in each) for each in (found.frequency, found.modulation, found.u)]
    curve = Curve(sample.found.region, "mtf", points[0], points[1], points[2], "cy/px", "1", estimator=ISO)
    return Measurement(readings, (curve,))


def _iso_reading(sample: Sample, wanted: Wanted, found: Any) -> Reading:
    blank = _blank(sample, wanted, ISO)
    if wanted.part == "lens":
        refusal = Refusal("not defined", f"'{ISO}' measures the whole system; 'joint fit' divides pixel and chart out")
        return _blank(sample, wanted, ISO, refusal)
    try:
        if wanted.quantity == "mtf":
            at = found.mtf_at(wanted.at["frequency"])
        else:
            at = found.mtf_crossing(int(wanted.quantity.removeprefix("mtf")) / 100)
    except MeasurementRefused as error:
        return _blank(sample, wanted, ISO, Refusal(error.cause, str(error)))
    if at is None:
        return replace(blank, bound=("above", float(found.frequency[-1])))
    value, u = (float(v) for v in at)
    parts = (Component("noise", u, "A", averages=True),)
    return replace(blank, value=value, u=u, components=parts)
