"""How fast packed pixels of headerless files are unpacked, beside the shortest NumPy that does it."""

import numpy as np
import pytest

from runner.capture.formats.packed import rows_of, unpack
from runner.spec.files import PACKINGS, Layout
from runner.spec.model import Camera
from tests.benchmarks.side_by_side import Row, best_cpu, show

WIDTH, HEIGHT = 4000, 3000
ROUNDS = 9
PACKED = [name for name, packing in PACKINGS.items() if packing.pixels > 1]
LEAST, MOST = 200.0, 2.0
"""MP/s that are enough; else, times the plain unpack that may be taken."""


def _plain(three: np.ndarray) -> np.ndarray:
    """Unpack `12 bit low bits first` the way it is written down first; all packings move as many bits."""
    x = three.astype(np.uint16)
    out = np.empty((x.shape[0], 2), np.uint16)
    out[:, 0] = x[:, 0] | (x[:, 1] & 15) << 8
    out[:, 1] = x[:, 1] >> 4 | x[:, 2] << 4
    return out


@pytest.mark.benchmark
def test_packed_pixels() -> None:
    """Every packing unpacks 200 MP/s, or takes at most twice the plain unpack's time; both give the same pixels."""
    megapixels = WIDTH * HEIGHT / 1e6
    rows = []
    for name in PACKED:
        layout = Layout(name)
        camera = Camera(WIDTH, HEIGHT, PACKINGS[name].bits, 4, 250, layout=layout)
        data = np.random.default_rng(1).bytes(layout.file_bytes(WIDTH, HEIGHT))
        (packed,) = rows_of(data, camera)
        twelve = np.random.default_rng(1).bytes(WIDTH * HEIGHT * 3 // 2)
        three = np.frombuffer(twelve, np.uint8).reshape(-1, 3)
        best = best_cpu({"ours": lambda p=packed, k=layout: unpack(p, k), "plain": lambda t=three: _plain(t)}, ROUNDS)  # type: ignore[misc]
        speed, ratio = megapixels / best["ours"], best["ours"] / best["plain"]
        rows.append(Row(f"{name}: speed", speed, "MP/s", LEAST, at_least=True))
        rows.append(Row(f"{name}: time / plain NumPy (enough where the speed is not)", ratio, "×", MOST))
    show(f"One frame of {megapixels:.0f} MP out of packed bytes: best CPU time of {ROUNDS} turns", rows)

    low = Layout("12 bit low bits first")
    assert np.array_equal(unpack(three.reshape(HEIGHT, -1), low).ravel(), _plain(three).ravel())
