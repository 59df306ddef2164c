"""Captures, frames, methods, uncertainty and deviations on a page: nothing hidden, nothing said twice."""

from typing import Any

import pytest

from runner.report.circumstance_facts import (
    MOST_ROWS,
    capture_fact,
    deviations_fact,
    first_attempts,
    frame_fact,
    machine_fact,
    methods_fact,
    said_facts,
    sentence,
    station_fact,
    station_file_fact,
    uncertainty_fact,
)
from tests.report import printed_world as world


@pytest.mark.parametrize(
    ("words", "text"), [("it is", "it is."), ("it is.", "it is."), ("is it? ", "is it?"), ("", ""), ("  ", "")]
)
def test_sentences_end(words: str, text: str) -> None:
    """Words get one full stop, and nothing stays nothing."""
    assert sentence(words) == text


def test_uncertainty_is_shown_of_what_is_judged() -> None:
    """Readings that a check uses, alone or as member of a combination, and no others; components as they entered."""
    rows = {reading: (u, parts) for reading, u, parts in uncertainty_fact(world.document())}

    corners = {f"corners {corner}: mtf50" for corner in world.CORNERS}
    assert set(rows) == corners | {"centre: mtf at 0.25 cy/px", "centre: overshoot", "centre: edge width"}
    # 0.8 and 0.6 of u, to two digits (JCGM 100, 7.2.6)
    assert rows["centre: mtf at 0.25 cy/px"] == ("0.0041", "noise 0.0033 A, method bias 0.0025 B")
    assert rows["corners upper left: mtf50"] == ("0.0022 cy/px", "noise 0.0018 A, method bias 0.0013 B")


def test_a_combination_takes_its_members_with_it() -> None:
    """The corners' readings stay when only their range is judged."""
    document = world.document()
    document["checks"] = [c for c in document["checks"] if c["where"] == "range of corners"]

    assert len(uncertainty_fact(document)) == 4


def test_long_lists_say_what_they_leave_out() -> None:
    """Beyond 60 rows a last one tells how many more stand in results.json."""
    document = world.document()
    reading = next(r for r in document["readings"] if r["quantity"] == "overshoot")
    document["readings"] = [reading] * (MOST_ROWS + 7)
    document["deviations"] = [f"Deviation {n}." for n in range(MOST_ROWS + 2)]

    assert len(uncertainty_fact(document)) == MOST_ROWS + 1
    assert uncertainty_fact(document)[-1] == ("7 more readings", "", "stand in results.json")
    # one more remark than deviations: the flag of the reading
    assert deviations_fact(document)[-1] == "3 more remarks stand in results.json."


def test_deviations_and_remarks_are_complete() -> None:
    """Deviations, warnings of the spec, flags with their places, files not used, and an earlier result."""
    document = world.document()
    document |= {
        "deviations": ["The product sharpens."],
        "warnings": ["limit 3 cannot fail"],
        "unused": ["notes.txt", "old.tif"],
        "earlier": "earlier/2026-11-30T09-00-00Z",
    }

    assert deviations_fact(document) == (
        "The product sharpens.",
        "Warning of the spec: limit 3 cannot fail.",
        "overshoot: little of it (centre).",
        "Files that no pattern used: notes.txt, old.tif.",
        "An earlier result of this unit is kept in the folder earlier/2026-11-30T09-00-00Z.",
    )


def test_captures_tell_their_state() -> None:
    """A refused capture shows each fault and what follows from it; a good one a dash."""
    good = world.document()["captures"][0]
    bad = good | {"attempt": 2, "usable": False, "faults": ["a.tif: cut off", "b.tif: empty"], "because": "the file"}

    assert capture_fact(good) == ("dark", "1", "usable", "–")
    assert capture_fact(bad) == ("dark", "2", "not usable", "a.tif: cut off. b.tif: empty. The file.")
    assert [c["name"] for c in first_attempts({"captures": [good, bad, good | {"name": "chart"}]})] == ["dark", "chart"]


def test_frames_are_named_with_attempt_page_and_digest() -> None:
    """Width before height; the attempt only from the second on; the digest whole."""
    frame = {"file": "a.tif", "page": 3, "shape": [1200, 1600], "dtype": "uint16", "simulated": True, "sha256": "ab"}

    assert frame_fact({"attempt": 2}, frame) == ("attempt 2: a.tif, page 3", "1600 × 1200 uint16, simulated", "ab")
    plain = frame | {"page": None, "simulated": False, "sha256": "sha256:cd", "shape": [1200, 1600, 3]}
    assert frame_fact({"attempt": 1}, plain) == ("a.tif", "1600 × 1200 uint16", "cd")


def test_methods_stand_once_with_options_and_sources() -> None:
    """A method that several captures share in the same way is one row; with other options it is another."""
    method: dict[str, Any] = {"capture": "chart", "name": "edge", "title": "Edge", "references": ["ISO 12233", "GUM"]}
    rows = [
        method | {"options": {"search": 10.0, "estimator": "joint fit"}},
        method | {"options": {"search": 10.0, "estimator": "joint fit"}, "capture": "other"},
        method | {"options": {}},
    ]

    assert methods_fact({"methods": rows}) == (
        ("Edge", "search: 10, estimator: joint fit", "ISO 12233; GUM"),
        ("Edge", "no options", "ISO 12233; GUM"),
    )


def test_the_station_and_its_instruments() -> None:
    """What the station file states, instruments with serial and due date; what is empty is left out."""
    station = {
        "name": "bench 2",
        "due_date": "",
        "instruments": [{"name": "lamp", "serial": "L-4", "due": "2027-01-01"}],
    }

    assert station_fact({"station": station}) == (("name", "bench 2"), ("lamp", "serial L-4, due 2027-01-01"))
    assert station_fact({"station": {}}) == ()


def test_the_machine_names_every_version() -> None:
    """Program, template, libraries and machine stand in one line."""
    program = {"name": "probatum", "version": "1", "template": "1", "versions": {"numpy": "2.4"}, "machine": "Linux"}

    assert machine_fact(program) == "probatum 1, template 1; numpy 2.4; Linux"


def test_what_sidecars_said_is_printed_whatever_they_hold() -> None:
    """Letters that the fonts may lack, and marks that no page shows, are spelled as numbers; the rest stays."""
    said = [{"file": "a.tif", "fields": [["serial", "WS8-\u00b5\u4e01", "a.json"], ["time", "no\non", "unit.json"]]}]
    capture = {"name": "flat", "target": "flat field", "attempt": 2, "sidecar": {"demanded": [], "said": said}}
    quiet = capture | {"sidecar": {"demanded": [], "said": []}}

    ((title, rows),) = said_facts({"captures": [capture, quiet]})

    assert title == "flat (flat field), attempt 2"
    assert rows == (("demanded", "nothing"), ("a.tif", "serial WS8-µ\\u4e01 (a.json); time no\\u000aon (unit.json)"))


def test_station_files_are_listed_with_their_digests() -> None:
    """One that could not be read says so in place of a digest."""
    one = {"attempt": 1, "file": "manifest.json", "kind": "manifest", "sha256": "ab"}

    assert station_file_fact(one) == ("manifest.json", "manifest", "ab")
    lost = one | {"attempt": 2, "sha256": ""}
    assert station_file_fact(lost) == ("attempt 2: manifest.json", "manifest", "could not be read")
