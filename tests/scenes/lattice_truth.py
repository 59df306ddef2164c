"""What the figures of geometry are for a drawn lattice, from its camera and lens alone.

Shares nothing with the program under test; definitions as in ISO 17850:2015 (local distortion), EBU Tech 3249 (sag over
picture height) and elementary geometry.
"""

import numpy as np
from scipy.optimize import brentq

from tests.scenes.lattices import LatticeScene, Values


def truth(scene: LatticeScene, pitch_mm: float, distance_mm: float, pixel_mm: float) -> dict[str, float]:
    """Return every figure by its name.

    Args:
        scene: The scene.
        pitch_mm: Pitch of the chart.
        distance_mm: Of the chart, for angles.
        pixel_mm: Pixel pitch of the sensor.
    """
    w, h = scene.size
    step = _slopes(scene, np.array([[w / 2, h / 2]]))
    scale = float(np.sqrt(abs(np.linalg.det(step))))
    ends = np.array([[0, h / 2], [w, h / 2], [w / 2, 0], [w / 2, h], [0, 0], [w, h], [w / 2, h / 2]], dtype=np.float64)
    left, right, up, low, one, two, mid = scene.places_at(ends)
    ebu, smia = picture_height(scene)
    across, down = keystone(scene)

    def angle(a: Values, b: Values) -> float:
        sides = [np.hypot(*(end - mid)) * pitch_mm / distance_mm for end in (a, b)]
        return float(np.degrees(np.arctan(sides[0]) + np.arctan(sides[1])))

    made = {
        "magnification": scale * pixel_mm / pitch_mm,
        "object_pixel_size": 1000 * pitch_mm / scale,
        "field_of_view_width": float(np.hypot(*(right - left))) * pitch_mm,
        "field_of_view_height": float(np.hypot(*(low - up))) * pitch_mm,
        "field_of_view_diagonal": float(np.hypot(*(two - one))) * pitch_mm,
        "field_angle_horizontal": angle(left, right),
        "field_angle_vertical": angle(up, low),
        "field_angle_diagonal": angle(one, two),
        "rotation": float(np.degrees(np.arctan2(step[1, 0] - step[0, 1], step[0, 0] + step[1, 1]))),
        "scale_ratio": float(np.hypot(*step[:, 0]) / np.hypot(*step[:, 1])),
        "keystone_horizontal": across,
        "keystone_vertical": down,
        "optical_centre_x": float(scene.middle[0]),
        "optical_centre_y": float(scene.middle[1]),
        "optical_centre_offset": float(np.hypot(*scene.centre)),
        "tv_distortion_ebu": ebu,
        "tv_distortion_smia": smia,
        "row_bow": largest_bow(scene, 1),
        "column_bow": largest_bow(scene, 0),
    }
    terms = {f"radial_k{i}": (*scene.radial, 0.0, 0.0, 0.0)[i - 1] for i in (1, 2, 3)}
    return made | terms


def _slopes(scene: LatticeScene, points: Values) -> Values:
    """Return the ideal steps of one column and one row at the place that a point of the frame shows, px, 2 × 2."""
    place, e = scene.places_at(points), 1e-4
    sides = [(scene.ideal(place + d) - scene.ideal(place - d))[0] / (2 * e) for d in np.eye(2)[:, None, :] * e]
    return np.column_stack(sides)


def height(scene: LatticeScene, ideal: float) -> float:
    """Return the image height over half the diagonal that an ideal one becomes."""
    return ideal * (1 + sum(k * ideal ** (2 * i) for i, k in enumerate(scene.radial, 1)))


def local_distortion(scene: LatticeScene, field: float) -> float:
    """Return 100 (H' - H)/H % at an image height H' of so many half diagonals."""
    ideal = brentq(lambda r: height(scene, r) - field, 1e-6, 3.0 * field)
    return 100 * (field / ideal - 1)


def picture_height(scene: LatticeScene) -> tuple[float, float]:
    """Return sag over picture height, and sides' height against the middle's, of an ideal rectangle as the frame."""
    w, h = scene.size
    corner = np.hypot(w, h) / 2 / scene.half
    top = h / 2 / scene.half
    side, middle = height(scene, corner) / corner * top, height(scene, top)
    return 100 * (side - middle) / (2 * middle), 100 * (side - middle) / middle


def keystone(scene: LatticeScene) -> tuple[float, float]:
    """Return how far scale at the right exceeds that at the left, and at the lower border that at the upper one, %."""
    w, h = scene.size
    corners = np.array([[0, 0], [w, 0], [w, h], [0, h]]) - scene.middle
    out = np.column_stack([corners, np.ones(4)]) @ np.linalg.inv(scene.plane()).T
    a, b, c, d = out[:, :2] / out[:, 2:]
    upper, right, lower, left = (float(np.hypot(*(q - p))) for p, q in ((a, b), (b, c), (c, d), (d, a)))
    return 200 * (left - right) / (left + right), 200 * (upper - lower) / (upper + lower)


def largest_bow(scene: LatticeScene, axis: int) -> float:
    """Return the largest bow of a row (axis 1) or column (0) that lies wholly in the frame, % of its chord."""
    places = scene.all_places()
    most = 0.0
    for n in range(scene.places[axis]):
        line = scene.seen(places[places[:, axis] == n])
        chord = line[-1] - line[0]
        away = np.abs(chord[0] * (line[:, 1] - line[0, 1]) - chord[1] * (line[:, 0] - line[0, 0]))
        most = max(most, float(away.max() / np.hypot(*chord) ** 2))
    return 100 * most
