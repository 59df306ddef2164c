"""What the spec demands of sidecars, what they said, and the station's files with their digests: data, and back."""

from collections.abc import Mapping
from typing import Any

from runner.capture.sidecar import agreed_words
from runner.capture.station import FrameWords, StationFile, StationWords
from runner.spec.files import FIELDS
from runner.spec.model import Capture


def station_data(station: StationWords) -> list[dict[str, Any]]:
    """Return the station's files as plain JSON data."""
    return [{"attempt": f.attempt, "file": f.file, "kind": f.kind, "sha256": f.sha256} for f in station.files]


def sidecar_data(capture: Capture, attempt: int, station: StationWords) -> dict[str, Any]:
    """Return what one capture's sidecars had to say, and what they said of each frame, as plain JSON data.

    Args:
        capture: With what it demands.
        attempt: The attempt.
        station: What was said of the unit.
    """
    mine = [one for one in station.frames if (one.attempt, one.capture) == (attempt, capture.name)]
    return {
        "demanded": demanded(capture),
        "said": [{"file": one.file, "fields": [list(field) for field in one.fields]} for one in mine],
    }


def demanded(capture: Capture) -> list[list[str]]:
    """Return what a capture demands of its sidecars, as pairs of field and words; empty where it demands nothing."""
    rule = capture.sidecar
    words = dict.fromkeys(rule.require, "must be stated") | {one.name: agreed_words(one) for one in rule.agreed}
    words |= {"counter": "consecutive"} if rule.consecutive else {}
    return [[name, words[name]] for name in FIELDS if name in words]


def station_back(document: Mapping[str, Any]) -> StationWords:
    """Return the station's words out of a results document."""
    files = tuple(
        StationFile(int(f["attempt"]), str(f["file"]), str(f["kind"]), str(f["sha256"]))
        for f in document.get("station_files", ())
    )
    frames = tuple(
        FrameWords(int(c["attempt"]), c["name"], said["file"], tuple((a, b, c_) for a, b, c_ in said["fields"]))
        for c in document["captures"]
        for said in c.get("sidecar", {}).get("said", ())
    )
    return StationWords(files, frames)
