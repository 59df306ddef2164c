"""What all formats share: sizes told before pixels, texts sorted out, byte order undone."""

import json
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from runner.capture.formats.contract import (
    MAX_TEXT,
    check_channels,
    check_pages,
    check_size,
    check_upright,
    native,
    read_notes,
)
from runner.errors import FrameRefused
from runner.spec.model import Camera

CAMERA = Camera(160, 120, 12, 64, 4095)


@given(st.integers(0, 10**12), st.integers(0, 10**12))
def test_only_the_cameras_size_passes(width: int, height: int) -> None:
    """Every other size is refused with both sizes in the sentence; a frame on its side is told so."""
    if (width, height) == (160, 120):
        check_size(width, height, CAMERA, "a.tif")
        return
    with pytest.raises(FrameRefused, match=f"the frame is {width} x {height} px.*delivers 160 x 120 px"):
        check_size(width, height, CAMERA, "a.tif")


def test_the_cameras_own_size_passes() -> None:
    """The size of the spec draws no sentence; turned by 90 degrees it draws its own."""
    check_size(160, 120, CAMERA, "a.tif")
    with pytest.raises(FrameRefused, match="120 x 160 px, turned by 90 degrees"):
        check_size(120, 160, CAMERA, "a.tif")


def test_bounds_of_pages_include_their_ends() -> None:
    """1000 pages and 4 GiB of pixels are still read, one more of either is not."""
    check_pages(1000, "a.tif", 2**32 // 1000)
    with pytest.raises(FrameRefused, match="more than 1000 pages; at most 1000 frames"):
        check_pages(1001, "a.tif")
    with pytest.raises(FrameRefused, match="unpacks to 4294968000 bytes"):
        check_pages(1000, "a.tif", 2**32 // 1000 + 1)


def test_mono_and_upright_say_what_was_found() -> None:
    """Colour and turning are refused by name, nothing else is."""
    check_channels("", "a.tif", CAMERA, channels=1)
    for upright in (0, 1):
        check_upright(upright, "a.tif")
    with pytest.raises(FrameRefused, match=r"^a\.tif: the file holds two channels; .*mono"):
        check_channels("two channels", "a.tif", CAMERA, channels=0)
    for turned in (2, 8, 9):
        with pytest.raises(FrameRefused, match=rf"\(orientation {turned}\)"):
            check_upright(turned, "a.tif")


def test_one_channel_is_not_three() -> None:
    """A mono file for a colour camera and a colour file for a mono camera are refused, each with its own way out."""
    colour = replace(CAMERA, colour="rgb")
    check_channels("", "a.tif", colour, channels=3)
    with pytest.raises(
        FrameRefused, match=r"one grey channel; three colour channels .* the spec says colour: rgb; exp"
    ):
        check_channels("one grey channel", "a.tif", colour, channels=1)
    with pytest.raises(FrameRefused, match=r"3 colour channels; one grey channel .* state camera: colour: rgb"):
        check_channels("3 colour channels", "a.tif", CAMERA, channels=3)


def test_native_keeps_every_value_and_copies_only_if_it_must() -> None:
    """Codes of either byte order become this machine's; what is so already stays the very same memory."""
    codes = np.arange(12, dtype=np.uint16).reshape(3, 4) * 300
    swapped = codes.astype(codes.dtype.newbyteorder())

    assert np.array_equal(native(swapped), codes)
    assert native(swapped).dtype.isnative
    assert np.shares_memory(native(codes), codes)
    assert np.array_equal(native(codes.T), codes.T)


def test_notes_are_found_under_every_name_and_cut() -> None:
    """The serial is found in tags of its own and inside a description in JSON; long texts are cut, none is lost."""
    assert read_notes({"CameraSerialNumber": " WS8-1 "}).metadata == {"serial": "WS8-1"}
    inside = read_notes({"ImageDescription": json.dumps({"serial": "WS8-2", "software": "rig", "else": 1})})
    assert (inside.metadata["serial"], inside.metadata["software"]) == ("WS8-2", "rig")
    assert read_notes({"ImageDescription": json.dumps({"serial": 104})}).metadata["serial"] == "104"
    assert len(read_notes({"comment": "x" * 10**6}).metadata["description"]) == MAX_TEXT
    assert read_notes({"Serial": "own", "ImageDescription": '{"serial": "inside"}'}).metadata["serial"] == "own"


@settings(max_examples=40)
@given(st.text())
def test_no_text_can_stop_the_reading(text: str) -> None:
    """Whatever a text holds, it is taken as a text, and only the mark makes a frame simulated."""
    for spoilt in (text, "{" + text, '{"serial": ' + text, "[" * 5000, "{" * 5000, '{"serial": ' + "9" * 5000 + "}"):
        notes = read_notes({"ImageDescription": spoilt})
        assert all(isinstance(value, str) for value in notes.metadata.values())
    marked = read_notes({"Anything": text + ' {"probatum": "simulated frame"}'})
    assert marked.simulated
    assert not read_notes({"ImageDescription": "simulated by the trainee"}).simulated
