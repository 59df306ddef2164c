"""The whole test on frames of a real camera: a chequered board, its borders against reference fits of their width.

Reference values and the source of the frames: boards/README.md. They are sigmas of erf edges fitted to the codes, pixel
included, in the least-squares sense. The same sigma follows from a measured transfer function M without any fit to
pixels: an edge spread is the integral of its line spread, so by Parseval's theorem the erf that lies nearest to it is
the one whose sigma minimises the integral of ((M(f) - exp(-2 (pi sigma f)^2)) / f)^2.
"""

from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray
from PIL import Image
from scipy.optimize import least_squares, minimize_scalar
from scipy.special import erf

from runner.acceptance import Order, Outcome, run
from runner.capture.frame import Box, crop
from runner.capture.readers import read_frames
from runner.errors import MeasurementRefused
from runner.exits import Exit
from runner.measure.contract import Found, Sample
from runner.measure.methods import edge_response
from runner.spec.build import read_spec
from runner.spec.model import Chart, Optics, Spec

BOARDS = Path(__file__).parent / "boards"
UNIT = "WS6-000001"
Array = NDArray[np.float64]

REFERENCE = {"upright": 0.817, "near": 0.732, "leaning": 0.946}
"""px; see boards/README.md."""
MODEL = 0.03
"""Two Gaussians made equal to one line spread by least squares, in the frame and in frequency, over other borders: JPEG
of 8 bit leaves ripples of 1.5 % of the step (3.6 DN rms about an erf), and the reference has its own scatter."""


@pytest.fixture(scope="module")
def outcome(tmp_path_factory: pytest.TempPathFactory) -> tuple[Outcome, dict[str, Any]]:
    """The run, and the unit's results."""
    with pytest.MonkeyPatch.context() as patch:
        patch.setenv("XDG_CONFIG_HOME", str(tmp_path_factory.mktemp("config")))
        out = tmp_path_factory.mktemp("out")
        done = run(Order(BOARDS / "boards.yaml", BOARDS, out, units=(UNIT,), time="2026-12-01T09:30:00Z"))
        return done, next(iter(done.documents()))


@pytest.fixture(scope="module")
def spec() -> Spec:
    """The spec."""
    return read_spec(BOARDS / "boards.yaml")


def _values(document: dict[str, Any], capture: str, quantity: str) -> dict[str, float]:
    """Return the values of one quantity by region."""
    return {
        r["region"]: r["value"]
        for r in document["readings"]
        if (r["capture"], r["quantity"]) == (capture, quantity) and r["value"] is not None
    }


def _sigma(frequency: Array, modulation: Array) -> float:
    """Return the sigma of the erf edge that lies nearest to an edge of this transfer function, px."""
    f, m = frequency[1:], modulation[1:]

    def distance(sigma: float) -> float:
        return float(np.trapezoid(((m - np.exp(-2 * (np.pi * sigma * f) ** 2)) / f) ** 2, f))

    return float(minimize_scalar(distance, bounds=(0.1, 5.0), method="bounded").x)


def _sigmas(document: dict[str, Any], capture: str) -> dict[str, float]:
    usable = _values(document, capture, "mtf50")
    return {
        c["region"]: _sigma(np.array(c["x"]), np.array(c["y"]))
        for c in document["curves"]
        if (c["capture"], c["name"]) == (capture, "mtf") and c["region"] in usable
    }


def _erf_sigma(picture: Array) -> float:
    """Fit an erf edge to the codes of a region, as the reference values were: place, direction, levels, sigma."""
    y, x = np.indices(picture.shape) - (np.array(picture.shape)[:, np.newaxis, np.newaxis] - 1) / 2
    down, right = (float(each.sum()) for each in np.gradient(picture))

    def residual(p: Array) -> Array:
        distance = x * np.cos(p[0]) + y * np.sin(p[0]) - p[1]
        return np.asarray(p[3] + p[4] * (1 + erf(distance / (np.sqrt(2) * p[2]))) / 2 - picture).ravel()

    low, high = np.quantile(picture, (0.1, 0.9))
    return abs(float(least_squares(residual, [np.arctan2(down, right), 0.0, 1.0, low, high - low]).x[2]))


def _error(values: Array) -> float:
    """Return the standard error of a median: √(π/2) of a mean's, from the median absolute deviation (normal law)."""
    scatter = 1.4826 * float(np.median(np.abs(values - np.median(values))))
    return 1.2533 * scatter / float(np.sqrt(values.size))


def _boxes(spec: Spec, capture: str) -> dict[str, tuple[slice, slice]]:
    """Return where each region lies, rows and columns, as asked (it may have moved by 1 px)."""
    found = {}
    for region in spec.capture(capture).regions:
        (x, y), (w, h) = region.centre_px(640, 480), region.size_px(640, 480)
        found[region.name] = slice(round(y - h / 2), round(y + h / 2)), slice(round(x - w / 2), round(x + w / 2))
    return found


def _picture(spec: Spec, capture: str) -> Array:
    """Decode a frame without the program."""
    frames = spec.capture(capture).frames
    assert frames is not None
    with Image.open(BOARDS / frames.names) as picture:
        return np.asarray(picture, dtype=np.float64)


def test_the_run_goes_through(outcome: tuple[Outcome, dict[str, Any]], spec: Spec) -> None:
    """Real frames end in a report: every border has a value or a reason, nobody's fault is the program's."""
    done, document = outcome
    regions = sum(len(capture.regions) for capture in spec.captures)

    assert done.exit is Exit.NOT_MEASURED  # one frame is over-exposed
    assert (document["verdict"], document["at_fault"]) == ("not measured", "capture")
    assert len(document["checks"]) == 3 * regions
    for check in document["checks"]:
        assert (check["value"] is None) == (check["verdict"] == "not measured"), check["label"]
        assert check["value"] is not None or (check["reason"] and check["at_fault"] in {"capture", "cannot tell"})
    assert not any(capture["faults"] for capture in document["captures"])
    folder = done.units[0].folder
    assert (folder / "report.pdf").read_bytes().startswith(b"%PDF")
    assert {"README.md", "LICENSE", "boards.yaml"} <= set(done.unused)


def test_the_over_exposed_frame_is_refused(outcome: tuple[Outcome, dict[str, Any]], spec: Spec) -> None:
    """Borders are refused as clipped, and the capture blamed, where a count of code 255 finds more than 0.1 %."""
    _, document = outcome
    picture, boxes = _picture(spec, "near"), _boxes(spec, "near")
    checks = [c for c in document["checks"] if (c["capture"], c["quantity"]) == ("near", "mtf50")]

    clipped = [c for c in checks if "lie at the white level" in c["reason"]]

    assert len(clipped) >= 0.8 * len(checks)
    for check in clipped:
        assert check["at_fault"] == "capture"
        assert (picture[boxes[check["where"]]] == 255).mean() > 0.0005  # the region may have moved by 1 px
    assert not any("white level" in c["reason"] for c in document["checks"] if c["capture"] == "leaning")


@pytest.mark.parametrize(("capture", "least"), [("upright", 8), ("leaning", 35)])
def test_median_sigma_agrees_with_the_reference(
    outcome: tuple[Outcome, dict[str, Any]], capture: str, least: int
) -> None:
    """The median sigma of all usable borders is the reference's, within the model's part and two standard errors.

    The borders truly differ, and the reference's are not all the same ones.
    """
    sigma = np.array(list(_sigmas(outcome[1], capture).values()))
    middle = float(np.median(sigma))
    error = _error(sigma)

    assert sigma.size >= least
    assert error < 0.07 * middle  # else agreement would say nothing
    assert abs(middle - REFERENCE[capture]) < MODEL * REFERENCE[capture] + 2 * error


@pytest.mark.parametrize("capture", ["upright", "leaning"])
def test_each_border_agrees_with_an_erf_fitted_to_it(
    outcome: tuple[Outcome, dict[str, Any]], spec: Spec, capture: str
) -> None:
    """Border by border, three sigmas from our readings agree with an erf that SciPy fits to the same pixels.

    What differs from border to border falls out. The nearest erf is the same one within the model's part. The 10-90 %
    width (2.5631 sigma) and MTF50 (0.18739 / sigma) see one side each of a line spread that is not Gaussian, its skirts
    and its core; 6 % of both is what the ripples allow. Two standard errors of the median ratio come on top.
    """
    _, document = outcome
    picture, boxes = _picture(spec, capture), _boxes(spec, capture)
    nearest = _sigmas(document, capture)
    fitted = {region: _erf_sigma(picture[boxes[region]]) for region in nearest}
    width = {region: value / 2.5631 for region, value in _values(document, capture, "edge_width").items()}
    half = {region: 0.18739 / value for region, value in _values(document, capture, "mtf50").items()}

    def off(sigmas: dict[str, float]) -> float:
        """Return how far the median ratio to the fitted erfs lies from 1, less two of its standard errors."""
        ratios = np.array([sigmas[region] / fitted[region] for region in fitted if region in sigmas])
        return abs(float(np.median(ratios)) - 1) - 2 * _error(ratios)

    assert off(nearest) < MODEL
    assert off(width) < 0.06
    assert off(half) < 0.06


def test_behind_the_refusal_the_estimator_agrees_too(spec: Spec) -> None:
    """With the white level put above all codes, so that nothing counts as clipped, the near frame's borders agree.

    Its white squares lie at code 250 and only the ripples beside their borders reach 255: little is cut off. A spec
    cannot say so (it may not state a white level that 8 bit cannot hold).
    """
    capture = spec.capture("near")
    assert capture.frames is not None
    (frame,) = read_frames(BOARDS / capture.frames.names, capture.camera)
    camera, sigma = replace(capture.camera, white_level=256), []
    for region in capture.regions:
        (x, y), (w, h) = region.centre_px(640, 480), region.size_px(640, 480)
        box = Box(round(x - w / 2), round(y - h / 2), round(x + w / 2), round(y + h / 2))
        found = Found(region.name, box, frozenset({"edge"}))
        sample = Sample(found, crop(frame, box, camera), camera, Optics(), Chart(), ())
        try:
            curves = edge_response.measure(sample, edge_response.read_options({})).curves
        except MeasurementRefused:
            continue
        curve = next(c for c in curves if c.name == "mtf")
        sigma.append(_sigma(np.array(curve.x), np.array(curve.y)))
    middle = float(np.median(sigma))

    assert len(sigma) >= 10
    assert abs(middle - REFERENCE["near"]) < MODEL * REFERENCE["near"] + 2 * _error(np.array(sigma))
