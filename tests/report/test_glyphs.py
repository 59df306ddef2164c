"""Characters without a glyph are found before a run begins."""

from pathlib import Path

import pytest

from runner import acceptance
from runner.acceptance import Order
from runner.errors import UsageError
from runner.report.glyphs import missing
from tests.capture.bad_frames import SPEC_TEXT


def test_what_the_fonts_hold_is_not_missing() -> None:
    """Latin, Greek, Cyrillic, Arabic, Hebrew, signs of the trade; line breaks are no characters to print."""
    assert missing({"a": ["Größe µm ± 2 σ", "Ω Щ ع א", 3, None], "≤ ≥ × –": "one\ntwo"}) == ""


def test_what_they_lack_is_named_once_and_in_order() -> None:
    """Each character once, from keys and values at any depth."""
    assert missing({"胡桃": [{"x": "桃 🙂"}]}) == "胡桃🙂"


def test_a_run_with_such_a_character_does_not_begin(tmp_path: Path) -> None:
    """The operator's name is refused with the characters and the option they came by; nothing is written."""
    (tmp_path / "spec.yaml").write_text(SPEC_TEXT)
    (tmp_path / "frames").mkdir()
    order = Order(spec=tmp_path / "spec.yaml", frames=tmp_path / "frames", out=tmp_path / "out", operator="胡桃 A.")

    with pytest.raises(UsageError, match="--operator: the report's fonts have no glyph for 胡桃"):
        acceptance.run(order)
    assert not (tmp_path / "out").exists()
