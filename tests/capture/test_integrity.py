"""What cannot be evidence is found before anything is measured, and said in a plain sentence."""

import re
from pathlib import Path

import pytest

from runner.capture.integrity import survey
from runner.capture.lot import find_lot
from runner.spec.model import Spec
from tests.capture.bad_frames import BAD_CAPTURES, UNIT, BadCapture, good_lot


def _sentences(root: Path, spec: Spec, units: tuple[str, ...] = ()) -> dict[tuple[str, int, str], tuple[str, ...]]:
    return dict(survey(find_lot(root, spec, units), spec).sentences)


@pytest.mark.parametrize("bad", BAD_CAPTURES, ids=lambda bad: bad.name)
def test_staged_error_is_found(bad: BadCapture, tmp_path: Path, spec: Spec) -> None:
    """Each staged error makes its capture unusable with its own sentence, and leaves the other capture alone."""
    good_lot(tmp_path)
    bad.spoil(tmp_path)

    found = _sentences(tmp_path, spec)

    at_fault = found[UNIT, 1 if (UNIT, 1, bad.capture) in found else 2, bad.capture]
    assert any(re.search(bad.says, sentence) for sentence in at_fault), at_fault
    assert all(";" in sentence and "\n" not in sentence for sentence in at_fault)


def test_good_lot_draws_no_sentence(tmp_path: Path, spec: Spec) -> None:
    """What is whole, single and of its unit is left alone."""
    good_lot(tmp_path)

    seen = survey(find_lot(tmp_path, spec), spec)

    assert seen.sentences == {}
    assert seen.marks == {}
