"""The last element resolved: the rule, its uncertainty, spurious resolution, elements not seen."""

import numpy as np
import pytest

from runner.errors import MeasurementRefused, UsageError
from runner.measure.contract import NotFound, Scene, Step, Wanted
from runner.measure.methods import resolving_power as method
from runner.measure.reading import Component, Reading, Refusal
from runner.spec.model import Camera, Chart, Optics
from tests.measure.tri_bar_samples import draw, frame_of, pattern, resolve

CAMERA = Camera(width=300, height=200, bit_depth=12, black_level=64, white_level=4095)
NAMES = {f"v{n}": f"6/{n} vertical" for n in range(1, 7)}


def _scene(values: dict[str, float | None], lost: tuple[NotFound, ...] = (), u: float = 0.5) -> Scene:
    readings = tuple(
        Reading(name, "tri_bar_contrast", "%", None, None, refusal=Refusal("no modulation", "nothing there"))
        if value is None
        else Reading(name, "tri_bar_contrast", "%", value, u, (Component("noise", u, "A"),))
        for name, value in values.items()
    )
    wanted = (Wanted("resolving_power_horizontal", {}, {}),)
    regions = (*values, *(one.region for one in lost))
    return Scene("", regions, (Step({}, {}, (), readings),), lost, (300, 200), CAMERA, Optics(), Chart(), wanted)


def _read(scene: Scene, **options: object) -> Reading:
    asked = method.read_options({"elements": dict(NAMES), **options})
    return method.gather(scene, asked).readings[0]


def _contrasts(*values: float | None) -> dict[str, float | None]:
    return {f"v{n}": value for n, value in enumerate(values, 1)}


def test_the_last_of_all_that_are_resolved() -> None:
    """40, 30, 20, 12, 6, 2 % at 10 %: element 6/4, 90.5 lp/mm, with 3.5 % of it as the step's part (12.2 %/√12)."""
    read = _read(_scene(_contrasts(40, 30, 20, 12, 6, 2)))

    assert read.value == pytest.approx(90.51, abs=0.01)
    assert read.u == pytest.approx(90.51 * (2 ** (1 / 6) - 1) / np.sqrt(12), rel=0.05)
    assert "element 6/4 is the last resolved" in read.flags
    assert "criterion: contrast of 10 %" in read.flags


def test_the_criterion_is_stated() -> None:
    """At 20 % the same elements end with 6/3; at 25 % with 6/2."""
    scene = _scene(_contrasts(40, 30, 22, 12, 6, 2))

    assert _read(scene, criterion="20 %").value == pytest.approx(80.63, abs=0.01)
    assert _read(scene, criterion="25 %").value == pytest.approx(71.84, abs=0.01)


def test_spurious_resolution_does_not_count() -> None:
    """Bars and spaces that have changed places beyond a gap are told and not counted; so is contrast come again."""
    turned = _read(_scene(_contrasts(40, 25, 3, -12, -11, -4)))
    again = _read(_scene(_contrasts(40, 25, 3, 14, 11, 4)))

    assert turned.value == again.value == pytest.approx(71.84, abs=0.01)
    assert "spurious resolution at 6/4, 6/5, beyond the first element that is not resolved" in turned.flags
    assert "contrast again at 6/4, 6/5, beyond the first element that is not resolved" in again.flags


def test_an_element_near_the_criterion_widens_the_uncertainty() -> None:
    """10.2 ± 0.5 % at 10 %: it may or may not be resolved, in about a third of the draws it is not."""
    sure = _read(_scene(_contrasts(40, 30, 20, 12, 6, 2)))
    near = _read(_scene(_contrasts(40, 30, 20, 10.2, 6, 2)))
    parts = {c.name: c.u for c in near.components}

    assert near.value == sure.value
    assert parts["noise"] == pytest.approx((90.51 - 80.63) * np.sqrt(0.345), rel=0.1)  # P(normal > 0.4) = 0.345


def test_ends_of_the_target_are_bounds() -> None:
    """Every element resolved: above the last; none: below the first."""
    for values, way, end in (((40, 30, 25, 20, 15, 12), "above", 114.04), ((8, 5, 3, 2, 1, 1), "below", 64.0)):
        bound = _read(_scene(_contrasts(*values))).bound
        assert bound is not None
        assert bound[0] == way
        assert bound[1] == pytest.approx(end, abs=0.01)


def test_elements_not_seen() -> None:
    """A fine element of no modulation is not resolved; a coarse one, or one lost otherwise, leaves no value."""
    fine = _read(_scene(_contrasts(40, 30, 20, None, None, None)))
    lost = _read(_scene(_contrasts(40, 30), (NotFound("v3", None, "off the frame", "it reaches over the border"),)))

    assert fine.value == pytest.approx(80.63, abs=0.01)
    assert lost.refusal == Refusal("off the frame", "element 6/3: it reaches over the border")
    coarse = _read(_scene(_contrasts(None, 30, 20, 12, 6, 2)))
    assert coarse.refusal == Refusal("no modulation", "element 6/1: nothing there")


def test_a_whole_target_from_its_frame() -> None:
    """Blurred by 2.2 px, the closed form's contrasts say which element is the last at 10 %, in both directions."""
    read = resolve(frame_of(draw(0.004, sigma=2.2)))
    seen = [-pattern(f"v{n}", sigma=2.2).seen_contrast() for n in range(1, 7)]
    last = int(np.argmin(np.array(seen) >= 0.1))

    assert 0 < last < 6
    for way in ("horizontal", "vertical"):
        assert read[f"resolving_power_{way}"].value == pytest.approx(64 * 2 ** ((last - 1) / 6), rel=1e-6)


def test_what_is_refused() -> None:
    """No table, no element of that direction, one element alone, options outside their meaning."""
    scene = _scene(_contrasts(40, 30))
    with pytest.raises(MeasurementRefused, match="does not say which element each region holds"):
        method.gather(scene, method.Options())
    asked = method.read_options({"elements": {"v1": "6/1 horizontal", "v2": "6/2 horizontal"}})
    refusal = method.gather(scene, asked).readings[0].refusal
    assert refusal is not None
    assert "none of its regions holds an element whose bars lie bars up and down" in refusal.because
    with pytest.raises(UsageError, match="criterion is '95 %'"):
        method.read_options({"criterion": "95 %"})
