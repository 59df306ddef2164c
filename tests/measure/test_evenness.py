"""Refusing what is no even field: lit darks and pictures, with the sentences that say so."""

from dataclasses import replace

import numpy as np
import pytest

from runner.errors import MeasurementRefused
from runner.measure import planes
from runner.measure.evenness import refuse_uneven
from tests.measure.flat_samples import camera, codes, sample


def _stack(light: np.ndarray, *, lit: bool, processing: tuple[str, ...] = ()) -> planes.Stack:
    frame = codes(light)
    return planes.stack(sample([frame], replace(camera(frame), processing=processing), lit=lit).frames)


def _patches(contrast: float) -> np.ndarray:
    rng = np.random.default_rng(5)
    light = np.kron(rng.uniform(1 - contrast, 1 + contrast, (16, 20)), np.ones((20, 20)))
    return np.asarray(6000 * light + rng.normal(0, 100, light.shape))


def test_a_dark_with_light_is_refused() -> None:
    """An even field at 40 % of the range given as a dark: it has no hot pixels, but it is no dark."""
    light = np.random.default_rng(6).normal(26000, 100, (120, 160))
    refuse_uneven(_stack(light, lit=True), lit=True)

    with pytest.raises(MeasurementRefused, match=r"lies 40 % of the range over the black level.*shut out the light"):
        refuse_uneven(_stack(light, lit=False), lit=False)


@pytest.mark.parametrize("lit", [True, False])
def test_a_picture_is_refused(lit: bool) -> None:
    """Patches that differ by ± 50 % are a picture of something, as a flat and as a dark."""
    with pytest.raises(MeasurementRefused, match="is a picture of something") as refused:
        refuse_uneven(_stack(_patches(0.5), lit=lit), lit=lit)
    assert refused.value.cause == "another scene"


def test_processed_frames_may_have_twice_as_much() -> None:
    """Noise that a 7 × 7 filter has gone over looks like a picture, but not where the spec states the processing."""
    from scipy import ndimage

    noise = ndimage.uniform_filter(np.random.default_rng(7).normal(0, 400, (480, 640)), 7, mode="wrap")

    with pytest.raises(MeasurementRefused, match="picture"):
        refuse_uneven(_stack(9000 + noise, lit=True), lit=True)
    refuse_uneven(_stack(9000 + noise, lit=True, processing=("denoised",)), lit=True)


@pytest.mark.parametrize("channel", ["red", "green", "blue"])
def test_every_colour_of_a_mosaic_is_looked_at(channel: str) -> None:
    """Even darks of a mosaic pass in each colour, green with its two sites too."""
    frame = codes(np.random.default_rng(7).normal(0, 20, (120, 160)))
    of = replace(camera(frame), mosaic="RGGB")

    refuse_uneven(planes.stack(sample([frame], of, lit=False, channel=channel).frames), lit=False)
