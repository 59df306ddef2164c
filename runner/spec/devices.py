"""Builds the records of camera, optics and chart from their shapes, with what must hold between their keys."""

from runner.errors import UsageError
from runner.spec import units
from runner.spec.charts import build_chart_file, build_view
from runner.spec.files import PACKINGS, Layout
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
    mosaic, colour = shape.mosaic or "none", shape.colour or "mono"
    if mosaic != "none" and colour != "mono":
        found = f"a mosaic {mosaic} has one number a pixel, colour {colour} three"
        complaints.error(told.at("colour"), found, "", "keep mosaic for raw frames, or colour: rgb for processed ones")
    if mosaic != "none" and shape.delivers == "jpeg":
        complaints.error(told.at("mosaic"), "a JPEG holds no mosaic", "", "colour: rgb, or delivers: raw")
    layout = build_layout(shape, told, complaints)
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
        mosaic,
        colour,
        pixel_pitch_um=pitch,
        fill=fill,
        tone=shape.tone or Tone(),
        processing=shape.processing or (),
        delivers=shape.delivers or "raw",
        layout=layout,
    )


def build_layout(shape: CameraPart, told: CameraPart, complaints: Complaints) -> Layout:
    """Return how files hold their pixels, with complaints about what cannot hold such frames.

    Args:
        shape: All data of the camera.
        told: The shape whose lines are named.
        complaints: Takes the complaints.
    """
    asked = shape.layout
    if asked is None:
        return Layout()
    layout = Layout(
        asked.packing or "",
        asked.byte_order or "",
        asked.row_padding or 0,
        asked.header or 0,
        asked.frames_per_file or 1,
        asked.first_row or "",
        asked.dataset or "",
    )
    packing = PACKINGS.get(layout.packing)
    if packing is None or shape.frame_size is None or shape.bit_depth is None:
        return layout
    place = told.at("layout", "packing")
    if packing.bits < shape.bit_depth:
        found = f"the packing {layout.packing} does not hold {shape.bit_depth} bit"
        fitting = ", ".join(name for name, one in PACKINGS.items() if one.bits >= shape.bit_depth)
        complaints.error(place, found, fitting, "the bit depth is the sensor's")
    if shape.frame_size[0] % packing.pixels:
        found = f"rows of {shape.frame_size[0]} px do not fill whole groups of {packing.pixels} px"
        complaints.error(place, found, f"a width that {packing.pixels} divides", "state the width that is stored")
    if shape.colour == "rgb":
        found = "headerless files hold one number a pixel, colour rgb three"
        complaints.error(place, found, "", "export the frames as TIFF, PNG or NPY")
    return layout


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
    """Return the chart, its transfer table in cy/px, its file's data in mm."""
    if shape is None:
        return Chart()
    table: tuple[tuple[float, float], ...] = ()
    try:
        rows = shape.transfer or ()
        table = tuple((units.convert(f.value, f.unit, "cy/px", context), m.value) for f, m in rows)
    except UsageError as error:
        complaints.error(shape.at("transfer"), error.found, error.allowed, error.next_step)
    u = share(shape.transfer_uncertainty) if shape.transfer_uncertainty is not None else 0.0
    if shape.file is None:
        return Chart(shape.name or "", shape.serial or "", shape.due or "", table, u)
    file = build_chart_file(shape.file, complaints)
    if file is None:
        return Chart()
    view = build_view(shape.view, file.view)
    if view.most_tilt is not None and (context.focal_length_mm is None or context.pixel_pitch_um is None):
        found = "a tilt in degrees needs the camera's pixel_pitch and the optics' focal_length"
        place = shape.view.at("tilt") if shape.view is not None else shape.at("file")
        complaints.error(place, found, "", "state them, or bound the keystone in place of the tilt")
    return Chart(file.name, file.serial, file.due, table, u, file, view)


def micrometres(length: Amount | None) -> float | None:
    """Return a length in µm."""
    return None if length is None else units.convert(length.value, length.unit, "µm", _NO_CONTEXT)
