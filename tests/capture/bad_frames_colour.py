"""Staged bad captures of colour cameras: one channel for three, three for one, lost planes, a mosaic out of step."""

from dataclasses import replace
from io import BytesIO
from typing import Any

import h5py
import numpy as np
from astropy.io import fits
from numpy.typing import NDArray

from tests.capture.bad_frames import npy, png, tiff, zero_tail
from tests.capture.raw_scenes import Codes
from tests.capture.staged import CAMERA, Kind, Staged, frames_of, second, spec_text

MOSAIC = replace(CAMERA, mosaic="RGGB")


def rgb(codes: Codes) -> NDArray[np.uint16]:
    """Return a colour frame whose planes differ in noise and level."""
    return np.stack([codes, codes[::-1] // 2 + 40, codes[:, ::-1] // 4 + 50], axis=-1).astype(np.uint16)


def rgb_tiff(codes: Codes, planar: str = "contig") -> bytes:
    """Return a colour TIFF, interleaved or in planes."""
    colours = rgb(codes) if planar == "contig" else np.moveaxis(rgb(codes), -1, 0).copy()
    return tiff(colours, photometric="rgb", planarconfig=planar)


def as_fits(codes: NDArray[np.generic]) -> bytes:
    """Return a FITS file whose first row is the upper one."""
    file, unit = BytesIO(), fits.PrimaryHDU(codes)
    unit.header["ROWORDER"] = "TOP-DOWN"
    unit.writeto(file)
    return file.getvalue()


def as_hdf5(codes: NDArray[np.generic], path: str = "entry/frames", **options: Any) -> bytes:
    """Return an HDF5 file with one dataset."""
    file = BytesIO()
    with h5py.File(file, "w") as written:
        written.create_dataset(path, data=codes, **options)
    return file.getvalue()


def _two_datasets(codes: Codes) -> bytes:
    file = BytesIO()
    with h5py.File(file, "w") as written:
        written.create_dataset("a", data=codes)
        written.create_dataset("b", data=codes)
    return file.getvalue()


COLOUR = Kind(spec_text("  colour: rgb\n"), frames_of(rgb_tiff, "tif"))
MOSAICS = Kind(spec_text("  mosaic: RGGB\n"), frames_of(tiff, "tif", MOSAIC))
GREY = Kind(spec_text(), frames_of(as_fits, "fits"))

BAD_COLOUR = (
    Staged("mono TIFF of a colour camera", "holds one grey channel; three colour channels", COLOUR,
           second(tiff, "tif")),
    Staged("mono PNG of a colour camera", "holds one grey channel", COLOUR, second(png, "png")),
    Staged("mono NPY of a colour camera", "holds one value per pixel", COLOUR, second(npy, "npy")),
    Staged("colour planes in front", "three colours as planes", COLOUR,
           second(lambda c: npy(np.moveaxis(rgb(c), -1, 0).copy()), "npy")),
    Staged("two channels", r"the array has the shape \(144, 192, 2\)", COLOUR,
           second(lambda c: npy(rgb(c)[..., :2].copy()), "npy")),
    Staged("colour with transparency", "transparency", COLOUR,
           second(lambda c: tiff(np.dstack([rgb(c), c]), photometric="rgb", extrasamples=["unassalpha"]), "tif")),
    Staged("colour TIFF cut", "the file is truncated", COLOUR, second(lambda c: rgb_tiff(c)[:90000], "tif")),
    Staged("last plane still zero", r"the last \d+ of 82944 values are zero", COLOUR,
           second(lambda c: zero_tail(rgb_tiff(c, "separate"), 40000), "tif")),
    Staged("one plane too bright for its depth", "the highest code is 8", COLOUR,
           second(lambda c: tiff(rgb(c) + np.array([0, 0, 8000], np.uint16), photometric="rgb"), "tif")),
    Staged("not a number in one plane", "1 of 82944 pixels are not finite", COLOUR,
           second(lambda c: npy(np.where(np.arange(82944).reshape(144, 192, 3) == 7, np.nan, rgb(c))), "npy")),
    Staged("colour frame of a mono camera", "3 colour channels; one grey channel", GREY, second(rgb_tiff, "tif")),
    Staged("colour frame of a mosaic", "3 colour channels", MOSAICS, second(rgb_tiff, "tif")),
    Staged("mosaic shifted by a column", "read as RGGB, the two green sites differ", MOSAICS,
           second(lambda c: tiff(np.roll(c, 1, axis=1)), "tif", MOSAIC)),
    Staged("mosaic upside down", "likely is mosaic: GRBG or GBRG", MOSAICS,
           second(lambda c: tiff(c[::-1].copy()), "tif", MOSAIC)),
    Staged("FITS cut", "the file is truncated: it holds 40000 bytes, no whole blocks", GREY,
           second(lambda c: as_fits(c)[:40000], "fits")),
    Staged("FITS cut at a block", "cannot be decoded|truncated", GREY, second(lambda c: as_fits(c)[:28800], "fits")),
    Staged("FITS with a zero tail", "its last 8000 bytes are zero", GREY,
           second(lambda c: zero_tail(as_fits(c), 8000), "fits")),
    Staged("FITS scaled", r"the file scales its numbers \(BSCALE 0.5", GREY,
           second(lambda c: as_fits(c).replace(b"BSCALE  =" + b"1".rjust(21), b"BSCALE  = 0.5".ljust(30)), "fits")),
    Staged("HDF5 of two datasets", "the file holds 2 datasets", GREY,
           second(_two_datasets, "h5")),
    Staged("HDF5 cut", "cannot be decoded|truncated", GREY, second(lambda c: as_hdf5(c)[:30000], "h5")),
    Staged("HDF5 with a zero tail", "pixels are zero|bytes are zero", GREY,
           second(lambda c: zero_tail(as_hdf5(c), 5000), "h5")),
)  # fmt: skip
"""Each replaces the second frame."""
