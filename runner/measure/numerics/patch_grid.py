"""Finds a grid of even patches, columns × rows, in a picture: where every patch lies, and how well that explains it.

First the direction of the borders, from the picture's slopes; then sets of lines along both axes, spaced as at a
slant, that hold most of the slopes; then the four corners are fitted to the borders that are seen near these lines. A
grid is a model of the picture: every patch has one value, what lies between patches has one, what lies around the grid
has one. The share of the picture's sum of squares that such a model leaves (one-way analysis of variance) ranks them.

References:
    H. Scheffé, The Analysis of Variance (1959), 3.1 (sums of squares between and within classes).
    J. Bigün and G. H. Granlund, Proc. 1st Int. Conf. Computer Vision (1987) 433 (direction from multiples of angles).
"""

from collections.abc import Iterator
from dataclasses import dataclass, replace
from itertools import product

import numpy as np
from numpy.typing import NDArray

Real = NDArray[np.float64]

PITCH = 12
"""Pixels of the averaged picture to a patch: its borders lie within a tenth of it then."""
MOST_TURNED = 12.0
"""Degrees by which a grid may lie turned."""
LEAST_FILL = 0.5
"""Share of the picture's width and of its height that the grid fills at least."""
SLANTED = 0.1
"""Change of scale from one side of a grid to the other, over the mean, that is looked for."""
GAPS = (0.0, 0.06, 0.12, 0.2, 0.3)
"""Shares of a patch's pitch that the space between patches may take."""
FOLLOWED = 4
"""Sets of lines along one axis that are followed up."""
WEAKEST = 0.6
"""Slopes that such a set must hold, of the best one's."""
SAME = 0.3
"""Of a patch: sets of lines and grids that lie nearer are one."""
CLEAR = 0.28
"""Of a patch: how far from its centre it is clear of its borders for certain."""
WINDOWS = (0.35, 0.3, 0.2, 0.15)
"""Of a patch: how far from where it is thought to be a border is looked for, round after round."""
DOUBT = np.diag([1e-3, 1e-3, 3e-3, 3e-3])
"""Weight, against all borders together, of the belief that a grid lies where it is thought to."""
FINE = 0.02
"""Of a patch: steps in which it is looked for."""


@dataclass(frozen=True)
class PatchGrid:
    """One way in which a grid may lie in a picture."""

    corners: Real
    """Its corners (4, 2), x and y in px from the picture's outer corner, clockwise from the upper left."""
    gap: float
    """Share of a patch's pitch between patches."""
    left: float
    """Share of the picture's sum of squares that it leaves unexplained."""
    uneven: float
    """Mean square within the patches' middles over that between them."""
    columns: int
    """Patches along a row."""
    rows: int
    """Rows of patches."""

    @property
    def pitch(self) -> float:
        """Length of a patch's shorter side, its share of gaps included, px."""
        a, b, _, d = self.corners
        return float(min(np.linalg.norm(b - a) / self.columns, np.linalg.norm(d - a) / self.rows))

    def places(self, within: Real) -> Real:
        """Return places (columns × rows, n, 2) that lie at `within` (n, 2) of every patch's pitch from its centre."""
        x, y = np.meshgrid(np.arange(self.columns) + 0.5, np.arange(self.rows) + 0.5)
        centres = np.column_stack([x.ravel(), y.ravel()])
        return self.at(centres[:, None, :] + within[None, :, :])

    def at(self, patches: Real) -> Real:
        """Return px of the picture of places (…, 2) in patches from the grid's upper left corner."""
        flat = patches / np.array([self.columns, self.rows])
        ahead = np.concatenate([flat, np.ones((*flat.shape[:-1], 1))], axis=-1) @ _homography(self.corners).T
        return np.asarray(ahead[..., :2] / ahead[..., 2:])

    def patches(self) -> Real:
        """Return the corners of the patches (columns × rows, 4, 2), row by row, gaps left out."""
        return self.places(np.array([(-1, -1), (1, -1), (1, 1), (-1, 1)]) * (1 - self.gap) / 2)


def find_grids(picture: Real, columns: int, rows: int) -> list[PatchGrid]:
    """Return the ways in which a grid of patches explains a picture, the best first; none where nothing differs.

    Args:
        picture: Rows × columns; the grid fills at least half of its width and height.
        columns: Patches along a row, 1 or more.
        rows: Rows of patches, 1 or more; two patches or more in all.
    """
    small, factor = _averaged(picture, columns, rows)
    if min(small.shape, default=0) < 4 or np.ptp(small) == 0:
        return []
    found: list[PatchGrid] = []
    starts = [
        _ranked(small, PatchGrid(corners, gap, 0.0, 0.0, columns, rows))
        for corners, gap in _first_search(small, columns, rows)
    ]
    _follow(small, sorted(starts, key=lambda one: one.left)[:FOLLOWED], found)
    if found:  # where a border shows no contrast, a grid beside the true one may explain as much
        best = min(found, key=lambda one: one.left)
        size = np.array([(0.0, 0.0), (columns, 0), (columns, rows), (0, rows)])
        beside = [replace(best, corners=best.at(size + step)) for step in ((1, 0), (-1, 0), (0, 1), (0, -1))]
        _follow(small, [one for one in beside if _inside(one, small)], found)
    found.sort(key=lambda one: one.left)
    return [replace(one, corners=one.corners * factor) for one in found]


def _follow(picture: Real, starts: list[PatchGrid], found: list[PatchGrid]) -> None:
    """Bring grids onto the borders, and add those that are new."""
    for start in starts:
        try:
            one = _ranked(picture, _followed(picture, start))
        except np.linalg.LinAlgError:  # its corners have run together
            continue
        if one.left < 1 and all(np.abs(one.corners - o.corners).max() > SAME * one.pitch for o in found):
            found.append(one)


def _inside(grid: PatchGrid, picture: Real) -> bool:
    room = 0.3 * grid.pitch
    return bool(np.all((grid.corners > -room) & (grid.corners < np.array(picture.shape[::-1]) + room)))


def _averaged(picture: Real, columns: int, rows: int) -> tuple[Real, int]:
    """Return the picture's means of square blocks."""
    height, width = picture.shape
    factor = max(1, int(min(width / columns, height / rows) // PITCH))
    h, w = height // factor, width // factor
    cut = picture[: h * factor, : w * factor]
    return cut.reshape(h, factor, w, factor).mean(axis=(1, 3), dtype=np.float64), factor


# ---- lines


def _first_search(picture: Real, columns: int, rows: int) -> Iterator[tuple[Real, float]]:
    """Yield the corners and gap of the likeliest grids: most of the picture's slopes lie on their lines."""
    from scipy import ndimage  # noqa: PLC0415 - heavy

    angle = np.radians(_direction(picture))
    cos, sin = np.cos(angle), np.sin(angle)
    straight = picture
    if angle != 0:  # (y, x) in the picture of (y, x) in the straight one
        matrix = np.array([[cos, sin], [-sin, cos]])
        middle = np.array(picture.shape) / 2 - 0.5
        offset = middle - matrix @ middle
        straight = np.asarray(ndimage.affine_transform(picture, matrix, offset, order=1, mode="nearest"))
    across = np.abs(np.diff(straight, axis=1)).mean(axis=0)
    down = np.abs(np.diff(straight, axis=0)).mean(axis=1)
    centre = np.array([picture.shape[1], picture.shape[0]]) / 2
    for x, y in product(_combs(across, columns), _combs(down, rows)):
        u, v = np.array([(-0.5, -0.5), (0.5, -0.5), (0.5, 0.5), (-0.5, 0.5)]).T
        ahead = 1 + x.slant * u + y.slant * v
        flat = np.column_stack([x.middle + x.length * u / ahead, y.middle + y.length * v / ahead]) - centre
        yield flat @ np.array([[cos, sin], [-sin, cos]]) + centre, x.gap if columns > 1 else y.gap


def _direction(picture: Real) -> float:
    """Return by how many degrees the borders lie turned, clockwise on screen: the direction of most of the slopes."""
    from scipy import ndimage  # noqa: PLC0415 - heavy

    dy, dx = (ndimage.gaussian_filter(picture, 1.0, order=order, mode="nearest") for order in ((1, 0), (0, 1)))
    slope = np.hypot(dx, dy)
    strong = slope > 0.3 * np.quantile(slope, 0.99)
    fourfold = np.sum(slope[strong] ** 2 * np.exp(4j * np.arctan2(dy[strong], dx[strong])))
    angle = float(np.degrees(np.angle(fourfold)) / 4)
    return angle if 0.2 < abs(angle) <= MOST_TURNED else 0.0


@dataclass(frozen=True)
class _Comb:
    """Lines along one axis, at middle + length u / (1 + slant u) for u from -1/2 to 1/2."""

    start: float
    """First line."""
    end: float
    """Last line."""
    slant: float
    """Change of the spacing from one end to the other, over the mean."""
    gap: float
    """Share of the spacing between two patches."""

    @property
    def length(self) -> float:
        """Length in `middle + length u / (1 + slant u)`."""
        return (self.end - self.start) * (1 - self.slant**2 / 4)

    @property
    def middle(self) -> float:
        """Where u is 0."""
        return self.end - self.length / 2 / (1 + self.slant / 2)


def _combs(profile: Real, count: int) -> list[_Comb]:
    """Return the sets of lines that hold most of a profile of slopes.

    Args:
        profile: Mean size of the slope between neighbouring pixels along one axis.
        count: Spaces between the lines.
    """
    size = profile.size + 1
    middle = float(np.median(profile))
    ground = 4 * float(np.median(np.abs(profile - middle)))
    over = np.sqrt(np.maximum(profile - middle - ground, 0))  # so that one strong border does not stand for all
    pad = size // 4 + 2
    near = np.convolve(np.pad(over, pad), np.ones(3), "same") / max(float(over.sum()), 1e-300)  # on a line or beside it
    pitch = size / count
    starts = np.arange(-round(min(0.25 * pitch, 0.06 * size)), round((1 - LEAST_FILL) * size) + 1, dtype=np.float64)
    ends = np.array([(a, size - b) for a, b in product(starts, starts) if size - a - b >= LEAST_FILL * size])
    scores: list[Real] = []
    ways: list[tuple[float, float]] = []
    for gap, slant in product(GAPS, _slants(count)):
        if gap > 0 and (gap * pitch < 3 or count == 1):  # both sides of such a gap count as one line
            continue
        u = np.arange(count + 1.0) if gap == 0 else (np.arange(count)[:, None] + np.array([gap, 2 - gap]) / 2).ravel()
        u = u / count - 0.5
        share = 0.5 + u * (1 - slant**2 / 4) / (1 + slant * u) + slant / 4  # of the way from start to end
        lines = ends[:, :1] + (ends[:, 1:] - ends[:, :1]) * share
        at = np.clip(np.round(lines).astype(np.intp) - 1 + pad, 0, near.size - 1)
        chance = 3 * u.size / size  # what so many lines hold anywhere
        scores.append(near[at].sum(axis=1) - chance + 1e-6 * np.ptp(ends, axis=1) / size)
        ways.append((slant, gap))
    table = np.array(scores)
    best: list[_Comb] = []
    for number in np.argsort(table, axis=None)[::-1]:
        way, place = np.unravel_index(number, table.shape)
        one = _Comb(float(ends[place, 0]), float(ends[place, 1]), *ways[way])
        if table[way, place] < WEAKEST * table.max() or len(best) == FOLLOWED:
            break
        if all(max(abs(one.start - o.start), abs(one.end - o.end)) > SAME * pitch for o in best):
            best.append(one)
    return best


def _slants(count: int) -> Real:
    """Return slants that differ by a tenth of a space where they move lines most, by count × slant / 4."""
    steps = int(SLANTED * count / 0.4)
    return np.arange(-steps, steps + 1) * 0.4 / count


# ---- corners


def _homography(corners: Real) -> Real:
    """Return the matrix that takes (0, 0), (1, 0), (1, 1), (0, 1) to four corners."""
    a, b, c, d = corners
    g, h = np.linalg.solve(np.column_stack([b - c, d - c]), a - b + c - d)
    return np.vstack([np.column_stack([b - a + g * b, d - a + h * d, a]), [g, h, 1.0]])


def _followed(picture: Real, grid: PatchGrid) -> PatchGrid:
    """Bring the grid onto the borders that are seen near its own, and say how even its patches are."""
    for window in WINDOWS:
        columns, rows = grid.columns, grid.rows
        x, y = np.meshgrid(np.arange(columns + 1.0), np.arange(rows) + 0.5)
        upright = _offsets(picture, grid, np.column_stack([x.ravel(), y.ravel()]), 0, window)
        across = _corner_offsets(upright, (columns, rows))
        x, y = np.meshgrid(np.arange(columns) + 0.5, np.arange(rows + 1.0))
        level = _offsets(picture, grid, np.column_stack([x.ravel(), y.ravel()]), 1, window)
        down = _corner_offsets(level, (columns, rows))
        at = np.array([(0.0, 0.0), (columns, 0), (columns, rows), (0, rows)]) + np.column_stack([across, down])
        grid = replace(grid, corners=grid.at(at))
    values = _sampled(picture, grid.places(_lattice(CLEAR)))
    between = float(values.mean(axis=1).var())
    return replace(grid, uneven=float(np.mean(values.var(axis=1))) / max(between, 1e-300))


def _lattice(reach: float) -> Real:
    side = np.linspace(-reach, reach, 7)
    return np.array([(a, b) for b in side for a in side])


def _offsets(picture: Real, grid: PatchGrid, at: Real, axis: int, window: float) -> Real:
    """Return how far the borders that are seen lie from a grid's own.

    Args:
        picture: Rows × columns.
        grid: The grid.
        at: Middles of its borders (n, 2), in patches from its upper left corner.
        axis: 0 for borders that stand upright, 1 for level ones.
        window: How far to either side is looked, in patches.

    Returns:
        (n, 4): the places, the offset to the right or down in patches, and a weight.
    """
    t = np.linspace(-window - 0.16, window + 0.16, 2 * round((window + 0.16) / FINE) + 1)
    along = np.linspace(-CLEAR, CLEAR, 5)
    step = np.stack(np.meshgrid(t, along, indexing="ij"), axis=-1)
    step = step if axis == 0 else step[..., ::-1]
    seen = _sampled(picture, grid.at((at[:, None, None, :] + step[None]).reshape(-1, 2)))
    profile = seen.reshape(len(at), t.size, along.size).mean(axis=2)
    slope = np.abs(np.gradient(profile, axis=1))
    slope = np.sqrt(np.maximum(slope - np.median(slope, axis=1)[:, None], 0))
    half, last = round(grid.gap / 2 / FINE), (grid.columns, grid.rows)[axis]
    before = np.roll(slope, half, axis=1) * (at[:, axis] > 0)[:, None]  # where the patch before it ends
    after = np.roll(slope, -half, axis=1) * (at[:, axis] < last)[:, None]  # and the next one begins
    pair = (before + after) / 2
    inner = np.abs(t) <= window
    pair, t = pair[:, inner], t[inner]
    place = pair.argmax(axis=1)
    beside = np.clip(place[:, None] + np.arange(-2, 3), 0, t.size - 1)
    weights = np.take_along_axis(pair, beside, axis=1) + 1e-12
    offset = np.sum(t[beside] * weights, axis=1) / weights.sum(axis=1)
    return np.column_stack([at, offset, pair.max(axis=1) ** 2])


def _corner_offsets(seen: Real, size: tuple[int, int]) -> Real:
    """Return offsets at the grid's four corners, clockwise from the upper left, that fit what is seen.

    They follow a plane with a twist; of what the borders do not tell, little is believed.
    """

    def terms(u: Real, v: Real) -> Real:
        return np.column_stack([np.ones(u.size), u - 0.5, v - 0.5, (u - 0.5) * (v - 0.5)])

    shares = terms(seen[:, 0] / size[0], seen[:, 1] / size[1])
    given = seen[:, 3] / max(float(seen[:, 3].sum()), 1e-300)
    weights: Real = given
    fit: Real = np.zeros(4)
    for _ in range(4):
        normal = shares.T @ (weights[:, None] * shares) + DOUBT
        fit = np.asarray(np.linalg.solve(normal, shares.T @ (weights * seen[:, 2])), dtype=np.float64)
        off = seen[:, 2] - shares @ fit
        weights = np.asarray(given / (1 + (off / 0.08) ** 2))  # borders that lie off the others hardly count
    return np.asarray(terms(np.array([0.0, 1, 1, 0]), np.array([0.0, 0, 1, 1])) @ fit)


def _sampled(picture: Real, at: Real) -> Real:
    """Return values at places (…, 2), px from the outer corner, by linear interpolation."""
    height, width = picture.shape
    x, y = np.clip(at[..., 0] - 0.5, 0, width - 1), np.clip(at[..., 1] - 0.5, 0, height - 1)
    i, j = np.minimum(y.astype(np.intp), height - 2), np.minimum(x.astype(np.intp), width - 2)
    u, v = y - i, x - j
    upper = (1 - v) * picture[i, j] + v * picture[i, j + 1]
    return np.asarray((1 - u) * upper + u * ((1 - v) * picture[i + 1, j] + v * picture[i + 1, j + 1]))


def _ranked(picture: Real, grid: PatchGrid) -> PatchGrid:
    """Return the grid with the gap that explains the picture best, and what it leaves."""
    height, width = picture.shape
    x, y = np.meshgrid(np.arange(width) + 0.5, np.arange(height) + 0.5)
    back = np.linalg.inv(_homography(grid.corners))
    u, v, ahead = back @ np.array([x.ravel(), y.ravel(), np.ones(x.size)])
    u, v = u / ahead * grid.columns, v / ahead * grid.rows
    inside = (u >= 0) & (u < grid.columns) & (v >= 0) & (v < grid.rows) & (ahead > 0)
    patch = np.where(inside, np.floor(v) * grid.columns + np.floor(u), 0).astype(np.intp)
    off = np.maximum(np.abs(u - np.floor(u) - 0.5), np.abs(v - np.floor(v) - 0.5))
    values = (picture - picture.mean()).ravel()
    number = grid.columns * grid.rows
    best = (1.0, grid.gap)
    for gap in GAPS:
        classes = np.where(inside, np.where(off <= (1 - gap) / 2, patch, number), number + 1)
        sums, counts = np.bincount(classes, values), np.maximum(np.bincount(classes), 1)
        best = min(best, (1 - float(np.sum(sums**2 / counts)) / float(np.sum(values**2)), gap))
    return replace(grid, left=best[0], gap=best[1])
