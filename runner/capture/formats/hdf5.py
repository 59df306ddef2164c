"""HDF5: one dataset, rows × columns (× 3 for colour), or a stack of frames along its first axis.

References:
    HDF5 File Format Specification Version 3.0 (The HDF Group): chunks and their places in the file.
"""

from io import BytesIO
from math import prod

import h5py
import numpy as np

from runner.capture.formats.contract import (
    COPY_AGAIN,
    Decoded,
    check_channels,
    check_pages,
    check_size,
    native,
    samples,
    truncated,
)
from runner.capture.frame import Codes
from runner.errors import FrameRefused
from runner.spec.model import Camera

ENDINGS = (".h5", ".hdf5", ".hdf")
_LOSSLESS = {1: "deflate", 2: "shuffle", 3: "check sum", 4: "szip", 32000: "LZF"}
"""Filters by their registered numbers that give back every bit."""


def decode(data: bytes, where: str, camera: Camera) -> Decoded:
    """Decode the dataset that the spec names, or the only one; see `Format.decode`."""
    with h5py.File(BytesIO(data), "r") as file:
        dataset = _dataset(file, where, camera)
        rank = 2 if samples(camera) == 1 else 3
        _check(dataset, rank, where, camera)
        texts = {
            name.capitalize(): str(value.decode() if isinstance(value, bytes) else value)
            for attributes in (file.attrs, dataset.attrs)
            for name, value in attributes.items()
            if isinstance(value, str | bytes)
        }
        codes: Codes = dataset[...]
        stored = _in_file_order(dataset, codes, where)
    pages = (codes,) if codes.ndim == rank else tuple(codes)
    turn = -1 if camera.layout.first_row == "bottom" else 1
    return Decoded(
        tuple(native(page[::turn]) for page in pages),
        texts,
        stored,
        min(piece.size for piece in (*stored, pages[0][0])),
    )


def _dataset(file: h5py.File, where: str, camera: Camera) -> h5py.Dataset:
    """Return the dataset; links are not followed, for they may lead out of the file."""
    found: dict[str, h5py.Dataset] = {}

    def note(name: str, item: object) -> None:
        if isinstance(item, h5py.Dataset):
            found[name] = item

    file.visititems(note)
    path = camera.layout.dataset
    if (not path and len(found) != 1) or (path and path not in found):
        listed = ", ".join(sorted(found)[:5]) or "none"
        raise FrameRefused(
            f"the file holds no dataset '{path}'" if path else f"the file holds {len(found)} datasets",
            where=where,
            allowed=f"datasets in it: {listed}",
            next_step="name one in the spec: camera: layout: {dataset: …}",
        )
    return found[path] if path else next(iter(found.values()))


def _check(dataset: h5py.Dataset, rank: int, where: str, camera: Camera) -> None:
    """Refuse a dataset that is no stack of the camera's frames, before any pixel is read."""
    shape: tuple[int, ...] = tuple(dataset.shape or ())
    kind = dataset.dtype
    if kind.kind not in "uif" or dataset.is_virtual or dataset.external:
        words = "pixels in other files" if kind.kind in "uif" else f"values of type {kind}"
        raise FrameRefused(
            f"the dataset holds {words}",
            where=where,
            allowed="whole or floating-point numbers in the file itself",
            next_step="save the frame as a plain dataset of numbers",
        )
    grey = len(shape) == 2 or (len(shape) == 3 and shape[:2] != (camera.height, camera.width))
    if len(shape) in {2, 3} and grey != (rank == 2):
        words = "one value per pixel" if grey else f"{shape[-1]} values per pixel"
        check_channels(words, where, camera, channels=1 if grey else 0)
    if len(shape) not in {rank, rank + 1} or (rank == 3 and shape[-1] != 3):
        raise FrameRefused(
            f"the dataset has the shape {shape}",
            where=where,
            allowed="rows x columns" + (" x 3" if rank == 3 else "") + ", or a stack of them along the first axis",
        )
    check_size(shape[-rank + 1], shape[-rank], camera, where)
    check_pages(prod(shape[:-rank]), where, kind.itemsize * prod(shape[-rank:]))
    if not prod(shape):
        raise FrameRefused("the dataset holds no frame", where=where, next_step=COPY_AGAIN)
    plist = dataset.id.get_create_plist()
    lossy = {plist.get_filter(n)[0] for n in range(plist.get_nfilters())} - set(_LOSSLESS)
    if lossy:
        raise FrameRefused(
            f"the dataset is compressed by HDF5 filter {min(lossy)}, which is not known to be lossless",
            where=where,
            allowed=f"no compression, {', '.join(sorted(_LOSSLESS.values()))}",
            next_step="export the frames without compression",
        )


def _in_file_order(dataset: h5py.Dataset, codes: Codes, where: str) -> tuple[Codes, ...]:
    """Return the codes chunk by chunk as they lie in the file; a chunk that was never written is a lost piece."""
    if dataset.chunks is None:
        if dataset.id.get_storage_size() < codes.nbytes:
            raise truncated(where, "the dataset was never written")
        return (np.ravel(codes),)
    across = [-(-size // step) for size, step in zip(dataset.shape, dataset.chunks, strict=True)]
    there = dataset.id.get_num_chunks()
    if there < prod(across):
        raise truncated(where, f"{there} of {prod(across)} pieces of the dataset were written")
    places = sorted((info.byte_offset, info.chunk_offset) for info in map(dataset.id.get_chunk_info, range(there)))
    return tuple(
        codes[tuple(slice(at, at + step) for at, step in zip(place, dataset.chunks, strict=True))].ravel()
        for _, place in places
    )
