"""A file is read once and exactly, or refused with a sentence that says what to do."""

import hashlib
import importlib
import io
import os
import re
import sys
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
import tifffile
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from imagecodecs import png_encode
from numpy.typing import NDArray
from PIL import Image
from PIL.PngImagePlugin import PngInfo

from runner.capture import readers
from runner.capture.readers import read_frames
from runner.errors import FrameRefused, UsageError
from runner.spec.files import PACKINGS, Layout
from runner.spec.model import Camera
from tests.capture.bad_frames import BAD_FILES, BadCapture, chart_codes, npy, picture, png, tiff, zero_tail
from tests.capture.bad_frames_colour import as_fits, as_hdf5
from tests.capture.raw_scenes import write

CAMERA = Camera(160, 120, 12, 64, 4095)
CODES = chart_codes(1)
GREY = (CODES // 16).astype(np.uint8)
EIGHT = Camera(160, 120, 8, 0, 255, delivers="jpeg")
STACK = np.stack([chart_codes(seed) for seed in (1, 2, 3)])
RGB = np.stack([chart_codes(4), chart_codes(5) // 2 + 40, chart_codes(6) // 4 + 60], axis=-1).astype(np.uint16)
PLANES = np.ascontiguousarray(np.moveaxis(RGB, -1, 0))
COLOUR = replace(CAMERA, colour="rgb")
EIGHT_RGB = replace(EIGHT, colour="rgb")
LAYOUTS = [
    Layout(name, "little" if name == "16 bit" else "", row_padding=16, header=64)
    for name, one in PACKINGS.items()
    if one.bits >= 12
]
BIG = Layout("16 bit", "big", frames_per_file=1)


def _read(folder: Path, name: str, data: bytes, camera: Camera = CAMERA) -> NDArray[np.generic]:
    path = folder / name
    path.write_bytes(data)
    frames = read_frames(path, camera)
    assert all(frame.sha256 == hashlib.sha256(data).hexdigest() for frame in frames)
    return np.stack([frame.codes for frame in frames]) if len(frames) > 1 else frames[0].codes


FORMATS: dict[str, tuple[bytes, NDArray[np.generic], Camera]] = {
    "plain.tif": (tiff(CODES), CODES, CAMERA),
    "8 bit.tif": (tiff(GREY), GREY, EIGHT),
    "32 bit.tif": (tiff(CODES.astype(np.uint32)), CODES.astype(np.uint32), CAMERA),
    "float32.tif": (tiff(CODES.astype(np.float32)), CODES.astype(np.float32), CAMERA),
    "float64.tif": (tiff(CODES + 0.25), CODES + 0.25, CAMERA),
    "12 bit packed.tif": (tiff(CODES, bitspersample=12), CODES, CAMERA),
    "strips.tiff": (tiff(CODES, rowsperstrip=7), CODES, CAMERA),
    "tiles.tif": (tiff(CODES, tile=(64, 64)), CODES, CAMERA),
    "tiles deflate.tif": (tiff(CODES, tile=(64, 64), compression="zlib"), CODES, CAMERA),
    "deflate.TIF": (tiff(CODES, compression="zlib", predictor=True), CODES, CAMERA),
    "lzw.tif": (tiff(CODES, compression="lzw", rowsperstrip=16), CODES, CAMERA),
    "packbits.tif": (tiff(CODES, compression="packbits"), CODES, CAMERA),
    "zstandard.tif": (tiff(CODES, compression="zstd"), CODES, CAMERA),
    "big endian.tif": (tiff(CODES, byteorder=">"), CODES, CAMERA),
    "big.tif": (tiff(CODES, bigtiff=True), CODES, CAMERA),
    "big big endian.tif": (tiff(CODES, bigtiff=True, byteorder=">"), CODES, CAMERA),
    "pillow.tif": (picture(Image.fromarray(CODES), "TIFF"), CODES, CAMERA),
    "pages.tif": (tiff(STACK), STACK, CAMERA),
    "pages deflate.tif": (tiff(STACK, compression="zlib"), STACK, CAMERA),
    "shaped.tif": (tiff(STACK, metadata={"axes": "ZYX"}), STACK, CAMERA),
    "stack.ome.tif": (tiff(STACK, ome=True, metadata={"axes": "ZYX"}), STACK, CAMERA),
    "grey.png": (png(GREY), GREY, EIGHT),
    "16 bit.png": (png(CODES), CODES, CAMERA),
    "plain.npy": (npy(CODES), CODES, CAMERA),
    "big endian.npy": (npy(CODES.astype(">u2")), CODES, CAMERA),
    "columns.npy": (npy(np.asfortranarray(CODES)), CODES, CAMERA),
    "whole.npy": (npy(CODES.astype(np.int64)), CODES.astype(np.int64), CAMERA),
    "float.npy": (npy(CODES.astype(">f4")), CODES.astype(np.float32), CAMERA),
    "stack.npy": (npy(STACK), STACK, CAMERA),
    "columns stack.npy": (npy(np.asfortranarray(STACK)), STACK, CAMERA),
    "rgb.tif": (tiff(RGB, photometric="rgb"), RGB, COLOUR),
    "rgb planes.tif": (tiff(PLANES, photometric="rgb", planarconfig="separate"), RGB, COLOUR),
    "rgb tiles.tif": (tiff(RGB, photometric="rgb", tile=(64, 64)), RGB, COLOUR),
    "rgb tiled planes.tif": (
        tiff(PLANES, photometric="rgb", planarconfig="separate", tile=(64, 64)),
        RGB,
        COLOUR,
    ),
    "rgb deflate.tif": (tiff(RGB, photometric="rgb", compression="zlib", predictor=True), RGB, COLOUR),
    "rgb planes deflate.tif": (
        tiff(PLANES, photometric="rgb", planarconfig="separate", compression="zlib"),
        RGB,
        COLOUR,
    ),
    "rgb pages.tif": (tiff(np.stack([RGB, RGB + 1]), photometric="rgb"), np.stack([RGB, RGB + 1]), COLOUR),
    "rgb shaped.tif": (tiff(RGB, photometric="rgb", metadata={"axes": "YXS"}), RGB, COLOUR),
    "rgb big endian.tif": (tiff(RGB, photometric="rgb", byteorder=">"), RGB, COLOUR),
    "rgb float.tif": (tiff(RGB.astype(np.float32), photometric="rgb"), RGB.astype(np.float32), COLOUR),
    "rgb 8 bit.png": (png((RGB // 16).astype(np.uint8)), (RGB // 16).astype(np.uint8), EIGHT_RGB),
    "rgb 16 bit.png": (bytes(png_encode(RGB)), RGB, COLOUR),
    "rgb.npy": (npy(RGB), RGB, COLOUR),
    "rgb columns.npy": (npy(np.asfortranarray(RGB)), RGB, COLOUR),
    "rgb stack.npy": (npy(np.stack([RGB, RGB + 1])), np.stack([RGB, RGB + 1]), COLOUR),
    "plain.fits": (as_fits(CODES), CODES, CAMERA),
    "stack.fit": (as_fits(STACK), STACK, CAMERA),
    "rgb.fts": (as_fits(PLANES), RGB, COLOUR),
    "plain.h5": (as_hdf5(CODES), CODES, CAMERA),
    "chunks.hdf5": (as_hdf5(STACK, chunks=(1, 120, 160)), STACK, CAMERA),
    "gzip.h5": (as_hdf5(CODES, compression="gzip", shuffle=True), CODES, CAMERA),
    "rgb.h5": (as_hdf5(RGB), RGB, COLOUR),
    **{f"{layout.packing}.raw": (write(CODES, layout), CODES, replace(CAMERA, layout=layout)) for layout in LAYOUTS},
    "big endian.bin": (write(CODES, BIG), CODES, replace(CAMERA, layout=BIG)),
    "8 bit.raw": (
        write(GREY, Layout("8 bit")),
        GREY,
        replace(EIGHT, delivers="raw", black_level=4, layout=Layout("8 bit")),
    ),
}
"""Files by their names: bytes, the codes that must come out, and the camera."""


@pytest.mark.parametrize("name", FORMATS)
def test_codes_come_back_exactly(name: str, tmp_path: Path) -> None:
    """Every format gives back each code and the number type, in this machine's byte order, closed to writing."""
    data, codes, camera = FORMATS[name]

    found = _read(tmp_path, name, data, camera)

    assert found.dtype == codes.dtype
    assert np.array_equal(found, codes)
    with pytest.raises(ValueError, match="read-only"):
        read_frames(tmp_path / name, camera)[0].codes[0, 0] = 1


def test_png_keeps_all_sixteen_bits(tmp_path: Path) -> None:
    """A PNG of a 16 bit camera gives back codes that differ in the last bit only."""
    codes = (np.arange(120 * 160, dtype=np.uint32).reshape(120, 160) * 3 + 1).astype(np.uint16)

    assert np.array_equal(_read(tmp_path, "a.png", png(codes), replace(CAMERA, bit_depth=16)), codes)


def test_jpeg_in_colour_has_three_channels(tmp_path: Path) -> None:
    """A colour JPEG is read as its own decoder reads it; a grey one is refused for a colour camera."""
    data = picture(Image.fromarray((RGB // 16).astype(np.uint8)), "JPEG")

    assert np.array_equal(_read(tmp_path, "a.jpg", data, EIGHT_RGB), np.asarray(Image.open(io.BytesIO(data))))
    with pytest.raises(FrameRefused, match="one grey channel; three colour channels"):
        _read(tmp_path, "b.jpg", picture(Image.fromarray(GREY), "JPEG"), EIGHT_RGB)


def test_endings_are_those_of_the_formats() -> None:
    """What no format claims is headerless where a layout is stated: the reader knows every format's endings."""
    modules = [importlib.import_module(f"runner.capture.formats.{kind}") for _, kind in readers._FORMATS]

    assert {ending for module in modules for ending in module.ENDINGS} == readers._ENDINGS


def test_a_missing_package_is_told_with_what_to_install(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Without the extra nobody's file is blamed: the run stops and says what to install."""
    for name, data, package in (
        ("a.fits", FORMATS["plain.fits"][0], "astropy"),
        ("a.h5", FORMATS["plain.h5"][0], "h5py"),
    ):
        kind = "fits" if package == "astropy" else "hdf5"
        for module in (package, "astropy.io") if package == "astropy" else (package,):
            monkeypatch.setitem(sys.modules, module, None)
        monkeypatch.delitem(sys.modules, f"runner.capture.formats.{kind}", raising=False)
        with pytest.raises(
            UsageError,
            match=rf"a\.\w+: .*the package {package}.* is not installed; install it: pip install 'probatum\[{kind}\]'",
        ):
            _read(tmp_path, name, data)


def test_jpeg_of_a_product_that_delivers_it(tmp_path: Path) -> None:
    """A grey JPEG is read as its own decoder reads it, also with three equal channels; colours are refused."""
    grey = picture(Image.fromarray(GREY), "JPEG")
    triple = picture(Image.fromarray(np.stack([GREY] * 3, -1)), "JPEG")

    assert np.array_equal(_read(tmp_path, "a.jpg", grey, EIGHT), np.asarray(Image.open(io.BytesIO(grey))))
    assert _read(tmp_path, "b.jpeg", triple, EIGHT).shape == (120, 160)
    with pytest.raises(FrameRefused, match="3 colour channels"):
        _read(tmp_path, "c.jpg", picture(Image.fromarray(np.stack([GREY, GREY // 2, GREY], -1)), "JPEG"), EIGHT)


CUT = {name: FORMATS[name] for name in FORMATS} | {
    "a.jpg": (picture(Image.fromarray(GREY), "JPEG"), GREY, EIGHT),
    "rgb.jpg": (picture(Image.fromarray((RGB // 16).astype(np.uint8)), "JPEG"), GREY, EIGHT_RGB),
}


@pytest.mark.parametrize("name", CUT)
def test_every_cut_is_refused(name: str, tmp_path: Path) -> None:
    """A file that ends early is refused wherever it ends: sixty places; only padding behind all that counts may go."""
    data, codes, camera = CUT[name]
    path = tmp_path / name
    padding = 16 if name in {"pages.tif", "shaped.tif"} else 0  # what the writer puts behind the last directory

    for size in {*np.linspace(1, len(data) - 1 - padding, 58).astype(int).tolist(), len(data) - 1, len(data) - 2}:
        path.write_bytes(data[:size])
        if size >= len(data) - padding:
            assert np.array_equal(np.stack([frame.codes for frame in read_frames(path, camera)]), codes)
            continue
        with pytest.raises(FrameRefused, match=re.escape(name)):
            read_frames(path, camera)


@pytest.mark.parametrize("name", CUT)
def test_zero_tail_is_refused_at_every_length(name: str, tmp_path: Path) -> None:
    """A file that was given its size and is still zero at its end is refused, from 4096 bytes on (common practice)."""
    data, _, camera = CUT[name]
    path = tmp_path / name

    for size in np.linspace(4096, len(data), 40).astype(int).tolist():
        path.write_bytes(zero_tail(data, size) if size < len(data) else bytes(size))
        with pytest.raises(FrameRefused, match=r"zero|truncated|cannot be decoded"):
            read_frames(path, camera)


@pytest.mark.parametrize("ending", ["tif", "npy"])
def test_black_level_zero_does_not_hide_a_zero_tail(ending: str, tmp_path: Path) -> None:
    """At black level zero, light that falls to exact zero from one line to the next for good is still refused."""
    camera, data = replace(CAMERA, black_level=0), (tiff if ending == "tif" else npy)(CODES)

    for size in np.linspace(4096, len(data) - 400, 40).astype(int).tolist():
        with pytest.raises(FrameRefused, match="pixels are zero"):
            _read(tmp_path, f"a.{ending}", zero_tail(data, size), camera)


def test_dark_border_at_black_level_zero_is_a_picture(tmp_path: Path) -> None:
    """A dark border, and a clamped dark frame, are honest zeros where the black level is zero."""
    y = np.arange(120)[:, np.newaxis]
    border = np.where(y < 60, CODES, np.clip(CODES * np.exp(-(y - 60.0)), 0, None)).astype(np.uint16)
    assert not border[-16:].any()

    for name, codes in (("a.tif", border), ("b.npy", border), ("c.tif", CODES * 0)):
        make = npy if name.endswith("npy") else tiff
        assert np.array_equal(_read(tmp_path, name, make(codes), replace(CAMERA, black_level=0)), codes)


def test_padding_of_tiles_is_no_zero_tail(tmp_path: Path) -> None:
    """The zeros with which a writer fills the tiles at the border belong to no pixel."""
    assert np.array_equal(_read(tmp_path, "a.tif", tiff(CODES, tile=(256, 256))), CODES)


@pytest.mark.parametrize("bad", BAD_FILES, ids=lambda bad: bad.name)
def test_sentence_has_its_four_parts(bad: BadCapture, tmp_path: Path) -> None:
    """A refusal says where, what was found, and what is allowed or what to do, in one line."""
    from tests.capture.bad_frames import UNIT, good_lot

    good_lot(tmp_path)
    bad.spoil(tmp_path)
    (path,) = (tmp_path / UNIT).glob("chart-2.*")

    with pytest.raises(FrameRefused, match=bad.says) as caught:
        read_frames(path, CAMERA, name="somewhere/chart-2")

    refused = caught.value
    assert refused.where.startswith("somewhere/chart-2")
    assert refused.found
    assert refused.allowed or refused.next_step
    assert str(refused).isprintable()


def test_every_staged_error_has_a_sentence_of_its_own() -> None:
    """No two kinds of error are told alike, unless they are the same thing in two formats."""
    assert len({bad.says for bad in BAD_FILES}) >= 40


@settings(max_examples=150, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(st.data())
def test_damaged_bytes_end_in_a_refusal_or_in_a_frame(tmp_path: Path, data: st.DataObject) -> None:
    """Whatever bytes a file holds, the outcome is whole frames of the camera or one sentence, never a crash."""
    name = data.draw(st.sampled_from(sorted(CUT)))
    content, _, camera = CUT[name]
    spoilt = bytearray(content)
    for _ in range(data.draw(st.integers(1, 20))):
        reach = data.draw(st.sampled_from([64, 400, len(content)]))
        spoilt[data.draw(st.integers(0, min(reach, len(content)) - 1))] = data.draw(st.integers(0, 255))
    path = tmp_path / name
    path.write_bytes(bytes(spoilt))

    try:
        frames = read_frames(path, camera)
    except FrameRefused:
        return

    assert all(frame.shape == (120, 160) for frame in frames)


MARKED: dict[str, Callable[[], bytes]] = {
    "json.tif": lambda: tiff(CODES, description='{"probatum": "simulated frame", "serial": "WS8-000007"}'),
    "text.tif": lambda: tiff(CODES, description="probatum simulated frame", extratags=[(50735, 2, 11, "WS8-000007")]),
    "stack.tif": lambda: tiff(STACK, description='{"serial": "WS8-000007", "probatum": "simulated frame"}'),
    "a.png": lambda: _png_with({"Serial": "WS8-000007", "Description": "Probatum simulated frame"}),
}


def _png_with(texts: dict[str, str]) -> bytes:
    notes, file = PngInfo(), io.BytesIO()
    for name, text in texts.items():
        notes.add_text(name, text)
    Image.fromarray(CODES).save(file, "PNG", pnginfo=notes)
    return file.getvalue()


@pytest.mark.parametrize("name", MARKED)
def test_mark_and_serial_are_read(name: str, tmp_path: Path) -> None:
    """A file says that it is simulated, and of which unit it is, in the ways its format knows."""
    (tmp_path / name).write_bytes(MARKED[name]())

    for frame in read_frames(tmp_path / name, CAMERA):
        assert frame.simulated
        assert frame.metadata["serial"] == "WS8-000007"


def test_same_picture_has_the_same_pixel_digest(tmp_path: Path) -> None:
    """The digest of pixels does not depend on format, compression or byte order, but on every single code."""
    names = ["plain.tif", "big endian.tif", "lzw.tif", "tiles.tif", "16 bit.png", "columns.npy"]
    for name in names:
        (tmp_path / name).write_bytes(FORMATS[name][0])
    other = CODES.copy()
    other[50, 50] ^= 1
    (tmp_path / "other.tif").write_bytes(tiff(other))

    digests = {read_frames(tmp_path / name, CAMERA)[0].pixels_sha256 for name in names}

    assert len(digests) == 1
    assert read_frames(tmp_path / "other.tif", CAMERA)[0].pixels_sha256 not in digests


def test_pages_are_frames_with_an_axis(tmp_path: Path) -> None:
    """A stack gives one frame per page, numbered from 0; a single frame has no page."""
    (tmp_path / "a.tif").write_bytes(tiff(STACK))
    (tmp_path / "b.tif").write_bytes(tiff(CODES))

    pages = read_frames(tmp_path / "a.tif", CAMERA)

    assert [(frame.page, dict(frame.axes)) for frame in pages] == [(n, {"page": str(n)}) for n in range(3)]
    assert (read_frames(tmp_path / "b.tif", CAMERA)[0].page, read_frames(tmp_path / "b.tif", CAMERA)[0].axes) == (
        None,
        {},
    )


def test_what_is_no_readable_file_is_refused(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Folders, pipes, lost files and files that may not be read each have their sentence, and none blocks."""
    (tmp_path / "folder.tif").mkdir()
    os.mkfifo(tmp_path / "pipe.tif")
    (tmp_path / "locked.tif").write_bytes(tiff(CODES))

    with pytest.raises(FrameRefused, match="it is a folder"):
        read_frames(tmp_path / "folder.tif", CAMERA)
    with pytest.raises(FrameRefused, match="a device or a pipe"):
        read_frames(tmp_path / "pipe.tif", CAMERA)
    with pytest.raises(FrameRefused, match=r"cannot be read \(no such file"):
        read_frames(tmp_path / "lost.tif", CAMERA)

    def locked(*_args: object, **_more: object) -> None:
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr(Path, "open", locked)
    with pytest.raises(FrameRefused, match=r"cannot be read \(permission denied\)"):
        read_frames(tmp_path / "locked.tif", CAMERA)


def test_ending_must_fit_the_content(tmp_path: Path) -> None:
    """What a file holds decides; a name that says otherwise means that someone renamed it."""
    (tmp_path / "a.tif").write_bytes(npy(CODES))
    (tmp_path / "frame").write_bytes(tiff(CODES))

    with pytest.raises(FrameRefused, match=r"holds NPY, its name ends in '\.tif'"):
        read_frames(tmp_path / "a.tif", CAMERA)
    with pytest.raises(FrameRefused, match="holds TIFF, its name ends in ''"):
        read_frames(tmp_path / "frame", CAMERA)


def test_bytes_are_read_once(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """The digest is of the bytes that were decoded: the file is opened a single time."""
    path, opened = tmp_path / "a.tif", list[Path]()
    open_file: Callable[..., object] = Path.open
    path.write_bytes(tiff(CODES, compression="zlib"))

    def counted(self: Path, *args: str) -> object:
        opened.append(self)
        return open_file(self, *args)

    monkeypatch.setattr(Path, "open", counted)
    read_frames(path, CAMERA)

    assert opened == [path]


def test_decoder_agrees_with_the_format_library(tmp_path: Path) -> None:
    """Plain pages are views of the bytes; the format library decodes the same codes from the same file."""
    (tmp_path / "a.tif").write_bytes(tiff(STACK, rowsperstrip=11, byteorder=">"))

    found = np.stack([frame.codes for frame in read_frames(tmp_path / "a.tif", CAMERA)])

    assert np.array_equal(found, tifffile.imread(tmp_path / "a.tif"))
