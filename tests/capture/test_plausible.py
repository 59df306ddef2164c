"""A wrong layout, depth or mosaic is told by its pixels; honest frames of any scene pass.

What cannot be told: constant frames, texture as rough as a wrong reading, a mosaic without light, under grey light or
with red for blue, a lower depth that never clips, and what `test_row_length` lists.
"""

import re
from dataclasses import replace

import numpy as np
import pytest

from runner.capture.plausible import check_layout, check_mosaic
from runner.errors import FrameRefused
from runner.spec.files import PACKINGS, Layout
from runner.spec.model import Camera
from tests.capture.raw_scenes import GAINS, HEIGHT, WIDTH, Codes, Right, right_declarations, scenes, take, write

SCENES = dict(scenes())
CAMERA = Camera(WIDTH, HEIGHT, 12, 64, 4095)
LITTLE = Layout("16 bit", "little")
TWELVE = [name for name, packing in PACKINGS.items() if packing.bits == 12]
ROUGH = {"random texture"} | {f"sharp stripes {a} by {p}" for a in (10, 60, 150) for p in (2, 3)}
"""Scenes that are no smoother than noise, or nearly so."""


def _told(codes: Codes, written: Layout, camera: Camera) -> str:
    """Return the sentence about a file of one layout that is declared as another, or nothing."""
    from runner.capture.formats.packed import decode

    data = write(codes, written)
    try:
        for number, page in enumerate(decode(data, "a.raw", camera).pages):
            check_layout(data, number, page, "a.raw", camera)
    except FrameRefused as error:
        return str(error)
    return ""


RIGHT = list(right_declarations())


def _refusals(right: Right, first: int, step: int) -> dict[str, str]:
    some = list(SCENES.items())[first::step]
    told = {
        name: _told(take(light, right.camera, i), right.camera.layout, right.camera)
        for i, (name, light) in enumerate(some)
    }
    assert len(told) >= len(SCENES) // step
    return {name: words for name, words in told.items() if words}


@pytest.mark.parametrize("number", range(len(RIGHT)), ids=lambda number: RIGHT[number].name)
def test_honest_frames_pass(number: int) -> None:
    """No scene is refused under a right declaration; each takes its turn under several of them."""
    assert _refusals(RIGHT[number], number % 4, 4) == {}


@pytest.mark.study
@pytest.mark.parametrize("number", range(len(RIGHT)), ids=lambda number: RIGHT[number].name)
def test_every_honest_frame_passes(number: int) -> None:
    """No scene, stripes at any angle among them, is refused under any right declaration: packing, depth, padding."""
    assert _refusals(RIGHT[number], 0, 1) == {}


@pytest.mark.parametrize("written", TWELVE)
def test_twelve_bit_in_another_order_are_told(written: str) -> None:
    """Every other packing of 12 bit is refused with the right one named, but for scenes as rough as noise."""
    for number, (name, light) in enumerate(SCENES.items()):
        if number % 8 and not name.startswith(("dark", "flat", "edge")):
            continue
        codes = take(light, CAMERA, number)
        for declared in TWELVE:
            words = _told(codes, Layout(written), replace(CAMERA, layout=Layout(declared)))
            assert (f"likely is packing: {written};" in words) == (declared != written) or name in ROUGH, (
                name,
                declared,
            )


@pytest.mark.parametrize(
    ("written", "declared", "depth"),
    [
        *(
            (Layout("16 bit", a), Layout("16 bit", b), d)
            for a, b in (("little", "big"), ("big", "little"))
            for d in (14, 16)
        ),
        (Layout("MIPI RAW10"), Layout("10 bit low bits first"), 10),
        (Layout("10 bit low bits first"), Layout("MIPI RAW10"), 10),
    ],
    ids=str,
)
def test_bytes_in_another_order_are_told(written: Layout, declared: Layout, depth: int) -> None:
    """Swapped bytes and the other 10 bit packing are refused with the right order, on dark frames too."""
    camera = Camera(WIDTH, HEIGHT, depth, 2 ** (depth - 6), 2**depth - 1, layout=declared)
    likely = f"byte_order: {written.byte_order}" if written.byte_order else f"packing: {written.packing}"

    for name in ("dark", "flat", "shaded flat", "edge 5", "edge 85", "sine stripes 45 by 4", "bar", "clouds", "points"):
        assert f"likely is {likely};" in _told(take(SCENES[name], camera, 3), written, camera), name


def test_a_frame_without_noise_does_not_tell() -> None:
    """A constant or drawn frame reads alike in every order, and is left to other checks."""
    for level in (64, 1000, 4095):
        for declared in TWELVE:
            codes = np.full((HEIGHT, WIDTH), level, np.uint16)
            assert _told(codes, Layout("MIPI RAW12"), replace(CAMERA, layout=Layout(declared))) == ""


def test_a_lower_depth_is_told_where_it_clips() -> None:
    """10 bit declared as 12 pile up at 1023; a frame that only comes near, or truly ends there, does not."""
    bright, camera = take(1.3 * SCENES["shaded flat"] + 0.3, replace(CAMERA, bit_depth=10, white_level=1023), 1), CAMERA
    declared = replace(camera, layout=LITTLE)

    assert "pixels stand at 1023 DN and none above: the frame clips as one of 10 bit" in _told(bright, LITTLE, declared)
    assert _told(bright, LITTLE, replace(declared, white_level=1023)) == ""
    assert _told(np.minimum(bright, 1000), LITTLE, declared) == ""
    one_hot = np.minimum(bright // 2, 600)
    one_hot[5, 5] = 1023
    assert _told(one_hot, LITTLE, declared) == ""


@pytest.mark.parametrize("name", ["dark", "flat", "edge 5", "edge 90", "clouds", "sharp stripes 0 by 2"])
def test_padding_counted_as_picture_is_told(name: str) -> None:
    """Zero columns, at the right border or slanting, are padding where the black level is above zero."""
    codes = take(SCENES[name], CAMERA, 1)
    wide = replace(CAMERA, width=WIDTH + 8, layout=LITTLE)
    sheared = replace(CAMERA, layout=replace(LITTLE, header=2 * HEIGHT))

    words = _told(codes, replace(LITTLE, row_padding=16), wide)
    assert "the last 8 columns are zero in every row" in words
    assert f"likely is frame_size: {WIDTH} x {HEIGHT} px with row_padding: 16 bytes" in words
    assert f"repeats itself after {WIDTH + 1} px" in _told(codes, replace(LITTLE, row_padding=2), sheared)
    dark_border = np.where(np.arange(WIDTH) < WIDTH - 8, codes, 0)
    assert _told(dark_border, LITTLE, replace(CAMERA, black_level=0, layout=LITTLE)) == ""


@pytest.mark.parametrize("width", [144, 216, 256])
def test_rows_of_another_length_are_told_where_the_borders_differ(width: int) -> None:
    """A sheared edge is refused with its true row; stripes that run on from border to border are not."""
    camera = replace(CAMERA, width=width, height=WIDTH * HEIGHT // width, layout=LITTLE)

    for name in ("edge 2", "edge 5", "edge 175", "sloping flat"):
        codes = take(SCENES[name], CAMERA, 7)
        assert f"repeats itself after {WIDTH} px, not after the declared {width} px" in _told(codes, LITTLE, camera), (
            name
        )
    assert _told(take(SCENES["sharp stripes 0 by 2"], CAMERA, 1), LITTLE, camera) == ""


ORDERS = ("RGGB", "GRBG", "GBRG", "BGGR")


@pytest.mark.parametrize("mosaic", ORDERS)
def test_a_mosaic_out_of_step_is_told_under_coloured_light(mosaic: str) -> None:
    """Greens that differ where the others agree are refused; red for blue, and anything under grey light, are not."""
    for name in ("flat", "shaded flat", "edge 5", "turned board", "clouds", "star"):
        for colours in GAINS:
            codes = take(SCENES[name], replace(CAMERA, mosaic=mosaic), 2, colours)
            for declared in ORDERS:
                alike = {mosaic, declared} in ({"RGGB", "BGGR"}, {"GRBG", "GBRG"}, {mosaic})
                told = "" if alike or colours == "grey" else f"read as {declared}, the two green sites differ by "
                if told and colours in {"tungsten", "red"}:
                    with pytest.raises(FrameRefused, match=f"{told}.*likely is mosaic: .*{mosaic}"):
                        check_mosaic(codes, "a.tif", replace(CAMERA, mosaic=declared))
                elif not told:
                    check_mosaic(codes, "a.tif", replace(CAMERA, mosaic=declared))


@pytest.mark.parametrize("mosaic", ORDERS)
def test_honest_mosaics_pass(mosaic: str) -> None:
    """No scene under any light is refused in its own mosaic."""
    camera = replace(CAMERA, mosaic=mosaic)

    for number, light in enumerate(SCENES.values()):
        colours = list(GAINS)[(number + ORDERS.index(mosaic)) % len(GAINS)]
        check_mosaic(take(light, camera, number, colours), "a.tif", camera)


def test_sentences_say_what_to_do() -> None:
    """A refusal names the file, what speaks against the declaration, what is likely, and where to correct it."""
    words = _told(take(SCENES["flat"], CAMERA, 1), Layout("16 bit", "big"), replace(CAMERA, layout=LITTLE))

    assert re.fullmatch(
        r"a\.raw: read as 16 bit, byte order little, neighbouring pixels differ by \S+ DN, read otherwise by \S+ DN; "
        r"likely is byte_order: big; correct camera: layout in the spec, or the export",
        words,
    )
