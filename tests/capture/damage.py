"""Reads damaged and lying files one after another and reports what must never happen; run as a program of its own.

A process of its own, because the most memory that a process ever set aside can be asked for but not set back. Prints
JSON: what was `wrong`, the `longest` time of one file in s, the growth of address space in MB, and the `outcomes`.
"""

import json
import sys
import time
import zlib
from collections import Counter
from collections.abc import Callable, Iterator
from pathlib import Path

import numpy as np

from runner.capture.readers import read_frames
from runner.errors import FrameRefused
from runner.spec.model import Camera
from tests.capture.bad_frames import chart_codes
from tests.capture.hand_made import chunk, npy_by_hand, png_by_hand, png_header, png_pixels, tiff_by_hand
from tests.capture.test_readers import CUT

CODES = chart_codes(1)
CAMERA = Camera(160, 120, 12, 64, 4095)

Damage = Callable[[np.random.Generator, bytearray], bytearray]


def _cut(rng: np.random.Generator, data: bytearray) -> bytearray:
    return data[: rng.integers(len(data))]


def _flip_bits(rng: np.random.Generator, data: bytearray) -> bytearray:
    reach = min(len(data), int(rng.choice([64, 400, len(data)])))
    for place in rng.integers(8 * reach, size=rng.integers(1, 9)).tolist():
        data[place // 8] ^= 1 << (place % 8)
    return data


def _overwrite(rng: np.random.Generator, data: bytearray) -> bytearray:
    start, size = int(rng.integers(len(data))), int(rng.integers(1, 65))
    data[start : start + size] = rng.bytes(size)
    return data


def _extreme_number(rng: np.random.Generator, data: bytearray) -> bytearray:
    """Put the least and greatest numbers of 1, 2, 4 or 8 bytes where a header may hold them."""
    at_the_end = bool(rng.integers(2))
    start, size = int(rng.integers(min(len(data), 300))), int(rng.choice([1, 2, 4, 8]))
    start = len(data) - 1 - start if at_the_end else start
    number = (0, 1, 2 ** (8 * size - 1), 2 ** (8 * size) - 1)[rng.integers(4)]
    data[start : start + size] = number.to_bytes(size, "little" if rng.integers(2) else "big")
    return data


def _shift(rng: np.random.Generator, data: bytearray) -> bytearray:
    start, size = int(rng.integers(len(data))), int(rng.integers(1, 33))
    if rng.integers(2):
        del data[start : start + size]
    else:
        data[start:start] = rng.bytes(size)
    return data


def _noise(rng: np.random.Generator, data: bytearray) -> bytearray:
    """Keep the first bytes, which name the format, and nothing else."""
    kept = int(rng.integers(0, 40))
    return data[:kept] + bytearray(rng.bytes(int(rng.integers(1, 3000))))


DAMAGES: tuple[Damage, ...] = (_cut, _flip_bits, _overwrite, _extreme_number, _shift, _noise)


def damaged(seed: int, count: int) -> Iterator[tuple[str, bytes, Camera]]:
    """Yield files of every format and every kind of damage in turn; each follows from the seed alone."""
    names = sorted(CUT)
    for number in range(count):
        rng = np.random.default_rng([seed, number])
        name = names[number % len(names)]
        content, _, camera = CUT[name]
        yield name, bytes(DAMAGES[number // len(names) % len(DAMAGES)](rng, bytearray(content))), camera


def _bomb() -> bytes:
    """Return a frame and half a gigabyte of zeros behind it, compressed piece by piece."""
    press = zlib.compressobj(1)
    pieces = [press.compress(CODES.tobytes()), *(press.compress(bytes(2**20)) for _ in range(512)), press.flush()]
    return b"".join(pieces)


def liars() -> Iterator[tuple[str, bytes, Camera]]:
    """Yield sound files that claim gigabytes, or unpack to them."""
    giant, strip = (10**9, 10**9), zlib.compress(CODES.tobytes())
    bomb = _bomb()
    npy = "{'descr': '<u2', 'fortran_order': False, 'shape': %s, }"
    jpeg = bytearray(CUT["a.jpg"][0])
    header = jpeg.index(b"\xff\xc0")
    jpeg[header + 5 : header + 9] = b"\xff\xff\xff\xff"
    files = {
        "size.tif": tiff_by_hand([CODES.tobytes()], size=giant),
        "big size.tif": tiff_by_hand([CODES.tobytes()], size=giant, big=True),
        "tile.tif": tiff_by_hand([strip], tags={322: 65536, 323: 65536, 259: 8}),
        "rows.tif": tiff_by_hand([strip], tags={278: 2**32 - 1, 259: 8}),
        "deflate.tif": tiff_by_hand([bomb], tags={259: 8}),
        "size.png": png_by_hand(png_header(*giant), png_pixels(CODES)),
        "second header.png": png_by_hand(png_header(), png_header(60000, 60000), png_pixels(CODES)),
        "text.png": png_by_hand(png_header(), chunk(b"zTXt", b"Comment\0\0" + bomb), png_pixels(CODES)),
        "profile.png": png_by_hand(png_header(), chunk(b"iCCP", b"p\0\0" + bomb), png_pixels(CODES)),
        "pixels.png": png_by_hand(png_header(), chunk(b"IDAT", bomb)),
        "size.npy": npy_by_hand(npy % str(giant), CODES.tobytes()),
        "pages.npy": npy_by_hand(npy % "(1000000000, 120, 160)", CODES.tobytes()),
        "header.npy": b"\x93NUMPY\2\0" + b"\xff" * 4 + CODES.tobytes(),
    }
    yield from ((name, data, CAMERA) for name, data in files.items())
    yield "size.jpg", bytes(jpeg), CUT["a.jpg"][2]


def _most_memory() -> int:
    """Return the most address space that this process ever had, in MB; 0 where the system does not tell."""
    try:
        lines = Path("/proc/self/status").read_text(encoding="ascii").splitlines()
    except OSError:
        return 0
    return int(next(line for line in lines if line.startswith("VmPeak")).split()[1]) // 1024


def _outcome(path: Path, camera: Camera) -> tuple[str, str]:
    """Return how reading ended, and what is wrong with that, if anything is."""
    try:
        frames = read_frames(path, camera)
    except FrameRefused as error:
        sentence = str(error)
        fine = sentence.startswith(path.name) and sentence.isprintable() and ";" in sentence and len(sentence) < 600
        return "refused", "" if fine and not isinstance(error.__cause__, MemoryError) else sentence
    except BaseException as error:  # noqa: BLE001 (whatever it is, it is what this program looks for)
        return "failed", repr(error)
    sound = all(frame.shape == (120, 160) and np.isfinite(frame.codes).all() for frame in frames)
    return "read", "" if frames and sound else "frames that are not the camera's"


def main(folder: Path, seed: int, count: int) -> None:
    """Read all files and print what was found out."""
    lying = list(liars())
    before, longest, wrong, outcomes = _most_memory(), 0.0, list[str](), Counter[str]()
    for files, kind in ((lying, "lying"), (damaged(seed, count), "damaged")):
        for number, (name, data, camera) in enumerate(files):
            (folder / name).write_bytes(data)
            start = time.perf_counter()
            outcome, fault = _outcome(folder / name, camera)
            longest = max(longest, time.perf_counter() - start)
            outcomes[f"{kind} {outcome}"] += 1
            wrong += [f"{kind} {number}, {name}: {fault}"] if fault else []
    grown = _most_memory() - before
    print(json.dumps({"wrong": wrong, "longest": longest, "grown": grown, "outcomes": outcomes}))


if __name__ == "__main__":
    main(Path(sys.argv[1]), int(sys.argv[2]), int(sys.argv[3]))
