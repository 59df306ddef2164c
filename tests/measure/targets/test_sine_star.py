"""Stars are found where they are; staged bad captures are told apart, each with its sentence."""

import re
from collections.abc import Callable

import numpy as np
import pytest
import skimage.data
from scipy.ndimage import gaussian_filter

from runner.errors import UsageError
from runner.measure.contract import Found, NotFound
from runner.measure.targets import sine_star
from runner.spec.model import Amount, Region
from tests.measure.star_samples import camera_for, frame_of, locate
from tests.scenes.gratings import GratingScene
from tests.scenes.stars import StarScene, Values


def test_a_region_that_lies_off_by_three_pixels_finds_its_star() -> None:
    """The centre is the star's, whatever the region's; places are px of the frame, pixel centres at +0.5."""
    scene = StarScene()
    camera, frame = camera_for(scene), frame_of(scene.light())
    for dx, dy in ((3.0, -3.0), (-2.0, 2.0)):
        size = Amount(290, "px"), Amount(280, "px")
        region = Region("star", (Amount(160 + dx, "px"), Amount(150 + dy, "px")), size)
        found = locate(frame, camera, region, cycles=72)
        assert isinstance(found, Found)
        assert (found.geometry["centre_x"], found.geometry["centre_y"]) == pytest.approx(scene.centre, abs=0.05)
        assert found.points["centre"][0] == (found.geometry["centre_x"], found.geometry["centre_y"])


def _stars_side_by_side(rng: np.random.Generator) -> Values:
    left, right = (StarScene(centre=(x, 150.0), outer=80, noise=0.005).light(rng) for x in (100.0, 225.0))
    return np.where(np.arange(320)[None, :] < 160, left, right)


def _chequered(rng: np.random.Generator) -> Values:
    y, x = np.indices((300, 320))
    board = np.sign(np.sin(x / 8 + y / 40)) * np.sign(np.sin(y / 8 - x / 40))
    return gaussian_filter(0.5 + 0.3 * board, 0.7) + rng.normal(0, 0.005, board.shape)


def _photograph() -> Values:
    photograph: Values = skimage.data.coins()  # type: ignore[no-untyped-call]
    return photograph[:300, :320] / 260


CHALLENGES: dict[str, tuple[Callable[[np.random.Generator], Values], str, str]] = {
    "lamp off": (lambda r: r.normal(0, 0.001, (300, 320)), "too dark", r"lies at -?0\.00 % of the range"),
    "no picture": (lambda _: np.full((300, 320), 0.5), "no picture", "every pixel of the region has the same value"),
    "no chart": (lambda r: r.normal(0.5, 0.01, (300, 320)), "no modulation", "no sharp border is in the region"),
    "wrong star": (lambda r: StarScene(cycles=36, noise=0.005).light(r), "another scene", "36 cycles, the spec states"),
    "chequers": (_chequered, "another scene", "something else with sharp borders"),
    "two stars": (_stars_side_by_side, "another scene", "something else with sharp borders"),
    "tilted": (
        lambda r: StarScene(affine=((1.12, 0), (0, 0.92)), noise=0.005).light(r),
        "outside the estimator's limits",
        r"longest diameter is 1\.22 times its shortest, at most 1\.15",
    ),
    "too far away": (
        lambda r: StarScene(outer=40, noise=0.005).light(r),
        "outside the estimator's limits",
        "at least 57 px are needed",
    ),
    "moved": (
        lambda r: StarScene(centre=(230, 149), noise=0.005).light(r),
        "off the frame",
        "from the region's border",
    ),
    "moved out": (lambda r: StarScene(centre=(310, 149), noise=0.005).light(r), "another scene", "sharp borders"),
    "wholly defocused": (
        lambda r: gaussian_filter(StarScene().light(), 9) + r.normal(0, 0.005, (300, 320)),
        "no modulation",
        "no sharp border is in the region",
    ),
    "a photograph": (lambda _: _photograph(), "another scene", "sharp borders"),
}


@pytest.mark.parametrize("name", CHALLENGES)
def test_bad_captures_are_told(name: str) -> None:
    """Each staged bad capture ends with its cause and its sentence."""
    light, cause, words = CHALLENGES[name]
    frame = frame_of(light(np.random.default_rng(7)))
    found = locate(frame, camera_for(StarScene()), cycles=72)

    assert isinstance(found, NotFound)
    assert found.cause == cause
    assert re.search(words, found.because), found.because


def test_stripes_are_no_star() -> None:
    """A sinusoidal grating in the star's place is not taken for it."""
    frame = frame_of(GratingScene((320, 300), (0.05, 0.01), noise=0.005).light(np.random.default_rng(1)))

    assert isinstance(locate(frame, camera_for(StarScene())), NotFound)


@pytest.mark.parametrize(
    ("options", "words"),
    [
        ({"cycles": 8}, "cycles is 8; allowed is a whole number from 16 to 300"),
        ({"cycles": True}, "cycles is True"),
        ({"centre_mark": "95 %"}, "centre_mark is '95 %'"),
        ({"spokes": 72}, "unknown option 'spokes'"),
    ],
)
def test_options_are_held_to_their_meaning(options: dict[str, object], words: str) -> None:
    """Numbers outside their meaning and unknown keys are told."""
    with pytest.raises(UsageError, match=words):
        sine_star.read_options(options)
