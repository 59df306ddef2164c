"""The page of `probatum check --frames`: each capture's first frame with its regions, as asked and as found."""

import base64
import io
from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
from jinja2 import Environment, FileSystemLoader, StrictUndefined
from PIL import Image

from runner.capture.frame import Frame, linearise
from runner.capture.lot import find_lot
from runner.capture.mosaic import grey
from runner.capture.patterns import natural, read_pattern
from runner.capture.readers import read_frames
from runner.errors import FrameRefused, UsageError
from runner.measure.chart_placing import in_frame, locate
from runner.measure.chart_view import Unfit, look
from runner.measure.contract import Found, NotFound
from runner.measure.plan import CapturePlan, Plan
from runner.resources import folder
from runner.spec.model import Camera, Region

MAX_WIDTH = 1600
"""px; wider frames are shown smaller, the regions keep their places."""


def write_page(plan: Plan, frames: Path, out: Path) -> str:
    """Write the page and return one line about it.

    Args:
        plan: The bound spec.
        frames: Folder with one folder per unit, of which the first is shown, or with the frames themselves.
        out: The page.

    Raises:
        UsageError: The folder is not there, holds no frame that a pattern fits, or the page cannot be written.
    """
    place, files = _files(plan, frames)
    if not any(files.values()):
        raise UsageError("no file fits any pattern of the spec", where=str(frames), next_step="check the folder")
    document = plan.spec.document
    environment = Environment(loader=FileSystemLoader(folder("templates")), autoescape=True, undefined=StrictUndefined)
    page = environment.get_template("regions.html").render(
        title=f"Regions of {document.number} revision {document.revision}",
        intro=f"Frames of {place}. Nothing was judged here.",
        captures=[_capture(one, files[one.capture.same_frames_as or one.capture.name]) for one in plan.captures],
    )
    try:
        out.parent.mkdir(parents=True, exist_ok=True)
        out.write_text(page, encoding="utf-8")
    except OSError as error:
        raise UsageError(f"the page cannot be written: {error.strerror}", where=str(out)) from error
    return f"{out.as_posix()}: the regions on frames of {place}"


def _files(plan: Plan, frames: Path) -> tuple[str, dict[str, tuple[Path, ...]]]:
    """Return whose frames are shown, and the files of every capture."""
    lot = find_lot(frames, plan.spec)
    if lot.units:
        attempt = lot.units[0].attempts[0]
        return f"unit {lot.units[0].serial}", {n: tuple(r.path for r in refs) for n, refs in attempt.frames.items()}
    names = sorted((p.relative_to(frames).as_posix() for p in frames.rglob("*") if p.is_file()), key=natural)
    fitting = {}
    for one in plan.captures:
        pattern = read_pattern(one.capture.frames.names) if one.capture.frames is not None else None
        fitting[one.capture.name] = tuple(frames / n for n in names if pattern and pattern.match(n) is not None)
    return f"folder {frames.name}", fitting


def _capture(one: CapturePlan, files: Sequence[Path]) -> dict[str, Any]:
    capture = one.capture
    page: dict[str, Any] = {"heading": f"{capture.name}: {one.target.TITLE}", "picture": "", "sentences": []}
    if not files:
        return page | {"sentences": ["No file fits the pattern of this capture."]}
    try:
        frame = read_frames(files[0], capture.camera)[0]
    except FrameRefused as refused:
        return page | {"sentences": [f"The file was refused. {refused}"]}
    frame = replace(frame, codes=grey(frame.codes, capture.camera))  # as the session lets targets see it
    rows, columns = frame.shape
    sentences = [f"File {files[0].name}, {columns} × {rows} px."]
    pose = look(frame.codes, capture.camera, capture.optics, capture.chart)
    seen = None if isinstance(pose, Unfit) else pose
    located = [] if isinstance(pose, Unfit) else locate(one, frame, seen)
    if isinstance(pose, Unfit):
        sentences.append(f"No region can be placed: {pose.because}.")
    asked = {region.name: region for region in in_frame(capture.regions, seen, capture.chart)}
    return page | {
        "sentences": sentences,
        "picture": _picture(frame, capture.camera),
        "width": columns,
        "height": rows,
        "font_size": round(columns / 50),
        "regions": [
            _region(i + 1, one_found, asked.get(one_found.region), frame) for i, one_found in enumerate(located)
        ],
    }


def _region(number: int, found: Found | NotFound, asked: Region | None, frame: Frame) -> dict[str, Any]:
    rows, columns = frame.shape
    x, y = asked.centre_px(columns, rows) if asked is not None else (columns / 2, rows / 2)
    width, height = asked.size_px(columns, rows) if asked is not None else (columns, rows)
    if isinstance(found, Found):
        dx, dy = (found.box.x0 + found.box.x1) / 2 - x, (found.box.y0 + found.box.y1) / 2 - y
        moved = f", moved by ({dx:+.0f}, {dy:+.0f}) px" if max(abs(dx), abs(dy)) >= 1 else ""
        words, outline = f"yes{moved}", " ".join(f"{px:.1f},{py:.1f}" for px, py in found.outline)
    else:
        words, outline = f"no: {found.because}", ""
    return {
        "number": number,
        "name": found.region or "whole frame",
        "where": f"({x:.1f}, {y:.1f}), {width} × {height}",
        "found": words,
        "x": round(x - width / 2, 1),
        "y": round(y - height / 2, 1),
        "width": width,
        "height": height,
        "label_y": round(max(y - height / 2 - columns / 400, columns / 50), 1),
        "outline": outline,
    }


def _picture(frame: Frame, camera: Camera) -> str:
    """Return the frame as a PNG in base64, in full tone for the eye (black to white level, gamma 2.2)."""
    light = np.clip(linearise(frame.codes, camera), 0, 1) ** (1 / 2.2)
    image = Image.fromarray(np.round(255 * light).astype(np.uint8))
    if image.width > MAX_WIDTH:
        image = image.resize((MAX_WIDTH, round(image.height * MAX_WIDTH / image.width)), Image.Resampling.BOX)
    stream = io.BytesIO()
    image.save(stream, "png")
    return base64.b64encode(stream.getvalue()).decode("ascii")
