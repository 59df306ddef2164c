"""Noise reduction keeps edges, smears texture, and mixes no colours."""

import numpy as np

from runner.rehearse.denoising import Denoising

SMOOTH = Denoising(alike_dn=60, reach=2)


def test_noise_falls_and_edges_stay() -> None:
    """White noise of 10 DN falls by the root of 25 pixels, to 2 DN; a step of 1000 DN stays in its column."""
    rng = np.random.default_rng(3)
    scene = np.where(np.arange(80) < 40, 500.0, 1500.0) + rng.normal(0, 10, (60, 80))

    out = SMOOTH.apply(np.rint(scene).astype(np.uint16), 1).astype(float)

    assert np.isclose(out[5:-5, 5:35].std(), 2.0, rtol=0.15)
    assert np.all(np.abs(out[:, 39] - 500) < 20)
    assert np.all(np.abs(out[:, 40] - 1500) < 20)


def test_faint_texture_is_smeared() -> None:
    """A sine of 20 DN and four px loses nine tenths: five neighbours hold a period and a quarter."""
    wave = np.rint(1000 + 20 * np.cos(np.pi / 2 * np.arange(80)))
    out = SMOOTH.apply(np.tile(wave, (40, 1)).astype(np.uint16), 1).astype(float)

    assert np.ptp(out[10:-10, 10:-10]) < 0.3 * 40


def test_colours_of_a_mosaic_are_not_mixed() -> None:
    """Planes that lie closer than the threshold keep their own level."""
    codes = np.full((20, 20), 1000, dtype=np.uint16)
    codes[::2, ::2], codes[1::2, 1::2] = 1040, 960

    assert np.array_equal(SMOOTH.apply(codes, 2), codes)
