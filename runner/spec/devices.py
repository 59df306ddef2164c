"""Builds the records of camera, optics and chart from their shapes, with what must hold between their keys."""

from runner.errors import UsageError
from runner.spec import units
from runner.spec.leaves import share
from runner.spec.model import Amount, Camera, Chart, Optics, Tone
from runner.spec.shapes import CameraPart, ChartShape, OpticsShape
from runner.spec.tree import Complaints

_NO_CONTEXT = units.FrequencyContext()


def overridden(base: CameraPart, part: CameraPart | None) -> CameraPart:
    """Return the camera's shape with one capture's own data laid over it."""
    if part is None:
        return base
    return base.model_copy(update={key: getattr(part, key) for key in part.model_fields_set})


def build_camera(shape: CameraPart, complaints: Complaints, place_of: CameraPart | None = None) -> Camera | None:
    """Return the camera, or None with complaints.

    Args:
        shape: All its data.
        complaints: Takes the complaints.
        place_of: The shape whose lines are named; without one, `shape` itself.
    """
    told = place_of or shape
    before = len(complaints)
    if shape.frame_size is None or shape.bit_depth is None or shape.black_level is None or shape.white_level is None:
        return None  # the shape has complained
    black, white, top = shape.black_level.value, shape.white_level.value, 2**shape.bit_depth - 1
    if white > top:
        found = f"the white level of {white:g} DN lies above what {shape.bit_depth} bit can hold"
        complaints.error(told.at("white_level"), found, f"at most {top} DN", "the bit depth is the sensor's")
    if black >= white:
        complaints.error(
            told.at("black_level"),
            f"the black level of {black:g} DN is not below the white level",
            f"below {white:g} DN",
        )
    if shape.mosaic not in {None, "none"}:
        complaints.error(
            told.at("mosaic"),
            f"mosaic {shape.mosaic} cannot be measured by this release",
            "none",
            "deliver mono frames",
        )
    if shape.colour not in {None, "mono"}:
        complaints.error(
            told.at("colour"),
            f"colour {shape.colour} cannot be measured by this release",
            "mono",
            "deliver mono frames",
        )
    fill = share(shape.fill) if shape.fill is not None else 1.0
    if fill > 1:
        complaints.error(told.at("fill"), "the fill lies above the whole pixel", "at most 100 %")
    if shape.delivers == "jpeg" and shape.bit_depth > 8:
        complaints.error(told.at("delivers"), f"a JPEG frame holds 8 bit, not {shape.bit_depth}", "bit_depth: 8 bit")
    if len(complaints) > before:
        return None
    pitch = micrometres(shape.pixel_pitch)
    return Camera(
        *shape.frame_size,
        shape.bit_depth,
        black,
        white,
        pixel_pitch_um=pitch,
        fill=fill,
        tone=shape.tone or Tone(),
        processing=shape.processing or (),
        delivers=shape.delivers or "raw",
    )


def build_optics(base: OpticsShape, complaints: Complaints, part: OpticsShape | None = None) -> Optics:
    """Return the optics, one capture's own data laid over them, with complaints about what cannot be."""
    stated = {key: getattr(shape, key) for shape in (base, part) if shape is not None for key in shape.model_fields_set}
    told = part or base
    if stated.get("f_number") and stated.get("numerical_aperture"):
        found = "the aperture is stated twice, as f_number and as numerical_aperture"
        complaints.error(told.at("numerical_aperture"), found, "", "keep one of them")
    index, aperture = stated.get("immersion") or 1.0, stated.get("numerical_aperture")
    if aperture and aperture >= index:
        found = f"a numerical aperture of {aperture:g} is not below the refractive index of {index:g}"
        complaints.error(told.at("numerical_aperture"), found, "", "state immersion, e.g. 1.518 for oil")
    focal = stated.get("focal_length")
    return Optics(
        f_number=stated.get("f_number"),
        wavelength_um=micrometres(stated.get("wavelength")),
        focal_length_mm=None if focal is None else units.convert(focal.value, focal.unit, "mm", _NO_CONTEXT),
        numerical_aperture=aperture,
        magnification=stated.get("magnification"),
        immersion=stated.get("immersion"),
    )


def build_chart(shape: ChartShape | None, context: units.FrequencyContext, complaints: Complaints) -> Chart:
    """Return the chart, its transfer table in cy/px."""
    if shape is None:
        return Chart()
    table: tuple[tuple[float, float], ...] = ()
    try:
        rows = shape.transfer or ()
        table = tuple((units.convert(f.value, f.unit, "cy/px", context), m.value) for f, m in rows)
    except UsageError as error:
        complaints.error(shape.at("transfer"), error.found, error.allowed, error.next_step)
    u = share(shape.transfer_uncertainty) if shape.transfer_uncertainty is not None else 0.0
    return Chart(shape.name or "", shape.serial or "", shape.due or "", table, u)


def micrometres(length: Amount | None) -> float | None:
    """Return a length in µm."""
    return None if length is None else units.convert(length.value, length.unit, "µm", _NO_CONTEXT)
