"""The method on the shelf: what it yields for what was wanted, its options, its refusals before any fit."""

from collections.abc import Mapping
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray

from runner.capture.frame import Box
from runner.errors import MeasurementRefused, UsageError
from runner.measure.contract import Found, Measurement, Sample, Wanted
from runner.measure.methods import edge_response
from runner.measure.reading import CAUSES, Reading
from runner.spec.model import Chart, Optics
from tests.measure.edge_samples import at, camera_of, cropped
from tests.scenes.edges import EdgeScene
from tests.scenes.line_spreads import Gaussian

SCENE = EdgeScene(Gaussian(0.5), (60, 80), 5.0, 0, (), 0.8, 500, 2900, black=64, white=4095, bits=12, read_noise=8)
CHART = Chart("walnut bench chart", transfer=((0.1, 0.99), (0.3, 0.91), (0.5, 0.80)), transfer_u=0.01)
MTF50 = Wanted("mtf50", {}, {})
LENS = replace(MTF50, part="lens")


def sample(
    *wanted: Wanted, scene: EdgeScene = SCENE, codes: NDArray[Any] | None = None, chart: Chart | None = None
) -> Sample:
    """Return the region over one noisy capture of a scene, or over other codes."""
    camera = camera_of(scene)
    picture = scene.render(np.random.default_rng(11)) if codes is None else codes
    box = Box(0, 0, picture.shape[1], picture.shape[0])
    found = Found("centre", box, frozenset({"edge"}))
    return Sample(found, cropped(picture, camera), camera, Optics(), chart or Chart(), wanted)


def measured(taken: Sample, **options: Any) -> Measurement:
    """Measure under options as a spec would give them."""
    return edge_response.measure(taken, edge_response.read_options(options))


def by_label(found: Measurement, estimator: str = edge_response.JOINT_FIT) -> Mapping[str, Reading]:
    """Return an estimator's readings by label."""
    return {r.label: r for r in found.readings if r.estimator == estimator}


def test_every_wish_once_and_the_standard_ones() -> None:
    """Each wish comes back once with its parameters, part and region, beside the values that are always read."""
    wanted = (at("mtf", 0.25), at("mtf", 0.25), at("phase_transfer", 0.1), MTF50, Wanted("mtf30", {}, {}), LENS)
    taken = sample(*wanted)
    before = taken.crop.signal.copy()
    readings = measured(taken).readings
    labels = [r.label for r in readings]
    assert len(labels) == len(set(labels))
    assert {"mtf at 0.25 cy/px", "phase transfer at 0.1 cy/px", "mtf30", "mtf50", "mtf50, lens alone"} < set(labels)
    assert {"edge width", "lsf fwhm", "overshoot", "undershoot", "edge angle", "edge noise"} < set(labels)
    for r in readings:
        info = edge_response.quantity(r.quantity)
        assert info is not None
        assert (r.region, r.measured_in, r.estimator) == ("centre", info.unit, "joint fit")
        assert set(r.parameters) == set(info.parameters)
        assert r.value is not None
    assert np.array_equal(before, taken.crop.signal)


def test_lens_alone_divides_pixel_and_chart_out() -> None:
    """`part: lens` is the Gaussian itself (closed form) over the chart's 0.91, whose u is among its components."""
    true = float(np.exp(-2 * (np.pi * 0.5 * 0.3) ** 2))
    blurred = replace(SCENE, read_noise=0.0)
    through = cropped(blurred.render(), camera_of(blurred))  # the chart is only stated: optics stay the Gaussian
    whole = replace(sample(replace(at("mtf", 0.3), part="lens"), at("mtf", 0.3)), crop=through)
    plain = by_label(measured(whole))["mtf at 0.3 cy/px, lens alone"]
    assert plain.value == pytest.approx(true, abs=0.005)
    assert all(part.name != "chart" for part in plain.components)

    lens = by_label(measured(replace(whole, chart=CHART)))["mtf at 0.3 cy/px, lens alone"]
    assert lens.value == pytest.approx(true / 0.91, abs=0.006)
    assert lens.value is not None
    (chart,) = (part for part in lens.components if part.name == "chart")
    assert chart.u == pytest.approx(lens.value * 0.01 / 0.91, rel=1e-6)


def dim(factor: float) -> NDArray[Any]:
    """Return the scene's codes with light multiplied about black."""
    return SCENE.render(np.random.default_rng(2), 64 + factor * (SCENE.signal() - 64))


@pytest.mark.parametrize(
    ("cause", "sentence", "codes"),
    [
        ("clipped", r"\d+\.\d\d % of the region's pixels lie at the white level; at most 0\.1 %", dim(1.45)),
        ("too bright", r"100 % of the region lies at the white level", dim(20)),
        ("clipped", r"% of the region's pixels lie at the black end", np.where(dim(1) < 520, 0, dim(1))),
        ("clipped", r"have its highest code, 2500, while its dark side has noise", np.minimum(dim(1), 2500)),
        ("too dark", r"lies \d\.\d DN over black; at least 4 DN", np.rint((dim(1) - 64.0) / 1500).astype(int) + 64),
        ("no picture", r"every pixel of the region has the code 700", np.full((80, 60), 700)),
    ],
    ids=["white", "all white", "black", "cut", "dark", "one code"],
)
def test_exposure_is_refused_before_the_fit(cause: str, sentence: str, codes: NDArray[Any]) -> None:
    """Clipped, cut, dark and empty regions are refused under their own cause with figures and the next step."""
    with pytest.raises(MeasurementRefused, match=sentence) as refused:
        measured(sample(codes=codes.astype(np.uint16)))
    assert refused.value.cause == cause
    assert cause in CAUSES
    measured(sample(codes=dim(1)))


def test_black_clamped_at_code_zero_is_refused() -> None:
    """A camera without a black level cuts the noise of a level near zero off: 8 % at code 0 are refused, 0.1 % not."""
    scene = EdgeScene(Gaussian(0.5), (60, 80), 5.0, low=100, high=20000, read_noise=100)
    with pytest.raises(MeasurementRefused, match=r"8\.\d\d % .* at the black end; at most 1 %; raise") as refused:
        measured(sample(scene=scene))
    assert refused.value.cause == "clipped"
    measured(sample(scene=replace(scene, low=330)))


def test_own_pixels_of_a_mosaic() -> None:
    """A channel is measured where its pixels lie, whatever the others hold; the standard's estimator is refused there.

    Red with a quarter of the pixels knows mtf50 half as well as all of them do, within a third.
    """
    scene = replace(SCENE, size=(80, 120))
    codes = scene.render(np.random.default_rng(12))
    camera = replace(camera_of(scene), mosaic="GRBG")
    whole = by_label(measured(sample(MTF50, scene=scene, codes=codes)))["mtf50"]
    for other in (64, 3000):
        spoilt = np.full_like(codes, other)
        spoilt[::2, 1::2] = codes[::2, 1::2]
        red = replace(sample(scene=scene), crop=cropped(spoilt, camera, "red"), camera=camera)
        asked = measured(replace(red, wanted=(MTF50, replace(MTF50, estimator=edge_response.ISO))))
        reading = by_label(asked)["mtf50"]
        assert reading.value == pytest.approx(scene.mtf50(), abs=3 * (reading.u or 0))
        assert reading.u == pytest.approx(2 * (whole.u or 0), rel=1 / 3)
        refusal = by_label(asked, edge_response.ISO)["mtf50"].refusal
        assert refusal is not None
        assert "takes whole rows" in refusal.because


@pytest.mark.parametrize("spoil", ["column", "row", "dirt"])
def test_defects_and_dirt_cost_little(spoil: str) -> None:
    """A stuck column or row or a speck of dirt across the edge leaves mtf50 within 3 u, and the reading says so."""
    scene = replace(SCENE, size=(80, 120))
    codes = scene.render(np.random.default_rng(13))
    if spoil == "column":
        codes[:, 43] = 1700
    elif spoil == "row":
        codes[70] = 1700
    else:
        codes[50:53, 41:44] = 500
    reading = by_label(measured(sample(MTF50, scene=scene, codes=codes)))["mtf50"]
    assert reading.value == pytest.approx(scene.mtf50(), abs=3 * (reading.u or 0))
    assert (reading.u or 1) < 0.01 * scene.mtf50()
    assert any(flag.startswith("defect pixels left out: ") for flag in reading.flags)


def test_the_standards_estimator_is_named() -> None:
    """By option or by wish, the standard's readings carry its name and edition; what it lacks is refused, not faked."""
    iso = replace(MTF50, estimator=edge_response.ISO)
    asked = measured(sample(MTF50, iso, replace(iso, part="lens"), replace(iso, quantity="overshoot")))
    readings = by_label(asked, edge_response.ISO)
    assert set(readings) == {"mtf50", "mtf50, lens alone", "overshoot"}
    one, other = readings["mtf50"], by_label(asked)["mtf50"]
    assert "ISO 12233:2014" in one.method
    assert one.value is not None
    assert one.value == pytest.approx(other.value, rel=0.05)
    for label, because in (("mtf50, lens alone", "whole system"), ("overshoot", "defines no overshoot")):
        refusal = readings[label].refusal
        assert refusal is not None
        assert refusal.cause == "not defined"
        assert because in refusal.because
    assert {c.estimator for c in asked.curves if c.name == "mtf"} == {"joint fit", "iso 12233:2014"}
    by_option = measured(sample(MTF50), estimator="iso 12233:2014")
    assert by_label(by_option, edge_response.ISO)["mtf50"].value == one.value


def test_options_say_what_they_allow() -> None:
    """Every option has a sentence; a wrong key or value is a usage error that says what is allowed."""
    for option in edge_response.Options.__dataclass_fields__.values():
        assert option.metadata["sentence"].endswith(".")
    assert edge_response.read_options({"search": "12 px", "order": 3}).search == 12.0
    for asked, sentence in (
        ({"estimater": "joint fit"}, r"unknown option 'estimater'; .*did you mean 'estimator'"),
        ({"estimator": "fastest"}, r"estimator is 'fastest'; allowed are: joint fit, iso 12233:2014"),
        ({"order": 6}, r"order is 6; allowed is a whole number from 1 to 5"),
        ({"order": True}, r"order is True; allowed"),
        ({"search": "3 mm"}, r"search is '3 mm'; allowed is 0 px to 200 px"),
        ({"search": -1}, r"search is -1; allowed is 0 px to 200 px"),
        ({"shading": {"form": "flat"}}, r"shading is \{'form': 'flat'\}; allowed are: none, fitted, \{from: ROLE\}"),
    ):
        with pytest.raises(UsageError, match=sentence):
            edge_response.read_options(asked)
    with pytest.raises(MeasurementRefused, match=r"'flat' .*; name it under 'uses' \(flat: CAPTURE\)") as refused:
        measured(sample(), shading={"from": "flat"})
    assert refused.value.cause == "missing companion"
