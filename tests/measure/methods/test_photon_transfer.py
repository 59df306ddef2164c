"""Photon transfer from frames to readings: the bars on planted sensors, what is refused, mosaics, files and folders."""

from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path

import h5py
import numpy as np
import pytest
import skimage.data
import tifffile
from scipy import ndimage

from runner import acceptance
from runner.acceptance import Order
from runner.errors import MeasurementRefused, UsageError
from runner.measure.methods import photon_transfer
from runner.measure.reading import Reading
from runner.spec.model import Tone
from tests.measure.photon_samples import Shot, camera, lit, measure, read, sample, unlit, value
from tests.scenes.photons import Parts, Sensor

SMALL = Sensor(shape=(96, 112))
BARS = {
    "system_gain": 0.01,
    "temporal_dark_noise": 0.02,
    "saturation_capacity": 0.01,
    "dsnu1288": 0.03,
    "prnu1288": 0.03,
    "dsnu1288_pixel": 0.03,
    "prnu1288_pixel": 0.03,
    "dsnu1288_row": 3 / np.sqrt(2 * 512),
    "prnu1288_row": 3 / np.sqrt(2 * 512),
    "dsnu1288_column": 3 / np.sqrt(2 * 512),
    "prnu1288_column": 3 / np.sqrt(2 * 512),
}
"""Relative departures from what was planted, rms over a set; the worst may be three times as large.

A row or column part of n members is known no better than 1/√(2n) of itself; three times that is allowed.
"""
SENSORS = (
    Sensor(gain=0.4, well=10_000, read_noise=5, offset=Parts(2, 0.5, 0.7), response=Parts(0.01, 0.002, 0.003)),
    Sensor(gain=1.7, well=20_000, read_noise=3, offset=Parts(1.5, 0.4, 0.5), response=Parts(0.006, 0.001, 0.002)),
    Sensor(gain=0.12, well=30_000, read_noise=12, offset=Parts(5, 2, 2), response=Parts(0.008, 0.003, 0.002)),
    Sensor(
        gain=0.5, well=40_000, read_noise=20, offset=Parts(9, 3, 3), response=Parts(0.012, 0.002, 0.002), white=16383
    ),
)
"""512 × 512 px; the last is clipped by its codes, at 32 566 electrons, before its wells are full."""


def _errors(sensor: Sensor, seed: int) -> dict[str, float]:
    """Return relative departures of a set of 16 pairs and 8 darks from what was planted."""
    rng = np.random.default_rng(seed)
    full = min(sensor.well, (sensor.white - sensor.black) / sensor.gain)
    found = measure(lit(sensor, rng, top=1.15 * full), unlit(sensor, rng, repeats=8))
    truth = {
        "system_gain": sensor.gain,
        "temporal_dark_noise": sensor.read_noise,
        "saturation_capacity": replace(sensor, well=full).saturation(),
    }
    for end, part in (("", "total"), ("_row", "row"), ("_column", "column"), ("_pixel", "pixel")):
        truth[f"dsnu1288{end}"] = sensor.dsnu.spread(part)
        truth[f"prnu1288{end}"] = 100 * sensor.prnu.spread(part)
    return {name: value(found[name]) / planted - 1 for name, planted in truth.items()}


def _hold(errors: Sequence[dict[str, float]]) -> None:
    for name, bar in BARS.items():
        all_of = np.array([one[name] for one in errors])
        print(
            f"| {name} | {100 * np.sqrt(np.mean(all_of**2)):.3f} | {100 * np.abs(all_of).max():.3f} | {100 * bar:.1f} |"
        )
        assert np.sqrt(np.mean(all_of**2)) <= bar, name
        assert np.abs(all_of).max() <= 3 * bar, name


def test_planted_sensors_are_found_within_the_bars() -> None:
    """Two sensors of 512 × 512 px: gain 1 %, dark noise 2 %, saturation 1 %, patterns 3 % and their parts."""
    _hold([_errors(SENSORS[n], 10 + n) for n in (0, 3)])


@pytest.mark.study
def test_study_of_the_bars() -> None:
    """Four sensors, four sets of each; the figures are printed."""
    _hold([_errors(replace(sensor, seed=n), 100 + n) for sensor in SENSORS for n in range(4)])


def test_curves_are_those_of_the_sensor() -> None:
    """Variance over mean lies on K μ + dark, both SNRs on the model, departures from linearity on 0, within 4 u."""
    rng = np.random.default_rng(1)
    found = photon_transfer.measure(sample(lit(SMALL, rng), unlit(SMALL, rng)), photon_transfer.read_options({}))
    transfer, ratio, total, straight = found.curves

    assert [(c.name, c.x_in, c.y_in) for c in found.curves] == [
        ("photon transfer", "DN", "DN²"),
        ("signal-to-noise ratio", "e-", "1"),
        ("total signal-to-noise ratio", "e-", "1"),
        ("linearity", "%", "%"),
    ]
    for x, y, u in zip(transfer.x[:12], transfer.y[:12], transfer.u[:12], strict=True):
        assert abs(y - (0.4 * x + 0.16 * 25 + 1 / 12)) < 4 * u
    for x, y, u in zip(ratio.x[:12], ratio.y[:12], ratio.u[:12], strict=True):
        assert abs(y - x / np.sqrt(x + 25 + 1 / 12 / 0.16)) < 4 * u + 0.003 * y  # the gain's own 0.3 % is in x
    patterns = SMALL.dsnu.spread("total"), SMALL.prnu.spread("total")
    for x, y, u in zip(total.x, total.y, total.u, strict=True):
        noise = x + 25 + 1 / 12 / 0.16 + patterns[0] ** 2 + (patterns[1] * x) ** 2
        assert abs(y - x / np.sqrt(noise)) < 3 * u
        assert u < 0.02 * y
    assert all(abs(y) < 4 * u for y, u in zip(straight.y, straight.u, strict=True))


def test_a_level_without_light_serves_as_dark() -> None:
    """A series that begins at 0 needs no companion, and says the same."""
    rng = np.random.default_rng(2)
    found = measure(lit(SMALL, rng, levels=[n / 16 for n in range(17)]))

    assert value(found["system_gain"]) == pytest.approx(0.4, abs=3 * (found["system_gain"].u or 0))
    assert value(found["temporal_dark_noise"]) == pytest.approx(5, rel=0.05)


@pytest.mark.parametrize("channel", ["red", "green", "blue"])
def test_each_colour_of_a_mosaic_is_a_sensor_of_its_own(channel: str) -> None:
    """Under white light red has half and blue a quarter of green's signal; gain and dark noise are those of all."""
    rng = np.random.default_rng(3)
    raw = replace(SMALL, shape=(192, 224))
    filters = np.tile([[0.5, 1.0], [1.0, 0.25]], (96, 112))
    shots = lit(raw, rng, even=filters)
    found = read(
        photon_transfer.measure(
            sample(shots, unlit(raw, rng), of=camera(shots[0].codes, mosaic="RGGB"), channel=channel),
            photon_transfer.read_options({}),
        )
    )
    assert value(found["system_gain"]) == pytest.approx(0.4, abs=3 * (found["system_gain"].u or 0))
    assert value(found["temporal_dark_noise"]) == pytest.approx(5, abs=3 * (found["temporal_dark_noise"].u or 0))
    if channel == "green":
        assert value(found["saturation_capacity"]) == pytest.approx(raw.saturation(), rel=0.01)
    else:
        assert (found["saturation_capacity"].bound or ("", 0.0))[0] == "above"


def _staged(kind: str) -> dict[str, Reading]:
    rng = np.random.default_rng(4)
    shots, without = lit(SMALL, rng), unlit(SMALL, rng)
    more: dict[str, object] = {}
    if kind == "no darks":
        without = []
    elif kind == "lost darks":
        without, more = [], {"lost": {"dark": "black"}}
    elif kind == "photograph":
        scene = skimage.data.camera()[100:196, 200:312] / 255 + 0.2  # type: ignore[no-untyped-call]
        shots = lit(SMALL, rng, even=scene / scene.mean())
    elif kind == "vignetted":
        shots = lit(SMALL, rng, even=1 + 0.4 * (np.arange(112)[None, :] - 55.5) / 112)
    elif kind == "smoothed":
        shots = [replace(s, codes=np.round(ndimage.uniform_filter(s.codes.astype(float), 3))) for s in shots]
    elif kind == "toned":
        more = {"of": camera(shots[0].codes, tone=Tone("srgb"))}
    elif kind == "only dark":
        shots = [replace(s, axes={"level": "0", "repeat": str(n)}) for n, s in enumerate(without)]
    return measure(shots, without, **more)


@pytest.mark.parametrize(
    ("kind", "cause", "said"),
    [
        ("no darks", "missing companion", "nothing was captured without light; capture dark frames, and name them"),
        ("lost darks", "missing companion", "the capture 'black' gave no frames"),
        ("photograph", "uneven", r"the light varies by \d+ % over the field; 3 % for EMVA 1288, 20 % at most"),
        ("vignetted", "uneven", r"the light varies by 2\d % over the field"),
        (
            "smoothed",
            "outside the estimator's limits",
            r"correlated by 0\.6\d: the frames were filtered or interpolated",
        ),
        ("toned", "not defined", "the camera's tone is srgb: EMVA 1288 Linear is for cameras whose codes are linear"),
        ("only dark", "too dark", "no level of the series has light"),
    ],
)
def test_another_scene_or_other_frames_are_refused(kind: str, cause: str, said: str) -> None:
    """What is no even field of a linear sensor ends with its cause and figures; levels and series have tests beside."""
    with pytest.raises(MeasurementRefused, match=said) as refused:
        _staged(kind)
    assert refused.value.cause == cause


def test_what_the_series_does_not_hold_is_refused_where_it_is_asked_for() -> None:
    """Quantities that need photons or exposure times keep silent unless a limit wants them."""
    rng = np.random.default_rng(5)
    shots, without = lit(SMALL, rng), unlit(SMALL, rng)
    silent = measure(shots, without)
    names = (
        "quantum_efficiency",
        "absolute_sensitivity_threshold_photons",
        "dark_current",
        "dark_current_from_variance",
    )
    assert not set(names) & set(silent)
    asked = measure(shots, without, wanted=names)
    causes = {name: asked[name].refusal.cause for name in names if asked[name].refusal is not None}  # type: ignore[union-attr]
    assert causes == dict(zip(names, ("not defined", "not defined", "too few frames", "too few frames"), strict=True))
    assert set(photon_transfer.quantities()) == set(asked)


@pytest.mark.parametrize(
    ("asked", "said"),
    [
        ({"frames_per_level": 1}, "frames_per_level is 1; a level needs 2 frames at least"),
        ({"shading_order": 7}, "shading_order is 7; allowed are whole numbers from 0 to 6"),
        ({"plain_numbers": "no"}, "plain_numbers is 'no'; allowed are order, light"),
        ({"light": "1 ms"}, "light is '1 ms'; allowed is a list of amounts"),
        ({"light": ["1 ms", "x"]}, "light holds what is no amount: 'x' is no number with a unit"),
        ({"light": ["-1 ms"]}, "light holds -1; an amount of light is 0 or more"),
        ({"photons": "5 px"}, "photons is '5 px'; allowed is 0 photons"),
        ({"photons_u": "130 %"}, "photons_u is '130 %'; allowed is 0 % to 100 %"),
    ],
)
def test_options_keep_to_their_meaning(asked: dict[str, object], said: str) -> None:
    """Each wrong value is named with what is allowed."""
    with pytest.raises(UsageError, match=said):
        photon_transfer.read_options(asked)


SPEC = """\
probatum-spec: 1
document: {{number: PT-1, revision: A, title: "Sensor"}}
unit: {{product: S, serial: 'S-[0-9]{{4}}'}}
camera: {{frame_size: 112 x 96 px, bit_depth: 16 bit, black_level: 100 DN, white_level: 6000 DN}}
captures:
  dark: {{target: dark frame, frames: '{dark}'{measure}}}
  series:
    target: {target}
    frames: {{names: '{names}', count: 32}}
    uses: {{dark: dark}}
    measure: {{photon transfer: {{{options}}}}}
    limits:
      - {{characteristic: 1, quantity: system_gain, nominal: 0.4 DN/e-, tolerance: 0.02 DN/e-}}
      - {{characteristic: 2, quantity: linearity_error_emva1288, at_most: 0.5 %}}
"""


@pytest.mark.parametrize("kind", ["folders", "pages", "hdf5", "exposures"])
def test_series_come_in_folders_pages_or_one_file(kind: str, tmp_path: Path) -> None:
    """Level folders under a flat field, two pages a level, all frames in one HDF5 file, darks along exposure times."""
    rng = np.random.default_rng(6)
    unit = tmp_path / "frames" / "S-0001"
    unit.mkdir(parents=True)
    sensor = replace(SMALL, dark_current=500.0)
    told = {"dark": "dark-{repeat}.tif", "target": "light series", "options": "", "measure": ""}
    times = {n: n / 100 if kind == "exposures" else 0.01 for n in range(1, 17)}
    pairs = {n: [sensor.frame(720.0 * n, rng, time=times[n]) for _ in range(2)] for n in times}
    for n, pair in pairs.items():
        (unit / f"level-{n}").mkdir()
        for k, codes in enumerate(pair):
            if kind == "folders":
                tifffile.imwrite(unit / f"level-{n}" / f"flat-{k}.tif", codes)
            elif kind == "exposures":
                tifffile.imwrite(unit / f"flat-{10 * n}ms-{k}.tif", codes)
                tifffile.imwrite(unit / f"dark-{10 * n}ms-{k}.tif", sensor.frame(0.0, rng, time=times[n]))
        if kind == "pages":
            tifffile.imwrite(unit / f"level-{n}.tif", np.stack(pair), photometric="minisblack")
    if kind == "folders":
        told |= {"names": "level-{level}/flat-{repeat}.tif", "target": "flat field"}
    elif kind == "pages":
        told |= {"names": "level-{level}.tif"}
    elif kind == "exposures":
        told |= {"names": "flat-{exposure}-{repeat}.tif", "dark": "dark-{exposure}-{repeat}.tif"}
        told |= {"measure": ", measure: {dark current: {system_gain: 0.4 DN/e-}}"}
    else:
        with h5py.File(unit / "all.h5", "w") as file:
            file["frames"] = np.concatenate([np.stack(pair) for pair in pairs.values()])
        told |= {"names": "all.h5", "options": f"frames_per_level: 2, light: {list(pairs)}"}
    for k in range(0 if kind == "exposures" else 2):
        tifffile.imwrite(unit / f"dark-{k}.tif", sensor.frame(0.0, rng, time=0.01))
    (tmp_path / "spec.yaml").write_text(SPEC.format(**told))
    order = Order(spec=tmp_path / "spec.yaml", frames=tmp_path / "frames", out=tmp_path / "out")
    plan, _ = acceptance.read(order)
    lot, seen = acceptance.gather(order, plan)
    evidence, _, tracebacks = acceptance.measure_unit(plan, lot.units[0], seen)
    found = {r.quantity: r for r in evidence.readings if r.capture == "series"}

    assert tracebacks == []
    assert [capture.faults for capture in evidence.captures] == [(), ()]
    assert value(found["system_gain"]) == pytest.approx(0.4, abs=3 * (found["system_gain"].u or 0))
    assert (found["linearity_error_emva1288"].bound or ("", 1.0))[1] < 0.1
    if kind == "exposures":
        assert value(found["dark_current"]) == pytest.approx(500, abs=3 * (found["dark_current"].u or 0))


def test_frames_are_not_changed() -> None:
    """Measuring never writes into the codes."""
    rng = np.random.default_rng(7)
    shots: list[Shot] = lit(SMALL, rng, levels=(0.2, 0.4))
    kept = [s.codes.copy() for s in shots]
    measure(shots, unlit(SMALL, rng))

    for shot, before in zip(shots, kept, strict=True):
        np.testing.assert_array_equal(shot.codes, before)
