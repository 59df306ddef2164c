"""The circumstances of a measurement as they stand in a report: conditions, methods, deviations."""

from typing import Any

from runner.measure.contract import Method, Target
from runner.measure.evidence import UnitEvidence
from runner.measure.options import describe
from runner.measure.plan import CapturePlan, Plan
from runner.spec.files import Layout
from runner.spec.model import Camera, Chart, Optics


def conditions(camera: Camera, optics: Optics, chart: Chart) -> list[list[str]]:
    """Return the stated conditions of a capture as pairs of label and text; what was not stated is left out."""
    tone = {"linear": "linear", "srgb": "sRGB (IEC 61966-2-1)", "table": "table"}.get(camera.tone.kind)
    rows: list[tuple[str, Any]] = [
        ("frame size", f"{camera.width} × {camera.height} px"),
        ("bit depth", f"{camera.bit_depth} bit"),
        ("mosaic", "" if camera.mosaic == "none" else camera.mosaic),
        ("colour", "" if camera.colour == "mono" else "red, green and blue planes"),
        ("file layout", _layout(camera.layout)),
        ("black level", f"{camera.black_level:g} DN"),
        ("white level", f"{camera.white_level:g} DN"),
        ("tone", tone or f"gamma {camera.tone.gamma:g}"),
        ("processing", ", ".join(camera.processing) or "none"),
        ("delivers", camera.delivers),
        ("pixel pitch", _stated(camera.pixel_pitch_um, "µm")),
        ("pixel fill", f"{100 * camera.fill:g} %"),
        ("f-number", _stated(optics.f_number)),
        ("numerical aperture", _stated(optics.numerical_aperture)),
        ("wavelength", _stated(optics.wavelength_um, "µm")),
        ("focal length", _stated(optics.focal_length_mm, "mm")),
        ("magnification", _factor(optics.magnification)),
        ("chart", " ".join(part for part in (chart.name, chart.serial) if part)),
        ("chart calibration due", chart.due),
    ]
    return [[label, text] for label, text in rows if text]


def _layout(layout: Layout) -> str:
    words = [layout.packing, f"{layout.byte_order} byte order" if layout.byte_order else ""]
    words += [f"header {layout.header} bytes" if layout.header else ""]
    words += [f"row padding {layout.row_padding} bytes" if layout.row_padding else ""]
    words += [f"{layout.frames_per_file} frames a file" if layout.frames_per_file > 1 else ""]
    words += [f"first row at the {layout.first_row}" if layout.first_row else ""]
    words += [f"dataset {layout.dataset}" if layout.dataset else ""]
    return ", ".join(word for word in words if word)


def _stated(value: float | None, unit: str = "") -> str:
    return "" if value is None else f"{value:g} {unit}".strip()


def _factor(value: float | None) -> str:
    """Return a magnification as one thinks of it: `20 ×`, and below one as the fraction that it is, `1/120 ×`."""
    if value is None or value >= 1:
        return _stated(value, "×")
    parts = float(f"{1 / value:.4g}")
    return f"1/{parts:g} ×" if abs(value * parts - 1) < 1e-6 else f"{value:.6g} ×"


def methods(plan: Plan) -> list[dict[str, Any]]:
    """Return targets and methods with titles, references and options, as plain JSON data."""
    rows: list[dict[str, Any]] = []
    for one in plan.captures:
        rows.append(_module(one, one.target, one.target_options))
        rows += [_module(one, m.method, m.options) for m in one.methods]
    return rows


def _module(one: CapturePlan, module: Target | Method, options: Any) -> dict[str, Any]:
    return {
        "capture": one.capture.name,
        "name": module.NAME,
        "title": module.TITLE,
        "references": list(module.REFERENCES),
        "options": describe(options),
    }


def deviations(plan: Plan, evidence: UnitEvidence) -> list[str]:
    """Return what departs from a plain measurement of raw frames, one sentence each."""
    camera = plan.spec.camera
    rows = []
    if camera.delivers == "jpeg":
        rows.append("The product delivers JPEG: its compression is part of what was measured.")
    if camera.processing:
        words = ", ".join(camera.processing)
        rows.append(
            f"The product processes its frames ({words}): the values describe optics, sensor and processing together."
        )
    if evidence.simulated:
        rows.append(
            "At least one frame is marked as simulated: this report shows a rehearsal and is no evidence of a unit."
        )
    return [*rows, *_lost_companions(plan, evidence), *evidence.remarks]


def _lost_companions(plan: Plan, evidence: UnitEvidence) -> list[str]:
    """Say of every capture which companion it was measured without, and why: that must not look like having none."""
    there = {(c.name, c.attempt): c for c in evidence.captures}
    uses = {capture.name: capture.uses for capture in plan.spec.captures}
    rows = []
    for capture in evidence.captures:
        if capture.faults or not capture.frames:
            continue
        for role, name in uses.get(capture.name, {}).items():
            other = there.get((name, capture.attempt))
            if other is not None and other.frames and not other.faults:
                continue
            why = other.faults[0] if other is not None and other.faults else "it has no frames"
            attempt = "" if capture.attempt == 1 else f" in attempt {capture.attempt}"
            rows.append(
                f"'{capture.name}' was measured without its companion '{name}' ({role}){attempt}: {why}. What is taken "
                "from it otherwise is as the spec states it, or was not measured."
            )
    return rows
