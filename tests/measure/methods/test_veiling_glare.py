"""Glare that was added to a black area is read back, within 0.1 percentage point and its stated uncertainty."""

from typing import Any

import numpy as np
import pytest

from runner.capture.frame import Box, Frame, crop
from runner.errors import MeasurementRefused
from runner.measure.contract import Found, Measurement, Sample
from runner.measure.methods import veiling_glare
from runner.measure.reading import Reading
from runner.spec.model import Camera, Chart, Optics
from tests.scenes.black_areas import BlackScene

CAMERA = Camera(width=120, height=100, bit_depth=12, black_level=64, white_level=4095)
RGGB = Camera(width=120, height=100, bit_depth=12, black_level=64, white_level=4095, mosaic="RGGB")
BOX = Box(0, 0, 120, 100)


def _frame(light: np.ndarray, dark: float = 0.0) -> Frame:
    return Frame("a.tif", "", "", np.clip(np.round(64 + dark + 4031 * light), 0, 4095).astype(np.uint16))


def _measure(
    light: np.ndarray,
    *,
    dark: float = 0.0,
    darks: int = 0,
    flat: np.ndarray | None = None,
    camera: Camera = CAMERA,
    channel: str = "mono",
    lost: dict[str, str] | None = None,
    **asked: Any,
) -> Measurement:
    companions = {}
    if darks:
        rng = np.random.default_rng(99)
        frames = [_frame(0.002 * rng.standard_normal(light.shape), dark) for _ in range(darks)]
        companions["dark"] = tuple(crop(one, BOX, camera, channel) for one in frames)
    if flat is not None:
        companions["flat"] = (crop(_frame(flat, dark), BOX, camera, channel),)
    seen = crop(_frame(light, dark), BOX, camera, channel)
    found = Found("hole", BOX, frozenset({"black area"}))
    sample = Sample(found, seen, camera, Optics(), Chart(), (), companions, lost_companions=lost or {})
    return veiling_glare.measure(sample, veiling_glare.read_options(asked))


def _read(made: Measurement) -> dict[str, Reading]:
    return {r.quantity: r for r in made.readings}


@pytest.mark.parametrize("glare", [0.0, 0.005, 0.02, 0.1, 0.3])
@pytest.mark.parametrize("sigma", [0.6, 1.5])
def test_added_glare_is_read_within_a_tenth_of_a_point(glare: float, sigma: float) -> None:
    """Glare of g % of the white on a perfectly black area reads g, without noise."""
    found = _read(_measure(BlackScene(glare=glare, sigma=sigma).light()))

    for name in found:
        assert found[name].value == pytest.approx(100 * glare, abs=0.021)


def test_the_charts_own_contrast() -> None:
    """Without flare 3000:1 reads 0.0333 % and 40:1 2.5 % (contrasts of ISO 18844:2017); flare reads 0.

    Half a code is 0.0207 % of this white: without noise a level is not known better.
    """
    for contrast in (3000, 40):
        found = _read(_measure(BlackScene(glare=0.0, own=1 / contrast).light(), black_luminance=1 / contrast))

        assert found["veiling_glare_index_iso9358"].value == pytest.approx(100 / contrast, abs=0.021)
        assert found["image_flare_iso18844"].value == pytest.approx(0, abs=0.021)


def test_the_stated_uncertainty_covers_noise_dark_and_chart() -> None:
    """Over 1000 draws of noise, dark level, slope and the chart's own luminance 93 % and more lie within 2u."""
    rng = np.random.default_rng(12)
    inside, ratios = [], []
    for n in range(1000):
        glare, own = float(rng.uniform(0.002, 0.1)), 0.01 + 0.001 * float(rng.standard_normal())
        scene = BlackScene(glare=glare, own=own, noise=0.002, slope=float(rng.uniform(-0.05, 0.05)))
        with_darks = n % 2 == 0
        dark = float(rng.uniform(-40, 40)) if with_darks else float(rng.uniform(-0.5, 0.5))
        made = _measure(
            scene.light(rng),
            dark=dark,
            darks=2 if with_darks else 0,
            black_luminance=0.01,
            black_luminance_uncertainty=0.001,
        )
        one = _read(made)["image_flare_iso18844"]
        assert one.value is not None
        assert one.u is not None
        inside.append(abs(one.value - 100 * glare) <= 2 * one.u)
        ratios.append((one.value - 100 * glare) / one.u)
    assert np.mean(inside) >= 0.93
    assert 0.8 <= np.std(ratios) <= 1.25


def test_white_at_a_shorter_exposure() -> None:
    """A black exposed eight times as long as the white: the companion's white times eight is its measure."""
    dim = BlackScene(white=0.1, glare=0.0).light()
    long = 8 * BlackScene(white=0.1, glare=0.01).light()
    bright = np.minimum(long, 1.0)
    found = _read(_measure(bright, flat=dim, exposure_ratio=8))

    assert found["veiling_glare_index_iso9358"].value == pytest.approx(1.0, abs=0.05)


@pytest.mark.parametrize("channel", ["red", "green", "blue"])
def test_each_colour_of_a_mosaic(channel: str) -> None:
    """Only a colour's own pixels count: other colours' light changes nothing."""
    light = BlackScene(glare=0.03).light()
    for other, (dy, dx) in {"red": (0, 0), "blue": (1, 1)}.items():
        if other != channel:
            light[dy::2, dx::2] *= 0.7
    found = _read(_measure(light, camera=RGGB, channel=channel))

    assert found["veiling_glare_index_iso9358"].value == pytest.approx(3.0, abs=0.1)


@pytest.mark.parametrize(
    ("light", "more", "cause", "words"),
    [
        (BlackScene(white=1.2).light(), {}, "clipped", "companion flat"),
        (BlackScene(slope=0.5).light(), {}, "uneven", "the surround changes by"),
        (BlackScene(glare=0.95).light(), {}, "another scene", "no black area"),
        (BlackScene().light(), {"lost": {"dark": "darks"}}, "missing companion", "the dark frames of 'darks'"),
        (BlackScene().light(), {"exposure_ratio": 8}, "missing companion", "companion 'flat'"),
    ],
)
def test_what_cannot_be_measured(light: np.ndarray, more: dict[str, Any], cause: str, words: str) -> None:
    """A clipped or uneven surround, another scene and missing companions are refused with their cause."""
    with pytest.raises(MeasurementRefused, match=words) as refused:
        _measure(light, **more)
    assert refused.value.cause == cause
