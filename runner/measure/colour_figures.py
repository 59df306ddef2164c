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
from runner.measure.numerics.sizes import FACTORS, normal_draws, shrunk, told

Real = NDArray[np.float64]

SEED = 11664
DIFFERENCE = "difference"
ROUNDING = 0.015, 2e-4
"""Four digits of sRGB's matrix and of whites move a difference, and a ratio, by so much (standard uncertainties)."""
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
    found = measured_lab(colours, way) - colours.lab
    causes = {cause: _moved(colours, way, (cause,)) for cause in CAUSES}
    both = _moved(colours, way, CAUSES)
    made: dict[str, Told] = {}
    for kind, of in _sizes(colours).items():
        made |= _told(colours.lab, found, both, causes, kind, of)
    return made


def _told(
    lab: Real, found: Real, both: Real, causes: Mapping[str, Real], kind: str, of: Callable[[Real], Real]
) -> dict[str, Told]:
    """Return what can be told of one kind of size: of a difference also of each patch and the largest."""
    base = found.copy()
    each, noise = of(lab + found[None])[0], of(lab + both)
    base[_those(kind, lab)] *= shrunk(each, noise)[:, None]
    plain, size = (_gathered(kind, of(lab + offsets[None]))[0] for offsets in (found, base))
    drawn = [_gathered(kind, of(lab + factor * base + both)) for factor in FACTORS]
    means, spreads = np.array([d.mean(axis=0) for d in drawn]), np.array([d.std(axis=0) for d in drawn])
    shares = _shares({cause: _gathered(kind, of(lab + found + moved)).var(axis=0) for cause, moved in causes.items()})
    made = {}
    for n, name in enumerate(_names(kind, plain.size)):
        value, u = told(float(plain[n]), float(size[n]), means[:, n], spreads[:, n])
        parts = {cause: u * float(np.sqrt(share[n])) for cause, share in shares.items()}
        made[name] = Told(value, parts | {"conversion's rounding": ROUNDING[0]})
    return made


def _gathered(kind: str, each: Real) -> Real:
    """Return the sizes that are told of those of patches (draws, n): of differences all, their mean and the largest."""
    mean = each.mean(axis=1, keepdims=True)
    return np.concatenate([each, mean, each.max(axis=1, keepdims=True)], axis=1) if kind == DIFFERENCE else mean


def _those(kind: str, lab: Real) -> NDArray[np.bool_]:
    """Return the patches that a kind of size is taken over."""
    chroma = chroma_of(lab)
    return np.asarray({"hue": chroma > CHROMATIC, "neutral": chroma < NEUTRAL}.get(kind, chroma >= 0))


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
    """Return the sizes that can be told, each a function of colours (draws, n, 3) to those of patches (draws, k)."""
    reference, neutral, chromatic = colours.lab, colours.neutral, colours.chromatic

    def differences(lab: Real) -> Real:
        return ciede2000(lab, reference)

    def hues(lab: Real) -> Real:
        a, b = lab[:, chromatic, 1], lab[:, chromatic, 2]
        a0, b0 = reference[chromatic, 1], reference[chromatic, 2]
        return np.asarray(np.abs(np.degrees(np.arctan2(a0 * b - b0 * a, a0 * a + b0 * b))))

    def chromas(lab: Real) -> Real:
        off = lab[:, neutral, 1:] - reference[neutral, 1:]
        return np.asarray(np.hypot(off[..., 0], off[..., 1]))

    made: dict[str, Callable[[Real], Real]] = {DIFFERENCE: differences}
    if chromatic.any():
        made["hue"] = hues
    if neutral.any():
        made["neutral"] = chromas
    return made


def _names(kind: str, count: int) -> list[str]:
    return [f"patch {n}" for n in range(1, count - 1)] + ["mean", "worst"] if kind == DIFFERENCE else [kind]


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
    return Told(float(value(colours.rgb, colours.lab)), parts | {"conversion's rounding": ROUNDING[1]})
