"""Groups of bars gathered into a transfer function: closed form, shared parts, what is refused."""

import numpy as np
import pytest

from runner.errors import MeasurementRefused, UsageError
from runner.measure.contract import NotFound, Scene, Step, Wanted
from runner.measure.methods import coltman_conversion as method
from runner.measure.reading import Component, Reading, Refusal
from runner.spec.model import Amount, Camera, Chart, Optics
from tests.scenes.bars import SquareScene

CAMERA = Camera(width=300, height=200, bit_depth=12, black_level=64, white_level=4095)
FREQUENCIES = tuple(float(f) for f in 0.45 / 2 ** (np.arange(12) / 2))


def _group(region: str, f: float, sigma: float = 0.6) -> tuple[Reading, Reading]:
    scene = SquareScene(frequency=(f, 0.0), sigma=sigma)
    value = scene.seen_contrast() / scene.contrast
    parts = (
        Component("noise", 0.001, "A"),
        Component("target's contrast", 0.01 * value, "B", shared="target's contrast"),
    )
    u = float(np.hypot(0.001, 0.01 * value))
    return (
        Reading(region, "contrast_transfer", "1", value, u, parts),
        Reading(region, "bar_frequency", "cy/px", f, 1e-5),
    )


def _scene(groups: dict[str, float], wanted: tuple[Wanted, ...] = (), lost: tuple[NotFound, ...] = ()) -> Scene:
    readings = tuple(r for name, f in groups.items() for r in _group(name, f))
    step = Step({}, {}, (), readings)
    return Scene("", tuple(groups), (step,), lost, (300, 200), CAMERA, Optics(), Chart(), wanted)


def _wanted(f: float, part: str = "system") -> Wanted:
    return Wanted("mtf", {"frequency": Amount(f, "cy/px")}, {"frequency": f}, part)


def test_the_transfer_is_the_closed_form() -> None:
    """Blur and pixel of twelve groups over five octaves come back within 2u at each frequency, u below 0.02."""
    groups = {f"g{k}": f for k, f in enumerate(FREQUENCIES)}
    wanted = tuple(_wanted(f) for f in (0.02, 0.05, 0.1, 0.2, 0.3))
    made = method.gather(_scene(groups, wanted), method.Options())
    read = {r.label: r for r in made.readings}
    scene = SquareScene(frequency=(0.1, 0.0), sigma=0.6)

    for one in wanted:
        f = one.at["frequency"]
        reading = read[f"mtf at {f:g} cy/px"]
        assert reading.value is not None
        assert reading.u is not None
        assert abs(reading.value - scene.transfer(f)) <= 2 * reading.u
        assert reading.u < 0.02
        assert "target's contrast" in {c.shared for c in reading.components}
    half = read["mtf50"]
    assert half.value is not None
    assert scene.transfer(half.value) == pytest.approx(0.5, abs=0.02)
    assert {c.name for c in made.curves} == {"mtf", "contrast"}


def test_groups_of_one_frequency_are_averaged() -> None:
    """Twice the same groups give the same transfer, and the part of single groups falls by √2."""
    once = {f"g{k}": f for k, f in enumerate(FREQUENCIES)}
    twice = once | {f"h{k}": f for k, f in enumerate(FREQUENCIES)}
    one, two = (
        method.gather(_scene(groups, (_wanted(0.2),)), method.Options()).readings[0] for groups in (once, twice)
    )
    parts = [{c.name: c.u for c in reading.components}["points"] for reading in (one, two)]

    assert one.value == two.value
    assert parts[0] / parts[1] == pytest.approx(np.sqrt(2), rel=1e-3)


def test_what_is_refused() -> None:
    """Two frequencies, a group that was lost or not measured, a frequency beyond all groups, the lens alone."""
    groups = {f"g{k}": f for k, f in enumerate(FREQUENCIES)}
    lost = (NotFound("g99", None, "no modulation", "no line stands out"),)
    with pytest.raises(MeasurementRefused, match="have 2 frequencies, the conversion needs 3"):
        method.gather(_scene({"a": 0.1, "b": 0.2}, (_wanted(0.1),)), method.Options())
    with pytest.raises(MeasurementRefused, match="group g99: no line stands out"):
        method.gather(_scene(groups, (_wanted(0.1),), lost), method.Options())
    refused = method.gather(_scene(groups, (_wanted(0.48), _wanted(0.1, "lens"))), method.Options()).readings[:2]
    for reading, words in zip(refused, ("lies outside", "the whole system"), strict=True):
        assert isinstance(reading.refusal, Refusal)
        assert words in reading.refusal.because
    assert method.gather(_scene({"a": 0.1}), method.Options()).readings == ()


def test_a_sharp_units_crossing_is_a_bound() -> None:
    """Groups up to 0.2 cy/px of a sharp unit do not reach 10 %: a bound with its remark stands in place of a value."""
    groups = {f"g{k}": f / 2.25 for k, f in enumerate(FREQUENCIES)}
    read = {r.quantity: r for r in method.gather(_scene(groups), method.Options()).readings}

    bound = read["mtf10"].bound
    assert bound is not None
    assert bound[0] == "above"
    assert bound[1] == pytest.approx(0.2)
    assert read["mtf10"].value is None


def test_there_is_nothing_to_choose() -> None:
    """Any option is unknown, and no quantity is known but those of the curve."""
    with pytest.raises(UsageError, match="unknown option 'groups'"):
        method.read_options({"groups": 3})
    assert method.quantity("contrast_transfer") is None
