"""What the stated uncertainty of photon transfer is worth, from frames to readings, against what was planted."""

from dataclasses import replace

import numpy as np
import pytest

from runner.spec.model import Amount
from tests.measure.photon_samples import Shot, lit, measure, unlit
from tests.scenes.photons import Parts, Sensor

CAMERAS = (
    Sensor(
        gain=0.4, well=10_000, read_noise=5, offset=Parts(2, 0.6, 0.8), response=Parts(0.01, 0.002, 0.003), bend=0.01
    ),
    Sensor(gain=1.3, well=2000, read_noise=3, offset=Parts(2, 0.6, 0.8), response=Parts(0.01, 0.004, 0.005)),
    Sensor(gain=0.15, well=20_000, read_noise=9, offset=Parts(4, 1, 1), response=Parts(0.008, 0.002, 0.002), bend=0.03),
)
"""Sensors of different gain, well and noise; two with a response that bends."""
LEVELS = (16, 20, 30)
"""Levels of light for each."""
DARK_CURRENT = 60.0
"""Electrons per second; the darks and the light series last 10 ms, so that it hardly adds to read noise."""
TIMES = (0.01, 0.3, 0.6, 0.9, 1.2, 1.5)
"""Exposure times of the darks, s."""
PHOTONS_U = 0.03
"""Standard uncertainty of the calibrated detector."""
EFFICIENCY = 0.6
"""Electrons for one photon."""
LAMP = 0.0004
"""Drift of the lamp from frame to frame, as a share."""
UNSHAPED = ("saturation_capacity", "snr_max", "dynamic_range_emva1288", "dynamic_range_emva1288_bits")
"""Quantities in which the bound on saturation's shape dominates: no upper end."""
SIZES = (*UNSHAPED, "linearity_error_emva1288", "light_unevenness")
"""And those in which noise only adds."""


def _series(sensor: Sensor, levels: np.ndarray, rng: np.random.Generator) -> list[Shot]:
    """Return pairs whose lamp drifts from frame to frame."""
    return [
        shot
        for level in levels
        for n in (1, 2)
        for shot in (
            replace(
                lit(sensor, rng, levels=[level], repeats=1, time=TIMES[0], even=1 + LAMP * rng.standard_normal())[0],
                axes={"level": f"{level:.6g}", "repeat": str(n)},
                taken={"exposure": Amount(1000 * TIMES[0], "ms")},
            ),
        )
    ]


def _truth(sensor: Sensor, levels: np.ndarray) -> dict[str, float]:
    """Return what was planted; where the response bends, saturation is that of the light that reaches it."""
    noise = float(np.sqrt(sensor.read_noise**2 + DARK_CURRENT * TIMES[0]))
    full = sensor.saturation()
    least = float(np.sqrt(noise**2 + 1 / 12 / sensor.gain**2 + 0.25) + 0.5)
    light = levels * 1.15 * sensor.well
    bent = np.array([sensor.bent(float(e)) for e in light])
    used = light[(bent >= 0.05 * full) & (bent <= 0.95 * full)]
    found = {
        "system_gain": sensor.gain,
        "temporal_dark_noise": noise,
        "temporal_dark_noise_dn": float(np.sqrt((sensor.gain * noise) ** 2 + 1 / 12)),
        "saturation_capacity": full,
        "absolute_sensitivity_threshold": least,
        "dynamic_range_emva1288": float(20 * np.log10(full / least)),
        "dynamic_range_emva1288_bits": float(np.log2(full / least)),
        "snr_max": float(10 * np.log10(full)),
        "linearity_error_emva1288": sensor.linearity_error(used),
        "dark_current": DARK_CURRENT,
        "dark_current_from_variance": DARK_CURRENT,
    }
    fitted = bent <= 0.7 * full
    share = EFFICIENCY * float(np.mean(bent[fitted] / light[fitted]))  # of the response's slope, which bends
    found |= {"quantum_efficiency": 100 * share, "absolute_sensitivity_threshold_photons": least / share}
    half = sensor.prnu.all[: sensor.shape[0], : sensor.shape[1]] + sensor.dsnu.all / (full / 2)
    found["light_unevenness"] = 100 * _span(1 + half)
    for part in ("total", "row", "column", "pixel"):
        end = "" if part == "total" else f"_{part}"
        found[f"dsnu1288{end}"] = sensor.dsnu.spread(part)
        found[f"prnu1288{end}"] = 100 * sensor.prnu.spread(part)
    return found


def _span(light: np.ndarray) -> float:
    """Return the span of block means of a thousand pixels or more."""
    count = int(np.sqrt(light.size / 1000))
    rows = np.array_split(light, count)
    means = [float(block.mean()) for row in rows for block in np.array_split(row, count, axis=1)]
    return max(means) - min(means)


def coverage(draws: int, shape: tuple[int, int], seed: int) -> dict[str, tuple[float, float, float | None]]:
    """Return, by quantity, how often ±2 u or the bound held, mean over u, and spread over u where all had values."""
    held: dict[str, list[bool]] = {}
    scores: dict[str, list[float]] = {}
    for draw in range(draws):
        kind = draw % len(CAMERAS)
        sensor = replace(CAMERAS[kind], seed=1000 * seed + draw, shape=shape, dark_current=DARK_CURRENT)
        rng = np.random.default_rng([seed, draw])
        levels = np.arange(1, LEVELS[kind] + 1) / LEVELS[kind]
        told = 1.15 * sensor.well / EFFICIENCY * (1 + PHOTONS_U * rng.standard_normal())
        found = measure(
            _series(sensor, levels, rng),
            unlit(sensor, rng, repeats=3, times=TIMES),
            options={"photons": told, "photons_u": PHOTONS_U},
        )
        for name, planted in _truth(sensor, levels).items():
            reading = found[name]
            assert reading.refusal is None, reading
            if reading.value is None or reading.u is None:
                side, end = reading.bound or ("", 0.0)
                held.setdefault(name, []).append((planted <= end) == (side == "below"))
                continue
            scores.setdefault(name, []).append((reading.value - planted) / reading.u)
            held.setdefault(name, []).append(abs(scores[name][-1]) <= 2)
    return {
        name: (
            float(np.mean(held[name])),
            float(np.mean(scores.get(name, [0.0]))),
            float(np.std(scores[name])) if len(scores.get(name, [])) == draws else None,
        )
        for name in held
    }


def _check(found: dict[str, tuple[float, float, float | None]], allowance: float, wider: float) -> None:
    for name, (share, _, spread) in found.items():
        assert share >= 0.93 - allowance, (name, share)
        assert spread is None or (spread < 1.25 + wider and (name in SIZES or spread > 0.8 - wider)), (name, spread)
    own = [share for name, (share, _, _) in found.items() if name not in SIZES]
    assert 0.93 <= np.mean(own) <= 0.97


def test_the_uncertainty_holds() -> None:
    """Of 60 captures ±2 u (or the bound) holds in 93 % or more, spread/u lies in 0.8 to 1.25.

    Allowed for is twice what chance does to 60 draws: 6.6 % of shares, 0.18 of a spread.
    """
    _check(coverage(60, (64, 72), 1), 2 * np.sqrt(0.93 * 0.07 / 60), 2 / np.sqrt(2 * 60))


@pytest.mark.study
def test_study_of_coverage() -> None:
    """The same over 1000 captures without an allowance; the figures are printed for the handbook."""
    found = coverage(1000, (96, 112), 2)
    for name, (share, bias, spread) in sorted(found.items()):
        print(f"| {name} | {bias:.2f} | {'' if spread is None else f'{spread:.2f}'} | {100 * share:.1f} |")
    _check(found, 0.0, 0.0)
