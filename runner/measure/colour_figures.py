"""Figures of colours against their references, with uncertainty by draws of all that is stated and measured.

Differences are sizes: they are told without what noise adds (`numerics.sizes`). Where a largest one is picked, so is
what the picking adds.
"""

from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from runner.measure.numerics.colour_conversion import Way, srgb_of, tristimulus
from runner.measure.numerics.colour_difference import ciede2000
from runner.measure.numerics.colour_spaces import chroma_of, lab_of, xyz_of
from runner.measure.numerics.sizes import FACTORS, normal_draws, told

Real = NDArray[np.float64]

SEED = 11664
NEUTRAL, CHROMATIC = 5.0, 10.0
"""Chroma of a reference below which it is neutral, and above which it has a hue."""
NOT_BLACK = 20.0
"""Lightness of a neutral reference from which on it counts for white balance."""


@dataclass(frozen=True)
class Colours:
    """Patches as measured and as they should be."""

    rgb: Real
    """Linear light (n, 3), shares of the range."""
    rgb_u: Real
    """Its standard uncertainties from noise."""
    lab: Real
    """References (n, 3)."""
    lab_u: float = 0.0
    """Standard uncertainty of each of their coordinates."""
    light_u: float = 0.0
    """Standard uncertainty of each patch's illumination, as a share, common to its channels."""

    @property
    def neutral(self) -> NDArray[np.bool_]:
        """Patches whose references have no colour."""
        return np.asarray(chroma_of(self.lab) < NEUTRAL)

    @property
    def chromatic(self) -> NDArray[np.bool_]:
        """Patches whose references have a hue."""
        return np.asarray(chroma_of(self.lab) > CHROMATIC)


@dataclass(frozen=True)
class Told:
    """One figure with its standard uncertainty by cause."""

    value: float
    """The figure."""
    parts: Mapping[str, float]
    """Standard uncertainties by the name of their cause."""


CAUSES = ("noise", "uneven light", "references")


def figures(colours: Colours, way: Way) -> dict[str, Told]:
    """Return the sizes that can be told: `patch 1` … of CIEDE2000, `mean`, `worst`, turn in `hue`, `neutral` chroma.

    The last two need patches with a hue, and such without colour.

    Args:
        colours: The patches.
        way: How their light becomes tristimulus values.
    """
    lab = measured_lab(colours, way)
    found = lab - colours.lab
    noise = {cause: _moved(colours, way, (cause,)) for cause in CAUSES}
    both = _moved(colours, way, CAUSES)
    sizes = _sizes(colours)

    def read(offsets: Real) -> Real:
        return np.concatenate([of(colours.lab + offsets) for of in sizes.values()], axis=-1)

    names = [name for name, of in sizes.items() for name in _names(name, of(lab[None]).shape[1])]
    plain = read(found[None])[0]
    drawn = [read(factor * found + both) for factor in FACTORS]
    means, spreads = np.array([d.mean(axis=0) for d in drawn]), np.array([d.std(axis=0) for d in drawn])
    shares = _shares({cause: read(found + moved).var(axis=0) for cause, moved in noise.items()})
    made = {}
    for n, name in enumerate(names):
        value, u = told(float(plain[n]), means[:, n], spreads[:, n])
        made[name] = Told(value, {cause: u * float(np.sqrt(share[n])) for cause, share in shares.items()})
    return made


def measured_lab(colours: Colours, way: Way) -> Real:
    """Return L*, a*, b* of the patches as the camera shows them."""
    reference = xyz_of(colours.lab, way.target)
    return lab_of(tristimulus(colours.rgb, reference, _matching(colours), way), way.target)


def _matching(colours: Colours) -> NDArray[np.bool_]:
    """Return the patches by which the exposure is matched: neutral ones, or all where there are none."""
    return colours.neutral if colours.neutral.any() else np.ones(len(colours.lab), dtype=bool)


def _drawn(colours: Colours, causes: tuple[str, ...]) -> tuple[Real, Real]:
    """Return draws of light and references."""
    unit = normal_draws(SEED, len(colours.lab), 7)
    rgb, lab = np.broadcast_to(colours.rgb, unit[..., :3].shape), np.broadcast_to(colours.lab, unit[..., :3].shape)
    if "uneven light" in causes:
        rgb = rgb * (1 + colours.light_u * unit[..., 3:4])
    if "noise" in causes:
        rgb = rgb + colours.rgb_u * unit[..., :3]
    if "references" in causes:
        lab = lab + colours.lab_u * unit[..., 4:]
    return rgb, lab


def _moved(colours: Colours, way: Way, causes: tuple[str, ...]) -> Real:
    """Return by how much draws move the offsets between colours and references, (draws, n, 3)."""
    rgb, lab = _drawn(colours, causes)
    seen = lab_of(tristimulus(rgb, xyz_of(lab, way.target), _matching(colours), way), way.target)
    return np.asarray(seen - lab - (measured_lab(colours, way) - colours.lab))


def _sizes(colours: Colours) -> dict[str, Callable[[Real], Real]]:
    """Return the sizes that can be told, each a function of colours (draws, n, 3) to (draws, k)."""
    reference, neutral, chromatic = colours.lab, colours.neutral, colours.chromatic

    def differences(lab: Real) -> Real:
        each = ciede2000(lab, reference)
        mean, worst = each.mean(axis=1, keepdims=True), each.max(axis=1, keepdims=True)
        return np.concatenate([each, mean, worst], axis=1)

    def hues(lab: Real) -> Real:
        a, b = lab[:, chromatic, 1], lab[:, chromatic, 2]
        a0, b0 = reference[chromatic, 1], reference[chromatic, 2]
        turned = np.degrees(np.arctan2(a0 * b - b0 * a, a0 * a + b0 * b))
        return np.asarray(np.abs(turned).mean(axis=1, keepdims=True))

    def chromas(lab: Real) -> Real:
        off = lab[:, neutral, 1:] - reference[neutral, 1:]
        return np.asarray(np.hypot(off[..., 0], off[..., 1]).mean(axis=1, keepdims=True))

    made: dict[str, Callable[[Real], Real]] = {"patch": differences}
    if chromatic.any():
        made["hue"] = hues
    if neutral.any():
        made["neutral"] = chromas
    return made


def _names(name: str, count: int) -> list[str]:
    return [name] if count == 1 else [f"patch {n}" for n in range(1, count - 1)] + ["mean", "worst"]


def _shares(variances: Mapping[str, Real]) -> dict[str, Real]:
    whole = np.maximum(np.sum(list(variances.values()), axis=0), 1e-300)
    return {cause: np.asarray(variance / whole) for cause, variance in variances.items()}


def ratios(colours: Colours, way: Way) -> dict[str, Told]:
    """Return ratios, which noise does not push to one side: `red` and `blue` to green, `chroma` to the references'.

    The first two need neutral patches, the last such with a hue.

    Args:
        colours: The patches.
        way: How their light becomes tristimulus values.
    """
    made: dict[str, Told] = {}
    white = colours.neutral & (colours.lab[:, 0] >= NOT_BLACK)
    if white.any():
        made |= {
            "red": _ratio(colours, way, lambda xyz, lab: _balance(xyz, lab, way, white, 0)),
            "blue": _ratio(colours, way, lambda xyz, lab: _balance(xyz, lab, way, white, 2)),
        }
    coloured = colours.chromatic
    if coloured.any():

        def chroma(xyz: Real, lab: Real) -> Real:
            seen = chroma_of(lab_of(xyz, way.target))[..., coloured].sum(axis=-1)
            return np.asarray(seen / chroma_of(lab)[..., coloured].sum(axis=-1))

        made["chroma"] = _ratio(colours, way, chroma)
    return made


def _balance(xyz: Real, lab: Real, way: Way, white: NDArray[np.bool_], channel: int) -> Real:
    """Return a channel over green on the neutral patches, over the same of the references."""
    seen, wanted = (srgb_of(of, way.target)[..., white, :].sum(axis=-2) for of in (xyz, xyz_of(lab, way.target)))
    return np.asarray(seen[..., channel] / seen[..., 1] / (wanted[..., channel] / wanted[..., 1]))


def _ratio(colours: Colours, way: Way, of: Callable[[Real, Real], Real]) -> Told:
    def value(rgb: Real, lab: Real) -> Real:
        return of(tristimulus(rgb, xyz_of(lab, way.target), _matching(colours), way), lab)

    parts = {cause: float(value(*_drawn(colours, (cause,))).std()) for cause in CAUSES}
    return Told(float(value(colours.rgb, colours.lab)), parts)
