"""Takes closed-form edge scenes through the edge method as a session would, for the tests beside this file."""

from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from runner.capture.frame import Box, Crop, Frame, crop, linearise
from runner.measure.contract import Found, Sample, Wanted
from runner.measure.methods import edge_response
from runner.measure.numerics.edge_curves import Curves
from runner.measure.numerics.edge_fit import fit_edge
from runner.measure.reading import Reading
from runner.spec.model import Amount, Camera, Chart, Optics, Tone
from tests.scenes.edges import EdgeScene

FREQUENCIES = (0.1, 0.25, 0.5)
"""Frequencies at which the modulation is asked for, cy/px."""


def camera_of(scene: EdgeScene) -> Camera:
    """Return the camera that a scene was rendered for."""
    tone = (
        Tone() if scene.tone == "linear" else Tone("srgb") if scene.tone == "srgb" else Tone("gamma", float(scene.tone))
    )
    width, height = scene.size
    return Camera(width, height, scene.bits, scene.black, scene.white, fill=scene.fill, tone=tone)


def cropped(codes: NDArray[Any], camera: Camera, channel: str = "mono") -> Crop:
    """Return the whole of a rendered picture as one crop, or one colour channel of it."""
    frame = Frame("scene.tif", "0" * 64, "1" * 64, codes)
    return crop(frame, Box(0, 0, codes.shape[1], codes.shape[0]), camera, channel)


def fitted(scene: EdgeScene, codes: NDArray[Any] | None = None, **options: Any) -> Curves:
    """Fit one rendered scene and return its curves; options are those of `fit_edge`."""
    signal = linearise(scene.render() if codes is None else codes, camera_of(scene))
    return Curves(fit_edge(signal, **options))


def at(quantity: str, frequency: float, estimator: str | None = None) -> Wanted:
    """Return a wish for a quantity at a frequency, cy/px."""
    return Wanted(quantity, {"frequency": Amount(frequency, "cy/px")}, {"frequency": frequency}, estimator=estimator)


def wishes(estimator: str | None = None) -> tuple[Wanted, ...]:
    """Return the wishes of the accuracy tables: mtf at three frequencies, mtf50."""
    return (*(at("mtf", f, estimator) for f in FREQUENCIES), Wanted("mtf50", {}, {}, estimator=estimator))


def sample_of(
    scene: EdgeScene,
    codes: NDArray[Any] | None = None,
    *,
    wanted: Sequence[Wanted] = (),
    flats: Sequence[NDArray[Any]] = (),
    chart: Chart | None = None,
    mosaic: str = "none",
    channel: str = "mono",
) -> Sample:
    """Return one rendered scene as a method would get it; `measure` tells the arguments."""
    camera = replace(camera_of(scene), mosaic=mosaic)
    return Sample(
        Found("edge", Box(0, 0, *scene.size), frozenset({"edge"})),
        cropped(scene.render() if codes is None else codes, camera, channel),
        camera,
        Optics(),
        chart if chart is not None else Chart(),
        tuple(wanted) or wishes(),
        {"flat": tuple(cropped(flat, camera, channel) for flat in flats)} if flats else {},
    )


def measure(
    scene: EdgeScene,
    codes: NDArray[Any] | None = None,
    *,
    wanted: Sequence[Wanted] = (),
    flats: Sequence[NDArray[Any]] = (),
    chart: Chart | None = None,
    mosaic: str = "none",
    channel: str = "mono",
    **options: Any,
) -> Mapping[str, Reading]:
    """Measure one rendered scene and return its readings by label, e.g. `mtf at 0.25 cy/px`.

    Labels of the standard's estimator have ` (iso)` added.

    Args:
        scene: What was rendered.
        codes: Its codes; None renders it without noise.
        wanted: Wishes; none asks for `wishes()`.
        flats: Codes of flat frames, offered as the companion `flat`.
        chart: The chart; None states nothing of it.
        mosaic: Order of the colour filters.
        channel: Colour channel to measure.
        options: Options of the method.
    """
    sample = sample_of(scene, codes, wanted=wanted, flats=flats, chart=chart, mosaic=mosaic, channel=channel)
    readings = edge_response.measure(sample, edge_response.read_options(options)).readings
    return {r.label + (" (iso)" if r.estimator == edge_response.ISO else ""): r for r in readings}


def value_of(reading: Reading) -> float:
    """Return a reading's value; a refused one fails with its reason."""
    if reading.value is None:
        raise AssertionError(f"{reading.label}: {reading.refusal or reading.bound}")
    return reading.value


def mtf_errors(scene: EdgeScene, readings: Mapping[str, Reading]) -> tuple[float, NDArray[np.float64]]:
    """Return (relative error of mtf50, errors of mtf at the three frequencies)."""
    measured = np.array([value_of(readings[f"mtf at {f:g} cy/px"]) for f in FREQUENCIES])
    return value_of(readings["mtf50"]) / scene.mtf50() - 1, measured - scene.mtf(FREQUENCIES)
