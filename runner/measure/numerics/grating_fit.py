"""A sinusoidal grating under uneven light: frequency, modulation, phase and harmonics by least squares.

The light of a patch is modelled as

    b(r) + Re[(c + g·r) e^{2πi u·r}] + Σ_h Re[c_h e^{2πi h u·r}]

with a background b of low order, an amplitude that may change linearly over the patch, and harmonics h = 2 … H. For a
given frequency u all else is linear, and since every term is a product of a function of x and a function of y, the
normal equations need sums over rows and columns only. A frequency that is off by δ shows as a gradient of the
fundamental in quadrature, g/c = 2πi δ, so u is corrected by it until it vanishes: then u is the least-squares
frequency, whatever part of a period the patch ends with.

A frame's pixels come as lattices: one for a plain frame or a sparse colour, two for the green of a mosaic.

References:
    D. C. Rife and R. R. Boorstyn, IEEE Trans. Inf. Theory 20 (1974) 591 (bounds of a tone's parameters).
    G. H. Golub and V. Pereyra, SIAM J. Numer. Anal. 10 (1973) 413 (linear parameters apart from the others).
"""

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

Real = NDArray[np.float64]
Complex = NDArray[np.complex128]

MOST_STEPS = 30
"""Corrections of the frequency; three to six are usual."""
SETTLED = 1e-10
"""Correction, in periods over the patch, at which the frequency stands."""
MOST_POWER = 4
"""Highest power of x or y in a product of two terms: backgrounds are of order 2 at most."""
BENT = 30.0
"""Chi-squared of three degrees of freedom from which stripes are bent: noise reaches it with odds of 1e-6."""
PROBES = 12
"""Frequencies around the fundamental at which the residual is looked at, for noise that is not white."""


@dataclass(frozen=True)
class Lattice:
    """Pixels on a rectangular grid; coordinates in px of the frame, from the patch's centre."""

    values: Real
    """Rows × columns, light."""
    x: Real
    """Positions of the columns, px."""
    y: Real
    """Positions of the rows, px."""


@dataclass(frozen=True)
class Term:
    """One product x^a y^b e^{2πi h u·r} of the model."""

    a: int
    """Power of x."""
    b: int
    """Power of y."""
    h: int
    """Multiple of the frequency; 0 is the background."""


@dataclass(frozen=True)
class GratingFit:
    """What the least-squares fit found; phases and levels hold at the patch's centre."""

    frequency: tuple[float, float]
    """Components along x and y, cy/px."""
    frequency_cov: Real
    """Their covariance, 2 × 2."""
    level: float
    """Background."""
    level_u: float
    """Its standard uncertainty."""
    amplitudes: Complex
    """c of h = 1 … H: Re[c e^{2πi h u·r}]; NaN for a harmonic that cannot be told from another term."""
    amplitude_u: Real
    """Standard uncertainty of each modulus."""
    phase_u: float
    """Standard uncertainty of the fundamental's phase, rad."""
    noise: float
    """Rms of what the model leaves."""
    excess: float
    """Power of the residual around the fundamental over that of white noise of the same rms, at least 1."""
    count: int
    """Pixels."""
    bend: float = 0.0
    """Rms departure of the stripes from straight and even ones, rad of their phase; 0 where none stands out."""
    lost: float = 0.0
    """Share of the fundamental's amplitude that one frequency misses for it; put back into `amplitudes`."""


class GratingLost(ArithmeticError):
    """The frequency did not settle."""


def fit_grating(
    lattices: Sequence[Lattice], start: tuple[float, float], *, harmonics: int = 3, background: int = 1
) -> GratingFit:
    """Fit a grating.

    Args:
        lattices: The pixels.
        start: Frequency along x and y to start from, cy/px, within half a period over the patch of the true one.
        harmonics: H, at least 1.
        background: Order of the background's polynomial, 0 to 2.

    Raises:
        GratingLost: No frequency near the start makes the quadrature gradient vanish.
    """
    sums = _Sums(lattices)
    quick = [*_background(background), *_FUNDAMENTAL]
    u = np.array(start, dtype=np.float64)
    for _ in range(MOST_STEPS):
        solution = _Solution(sums, quick, u)
        step = solution.frequency_step()
        if not np.all(np.isfinite(step)) or np.hypot(*step) > 1.0:
            break
        u += step / sums.half
        if np.hypot(*step) < SETTLED:
            return _read_out(sums, _solve_with_harmonics(sums, quick, u, harmonics), harmonics)
    msg = f"the frequency did not settle near {start[0]:.4f}, {start[1]:.4f} cy/px"
    raise GratingLost(msg)


_FUNDAMENTAL = (Term(0, 0, 1), Term(1, 0, 1), Term(0, 1, 1))


def _background(order: int) -> list[Term]:
    return [Term(a, b, 0) for a in range(order + 1) for b in range(order + 1 - a)]


def _solve_with_harmonics(sums: "_Sums", quick: list[Term], u: Real, harmonics: int) -> "_Solution":
    """Add the harmonics, each that the pixels' grid does not fold onto another term, and settle once more."""
    terms, taken = list(quick), [np.zeros(2), u, -u]
    for h in range(2, harmonics + 1):
        alike = min(sums.apart(h * u, other) for other in taken)
        if alike > 1.5:  # periods over the patch: two terms nearer than that are hardly told apart
            terms.append(Term(0, 0, h))
            taken += [h * u, -h * u]
    solution = _Solution(sums, terms, u)
    for _ in range(3):
        u = u + solution.frequency_step() / sums.half
        solution = _Solution(sums, terms, u)
    return solution


def _read_out(sums: "_Sums", solution: "_Solution", harmonics: int) -> GratingFit:
    terms, cov = solution.terms, solution.covariance
    first = terms.index(Term(0, 0, 1))
    c = solution.coefficients[first]
    excess = solution.excess()
    amplitudes: Complex = np.full(harmonics, np.nan + 0j, dtype=np.complex128)
    amplitude_u = np.full(harmonics, np.nan)
    for j, term in enumerate(terms):
        if term.h >= 1 and term.a == term.b == 0:
            amplitudes[term.h - 1] = solution.coefficients[j]
            amplitude_u[term.h - 1] = np.sqrt(excess * _along(solution, j))
    bend, kept = _bend(sums, solution, harmonics)
    amplitudes /= kept
    amplitude_u /= kept
    across = np.array([-c.imag, c.real]) / abs(c)
    block = cov[np.ix_(solution.columns(first), solution.columns(first))]
    # a gradient in quadrature of size q over the half patch is a frequency of q / (2π |c| half)
    rows = [solution.columns(first + 1), solution.columns(first + 2)]
    scale = 1 / (2 * np.pi * abs(c) * sums.half)
    frequency_cov = np.array(
        [[across @ cov[np.ix_(rows[i], rows[j])] @ across * scale**2 for j in (0, 1)] for i in (0, 1)]
    )
    level = solution.columns(terms.index(Term(0, 0, 0)))[:1]
    return GratingFit(
        frequency=(float(solution.u[0]), float(solution.u[1])),
        frequency_cov=excess * frequency_cov,
        level=float(solution.coefficients[terms.index(Term(0, 0, 0))].real) + sums.mean,
        level_u=float(np.sqrt(cov[level[0], level[0]])),
        amplitudes=amplitudes,
        amplitude_u=amplitude_u,
        phase_u=float(np.sqrt(excess * (across @ block @ across)) / abs(c)),
        noise=solution.noise,
        excess=excess,
        count=sums.count,
        bend=bend,
        lost=1 - float(kept[0]),
    )


def _bend(sums: "_Sums", solution: "_Solution", harmonics: int) -> tuple[float, Real]:
    """Return how far stripes bend over the patch, and what share of each harmonic a single frequency keeps.

    A lens's distortion or a tilted target makes the phase a curved function of place. Second-order terms of the
    fundamental, in quadrature to it, are that curvature; a wave whose phase departs by φ keeps |mean of e^{ihφ}|.
    """
    wide = _Solution(sums, [*solution.terms, Term(2, 0, 1), Term(1, 1, 1), Term(0, 2, 1)], solution.u)
    c = wide.coefficients[wide.terms.index(Term(0, 0, 1))]
    curved = (wide.coefficients[-3:] / c).imag
    places = [wide.columns(len(wide.terms) + k) for k in (-3, -2, -1)]
    turn = np.array([-c.imag, c.real]) / abs(c) ** 2
    spread = np.array([[turn @ wide.covariance[np.ix_(i, j)] @ turn for j in places] for i in places])
    if float(curved @ np.linalg.pinv(spread, hermitian=True) @ curved) < BENT and wide.noise > 0:
        return 0.0, np.ones(harmonics)
    x, y = sums.grid()
    first = wide.terms.index(Term(0, 0, 1))
    waves = [*wide.coefficients[first : first + 3], *wide.coefficients[-3:]]
    phase = np.angle(np.array(waves) / c @ np.stack([np.ones_like(x), x, y, x * x, x * y, y * y]))
    straight = np.stack([np.ones_like(x), x, y], axis=1)
    phase -= straight @ np.linalg.lstsq(straight, phase, rcond=None)[0]
    kept = [abs(complex(np.mean(np.exp(1j * h * phase)))) for h in range(1, harmonics + 1)]
    return float(np.sqrt(np.mean(phase**2))), np.array(kept)


def _along(solution: "_Solution", term: int) -> float:
    """Return the variance of a coefficient's modulus."""
    c = solution.coefficients[term]
    if abs(c) == 0:
        return float(solution.covariance[solution.columns(term)[0], solution.columns(term)[0]])
    along = np.array([c.real, c.imag]) / abs(c)
    block = solution.covariance[np.ix_(solution.columns(term), solution.columns(term))]
    return float(along @ block @ along)


class _Sums:
    """Sums over the pixels of products of powers and waves, one lattice after another; coordinates in half patches."""

    def __init__(self, lattices: Sequence[Lattice]) -> None:
        self.count = sum(one.values.size for one in lattices)
        reach = max(float(np.abs(np.concatenate([one.x, one.y])).max()) for one in lattices)
        self.half = max(reach, 1.0)
        self.mean = sum(float(one.values.sum()) for one in lattices) / self.count
        self._lattices = [(one.values - self.mean, one.x / self.half, one.y / self.half) for one in lattices]
        self._powers = [[[r**k for k in range(MOST_POWER + 1)] for r in (x, y)] for _, x, y in self._lattices]
        self.power = sum(float(np.vdot(v, v)) for v, _, _ in self._lattices)

    def grid(self) -> tuple[Real, Real]:
        """Return places spread evenly over the patch, in half patches."""
        ends = [max(float(np.abs(one[k]).max()) for one in self._lattices) for k in (1, 2)]
        x, y = np.meshgrid(*(np.linspace(-end, end, 41) for end in ends))
        return x.ravel(), y.ravel()

    def apart(self, u: Real, v: Real) -> float:
        """Return how far two frequencies lie apart, periods over the patch, folding by the lattices' grid undone."""
        found = []
        for _, x, y in self._lattices:
            sides = []
            for axis, w in ((x, u[0] - v[0]), (y, u[1] - v[1])):
                pitch = (axis[1] - axis[0]) * self.half if axis.size > 1 else 1.0
                folded = w * pitch - round(w * pitch)
                sides.append(folded / pitch * (axis[-1] - axis[0]) * self.half)
            found.append(float(np.hypot(*sides)))
        return max(found)

    def pairs(self, one: Sequence[Term], two: Sequence[Term], u: Real, v: Real) -> Complex:
        """Return Σ T_i T_j over all pixels, i of `one` at frequency u, j of `two` at v."""
        out = np.zeros((len(one), len(two)), dtype=np.complex128)
        for powers in self._powers:
            across, down = (_Line(one, self.half) for one in powers)
            for i, s in enumerate(one):
                for j, t in enumerate(two):
                    w = s.h * u + t.h * v
                    out[i, j] += across.sum(s.a + t.a, float(w[0])) * down.sum(s.b + t.b, float(w[1]))
        return out

    def projections(self, terms: Sequence[Term], u: Real) -> Complex:
        """Return Σ values · T_j over all pixels."""
        out = np.zeros(len(terms), dtype=np.complex128)
        for values, x, y in self._lattices:
            kinds = sorted({(t.h, t.b) for t in terms})
            waves = np.array([y**b * np.exp(2j * np.pi * h * u[1] * self.half * y) for h, b in kinds])
            both = np.concatenate([waves.real, waves.imag]) @ values  # real products are the fast ones
            rows = both[: len(kinds)] + 1j * both[len(kinds) :]
            for j, t in enumerate(terms):
                along = x**t.a * np.exp(2j * np.pi * t.h * u[0] * self.half * x)
                out[j] += rows[kinds.index((t.h, t.b))] @ along
        return out

    def waves(self, frequencies: Real) -> Complex:
        """Return Σ values · e^{2πi v·r} over all pixels for each frequency, number × 2, in one walk over the pixels."""
        out = np.zeros(len(frequencies), dtype=np.complex128)
        for values, x, y in self._lattices:
            down = np.exp(2j * np.pi * self.half * np.outer(frequencies[:, 1], y))
            both = np.concatenate([down.real, down.imag]) @ values
            along = np.exp(2j * np.pi * self.half * np.outer(frequencies[:, 0], x))
            out += np.einsum("ij,ij->i", both[: len(down)] + 1j * both[len(down) :], along)
        return out


class _Line:
    """Sums of powers and waves along one axis, each worked out once."""

    def __init__(self, powers: Sequence[Real], half: float) -> None:
        self._powers, self._places = powers, powers[1] * half
        self._waves: dict[float, Complex] = {}
        self._known: dict[tuple[int, float], complex] = {}

    def sum(self, power: int, w: float) -> complex:
        """Return Σ (r/half)^power e^{2πi w r}."""
        if (power, w) not in self._known:
            if w not in self._waves:
                self._waves[w] = np.exp(2j * np.pi * w * self._places)
            self._known[power, w] = complex(self._powers[power] @ self._waves[w])
        return self._known[power, w]


class _Solution:
    """The linear least-squares solution at one frequency."""

    def __init__(self, sums: _Sums, terms: Sequence[Term], u: Real) -> None:
        self.terms, self.u, self._sums = list(terms), u.copy(), sums
        plain = sums.pairs(terms, terms, u, u)
        turned = sums.pairs(terms, terms, u, -u)
        n = len(terms)
        gram = np.empty((2 * n, 2 * n))
        gram[:n, :n] = (plain + turned).real / 2
        gram[n:, n:] = (turned - plain).real / 2
        gram[:n, n:] = (plain - turned).imag / 2
        gram[n:, :n] = gram[:n, n:].T
        projected = sums.projections(terms, u)
        right = np.concatenate([projected.real, projected.imag])
        keep = [j for j in range(2 * n) if j < n or terms[j - n].h > 0]  # the background has no imaginary part
        self._keep = {column: i for i, column in enumerate(keep)}
        self._n = n
        self.inverse = np.linalg.pinv(gram[np.ix_(keep, keep)], hermitian=True)
        self._solved = self.inverse @ right[keep]
        whole = np.zeros(2 * n)
        whole[keep] = self._solved
        self.coefficients = whole[:n] - 1j * whole[n:]  # Re[c T] = Re c Re T - Im c Im T
        left = max(0.0, sums.power - float(self._solved @ right[keep]))
        self.noise = float(np.sqrt(left / max(1, sums.count - len(keep))))

    @cached_property
    def covariance(self) -> Real:
        """Covariance of (Re c, Im c), white noise of the residual's rms."""
        n, out = self._n, np.zeros((2 * self._n, 2 * self._n))
        order = list(self._keep)
        out[np.ix_(order, order)] = self.noise**2 * self.inverse
        out[n:, :] *= -1
        out[:, n:] *= -1
        return out

    def columns(self, term: int) -> list[int]:
        """Return where real and imaginary part of a term stand in the covariance."""
        return [term, self._n + term]

    def frequency_step(self) -> Real:
        """Return the correction of the frequency, periods over half a patch, from the gradient in quadrature."""
        first = self.terms.index(Term(0, 0, 1))
        c, gx, gy = self.coefficients[first : first + 3]
        if c == 0:
            return np.full(2, np.nan)
        return np.array([(gx / c).imag, (gy / c).imag]) / (2 * np.pi)

    def excess(self) -> float:
        """Return the residual's power around the fundamental over that of white noise, at least 1."""
        if self.noise == 0:
            return 1.0
        probes = [Term(0, 0, 1)]
        turns = 2 * np.pi * (np.arange(PROBES) + 0.5) / PROBES
        away = (2.5 + 1.5 * (np.arange(PROBES) % 2)) / (2 * self._sums.half)
        around = self.u + away[:, None] * np.stack([np.cos(turns), np.sin(turns)], axis=1)
        power = []
        for v, seen in zip(around, self._sums.waves(around), strict=True):
            plain = self._sums.pairs(probes, self.terms, v, self.u)[0]
            turned = self._sums.pairs(probes, self.terms, v, -self.u)[0]
            model = (plain @ self.coefficients + turned @ self.coefficients.conj()) / 2
            power.append(abs(seen - model) ** 2)
        return max(1.0, float(np.mean(power)) / (self.noise**2 * self._sums.count))
