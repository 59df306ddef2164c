"""The station file."""

import json
from pathlib import Path

import pytest

from runner.errors import SpecError
from runner.spec.model import Station, UncertaintyComponent
from runner.spec.revision import canonical_json
from runner.spec.station import from_raw, read_station
from tests.scenes.spec_text import write

TEXT = """\
probatum-station: 1
name: Bench 2
place: Hall 1
instruments: [{name: Edge board, serial: 0012, due: 2027-01-31}]
uncertainty: [{name: chart, of: mtf, relative: 0.5 %, shared: chart}, {name: focus, of: [mtf50], absolute: 0.001 cy/px}]
"""


def test_a_station_is_read_and_rebuilt(tmp_path: Path) -> None:
    """A station has its instruments as text and its components as fractions; its raw data rebuild it."""
    station = read_station(write(tmp_path, TEXT, "station.yaml"))

    assert (station.name, station.place) == ("Bench 2", "Hall 1")
    assert station.instruments == ({"name": "Edge board", "serial": "0012", "due": "2027-01-31"},)
    assert station.uncertainty[0] == UncertaintyComponent("chart", ("mtf",), 0.005, None, "chart")
    assert station.uncertainty[1].absolute is not None
    assert from_raw(json.loads(canonical_json(station.raw))) == station
    assert from_raw({}) == Station()


def test_complaints_come_at_once(tmp_path: Path) -> None:
    """A station file is read as strictly as a spec."""
    text = (
        TEXT.replace("name: Bench 2\n", "")
        .replace("0.5 %", "0.5 px")
        .replace("-01-31", "-13-31")
        .replace("pla", "plaa")
    )

    with pytest.raises(SpecError, match="lacks the key 'name'") as caught:
        read_station(write(tmp_path, text, "station.yaml"))

    told = [complaint.found for complaint in caught.value.complaints]
    assert told == [
        "the station file lacks the key 'name'",
        "unknown key 'plaace' in the station file",
        "'2027-13-31' is no day of the calendar",
        "unit px does not fit here",
    ]


def test_a_missing_station_file_is_told(tmp_path: Path) -> None:
    """A station file that is not there is one sentence."""
    with pytest.raises(SpecError, match=r"none\.yaml: cannot read the file"):
        read_station(tmp_path / "none.yaml")


def test_data_that_are_no_station_are_refused() -> None:
    """Station data out of a changed record are refused, naming the key."""
    with pytest.raises(SpecError, match="unknown key 'owner' in the station file"):
        from_raw({"probatum-station": 1, "name": "Bench 2", "owner": "x"})
