"""Chequered boards before a real camera: corners, bow and distortion against references that general libraries gave.

References: boards/README.md. The 13-view calibration there has f = 532.83 and 532.95 px, centre (342.49, 233.86) with
pixel centres at integers, k1 = -0.2809, k2 = 0.0252, k3 = 0.163 of the ideal height over f (cv2.calibrateCamera, rms
0.195 px). One hand-held board of 54 corners reaches 0.44 to 0.62 half diagonals from the centre.
"""

from pathlib import Path

import numpy as np
import pytest
from PIL import Image
from scipy.optimize import brentq

from runner.capture.frame import Frame, crop
from runner.measure.contract import Found, Sample
from runner.measure.lattice_centres import Centres, centres_of
from runner.measure.methods import geometry
from runner.measure.reading import Reading
from runner.measure.targets import checkerboard, dot_grid
from runner.spec.model import Camera, Chart, Optics
from tests.measure.lattice_samples import located, wanted

BOARDS = Path(__file__).parent / "boards"
NAMES = ("left01", "left05", "left13")
CAMERA = Camera(width=640, height=480, bit_depth=8, black_level=0, white_level=255, delivers="jpeg")
HALF = 400.0
"""Half the diagonal, px."""
FOCAL = 532.89
K = (-0.2809, 0.0252, 0.163)
TERMS = 2
"""Radial terms: corners up to 0.6 half diagonals do not determine a third, whose effect there is 0.1 %."""


def _frame(name: str) -> Frame:
    return Frame(f"{name}.jpg", "", "", np.asarray(Image.open(BOARDS / f"{name}.jpg")))


def _found(name: str) -> Found:
    found = located(checkerboard, _frame(name), CAMERA, columns=9, rows=6)
    assert isinstance(found, Found), found
    return found


def _sample(name: str, fields: tuple[float, ...] = ()) -> Sample:
    found = _found(name)
    asked = wanted(fields, "local_distortion")
    return Sample(found, crop(_frame(name), found.box, CAMERA), CAMERA, Optics(), Chart(), asked)


def _read(name: str, fields: tuple[float, ...] = ()) -> dict[str, Reading]:
    options = geometry.read_options({"radial_terms": TERMS})
    return {r.label: r for r in geometry.measure(_sample(name, fields), options).readings}


def reference(field: float) -> float:
    """Return the calibration's 100 (H' - H)/H % at an image height of so many half diagonals."""
    seen = field * HALF / FOCAL
    ideal = brentq(lambda r: r * (1 + K[0] * r**2 + K[1] * r**4 + K[2] * r**6) - seen, 0, 1.2)
    return 100 * (seen / ideal - 1)


def test_the_reference_is_read_as_it_is_meant() -> None:
    """At the right border of the calibration's own centre its error is the -9.4 % that its README has."""
    assert reference((639.5 - 342.49) / HALF) == pytest.approx(-9.4, abs=0.1)


@pytest.mark.parametrize("name", NAMES)
def test_all_corners_and_no_others(name: str) -> None:
    """54 corners of 9 × 6 in a room full of other things, none missing, at step/noise of 8 bit JPEG within 0.1 px u."""
    found = _found(name)
    columns, rows = np.ptp(np.array(found.points["places"]), axis=0) + 1
    centres = centres_of(found, crop(_frame(name), found.box, CAMERA))

    assert (columns, rows, found.geometry["missing"]) == (9, 6, 0)
    assert len(centres.points) == 54
    assert centres.u.max() < 0.1


def _first_row(centres: Centres) -> tuple[float, float]:
    """Return bow and chord of the row with the least y, px."""
    rows = centres.places[:, 1]
    row = min(np.unique(rows), key=lambda r: centres.points[rows == r, 1].mean())
    line = centres.points[rows == row]
    line = line[np.argsort(line[:, 0])]
    chord = line[-1] - line[0]
    away = (chord[0] * (line[:, 1] - line[0, 1]) - chord[1] * (line[:, 0] - line[0, 0])) / np.hypot(*chord)
    return float(np.abs(away).max()), float(np.hypot(*chord))


def test_the_bow_of_the_first_row() -> None:
    """left01: 2.80 px on a chord of 269.5 px. Corners: within 0.06 px and 0.3 px, twice what fits of such JPEG leave.

    The reading `row_bow`, of a flat board behind the fitted lens, agrees with 1.04 % within 2 u.
    """
    found = _found("left01")
    bow, chord = _first_row(centres_of(found, crop(_frame("left01"), found.box, CAMERA)))
    reading = _read("left01")["row bow"]

    assert bow == pytest.approx(2.80, abs=0.06)
    assert chord == pytest.approx(269.5, abs=0.3)
    assert reading.value is not None
    assert reading.u is not None
    assert abs(reading.value - 1.04) <= 2 * reading.u
    assert reading.u < 0.1


@pytest.mark.parametrize(
    ("name", "fields"),
    [("left01", (0.3, 0.5, 0.6, 0.8, 1.0)), ("left05", (0.3, 0.5, 0.6, 0.8, 1.0)), ("left13", (0.3, 0.4, 0.5))],
)
def test_distortion_of_one_view_against_thirteen(name: str, fields: tuple[float, ...]) -> None:
    """Local distortion within 2 u of the calibration, also far beyond the corners seen; inside u is below 0.4 %."""
    read = _read(name, fields)
    for field in fields:
        reading = read[f"local distortion at {field:g}"]
        assert reading.value is not None, field
        assert reading.u is not None
        assert abs(reading.value - reference(field)) <= 2 * reading.u, field
        if field <= 0.5:
            assert reading.u < 0.4


@pytest.mark.parametrize("name", NAMES)
def test_a_board_is_no_dot_grid(name: str) -> None:
    """The same frames before the other target are refused: a board, and a room, are another scene."""
    lost = located(dot_grid, _frame(name), CAMERA)

    assert not isinstance(lost, Found)
    assert lost.cause == "another scene"
