"""Black areas in a bright, even field: holes into a dark box, or patches of a black that is known."""

from collections.abc import Sequence
from dataclasses import dataclass, field

from runner.capture.frame import Frame, linearise
from runner.measure.contract import Found, NotFound
from runner.measure.numerics.black_area import AreaLost, find_black_area
from runner.measure.options import number, reader
from runner.measure.placing import place
from runner.spec.model import Camera, Region

NAME = "black areas"
TITLE = "Black areas in a bright field"
GROUP = "stray light and time"
OFFERS = frozenset({"black area"})
METHODS = ("veiling glare",)
REFERENCES = (
    "ISO 9358:1994 (veiling glare of image-forming systems)",
    "ISO 18844:2017 (image flare of digital cameras)",
)
DARKEST = 0.02
"""Mean light below this share of the range: the field is not lit."""


@dataclass(frozen=True)
class Options:
    """How an area's parts are told apart."""

    margin: float | str = field(
        default=0.15,
        metadata={"sentence": "Share of the area's shorter side kept clear on both sides of its border, e.g. 15 %."},
    )

    def __post_init__(self) -> None:
        """Turn the share into a number."""
        object.__setattr__(self, "margin", number("margin", self.margin, "%", 0.0, 0.4))


read_options = reader(Options)


def locate(
    frames: Sequence[Frame], regions: Sequence[Region], camera: Camera, options: Options
) -> Sequence[Found | NotFound]:
    """Find the black area of every region; the region stays where the spec has it."""
    return [_locate(frames[0], region, camera, options) for region in regions]


def _locate(frame: Frame, region: Region, camera: Camera, options: Options) -> Found | NotFound:
    box = place(region, frame)
    if isinstance(box, NotFound):
        return box
    light = linearise(frame.codes[box.y0 : box.y1, box.x0 : box.x1], camera)
    if light.min() == light.max():
        return NotFound(region.name, box, "no picture", f"every pixel of the region has the light {light.flat[0]:.4g}")
    if float(light.mean()) < DARKEST:
        sentence = f"the region lies {100 * float(light.mean()):.2f} % of the range over black; 2 % is needed"
        return NotFound(region.name, box, "too dark", sentence)
    try:
        area = find_black_area(light, float(options.margin))
    except AreaLost as lost:
        return NotFound(region.name, box, "another scene", str(lost))
    x0, y0, x1, y1 = (a + b for a, b in zip(area.box, (box.x0, box.y0, box.x0, box.y0), strict=True))
    corners = ((x0, y0), (x1, y0), (x1, y1), (x0, y1))
    geometry = {"width": float(x1 - x0), "height": float(y1 - y0)}
    return Found(region.name, box, OFFERS, geometry, tuple((float(x), float(y)) for x, y in corners))
