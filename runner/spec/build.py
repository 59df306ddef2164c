"""Builds the resolved spec from its file, or from its expanded form, with all complaints at once."""

from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path
from typing import Any

from runner.errors import UsageError
from runner.spec.captures import Defaults, Draft, build_captures
from runner.spec.devices import build_camera, build_optics
from runner.spec.include import read_merged
from runner.spec.leaves import share
from runner.spec.lint import lint
from runner.spec.model import PROOF_EITHER_WAY, Document, Optics, Spec, UncertaintyComponent, UnitRule
from runner.spec.relations import relate
from runner.spec.revision import digest
from runner.spec.shapes import ComponentShape, DocumentShape, RootShape
from runner.spec.tree import Complaints, Mapped, Place, from_plain

DEFAULT_RULE = PROOF_EITHER_WAY
"""Where neither spec nor limit names a decision rule."""
DEFAULT_PROBABILITY = 0.95
"""Conformance probability where none is stated (the default of ISO 14253-1:2017)."""


def read_spec(path: Path, station: tuple[UncertaintyComponent, ...] = ()) -> Spec:
    """Read a spec file, its bases included, strictly.

    Args:
        path: The spec.
        station: Uncertainty components that the station declares; they count when two-sided limits are looked at.

    Raises:
        SpecError: With every complaint at once, in the order of the lines.
    """
    complaints = Complaints()
    label = path.as_posix()
    try:
        tree = read_merged(path, complaints)
    except UsageError as error:
        complaints.error(Place(label, 0, 0), error.found, error.allowed, error.next_step)
        tree = None
    spec = _build(tree, complaints, station) if tree is not None else None
    complaints.raise_errors()
    if spec is None:  # pragma: no cover - a spec that was not built has complaints
        msg = f"{label} was refused without a complaint"
        raise AssertionError(msg)
    return replace(spec, source=label, warnings=complaints.sorted("warning"))


def from_expanded(data: Mapping[str, Any]) -> Spec:
    """Rebuild a spec from `Spec.expanded`, e.g. out of results.json: the same records and the same digest.

    The lint is not run again: it warned whoever wrote the spec, and a later program may warn of more.

    Raises:
        SpecError: The data are no expanded spec.
    """
    complaints = Complaints()
    spec = _build(from_plain(data, "the expanded spec"), complaints, None)
    complaints.raise_errors()
    if spec is None:  # pragma: no cover - see read_spec
        msg = "the expanded spec was refused without a complaint"
        raise AssertionError(msg)
    return replace(spec, source="the expanded spec")


def _build(tree: Mapped, complaints: Complaints, station: tuple[UncertaintyComponent, ...] | None) -> Spec | None:
    """Build a spec; with the station's components, look at what it asks against logic and physics too."""
    root: RootShape | None = RootShape.model_validate(tree, context=complaints)
    if root is None:
        return None
    camera = build_camera(root.camera, complaints) if root.camera is not None else None
    optics = build_optics(root.optics, complaints) if root.optics is not None else Optics()
    uncertainty = tuple(build_component(c) for c in root.uncertainty or () if c is not None)
    drafts: tuple[Draft, ...] = ()
    if root.captures is not None and root.sound("captures"):
        decision = root.decision
        probability = decision.conformance_probability if decision else None
        defaults = Defaults(
            (decision.rule if decision else None) or DEFAULT_RULE,
            share(probability) if probability else DEFAULT_PROBABILITY,
        )
        drafts = build_captures(root, camera, optics, defaults, complaints)
    if station is not None:
        lint(root, drafts, (*uncertainty, *station), complaints)
        relate(root, drafts, complaints)
    if complaints.sorted("error") or camera is None or root.document is None or root.unit is None:
        return None
    expanded = root.model_dump(mode="json", by_alias=True, exclude_unset=True)
    return Spec(
        _document(root.document),
        UnitRule(root.unit.product, root.unit.serial),
        camera,
        optics,
        tuple(draft.capture for draft in drafts),
        uncertainty,
        expanded,
        digest(expanded),
        places=_places(drafts),
    )


def _places(drafts: tuple[Draft, ...]) -> dict[str, str]:
    """Return the lines of captures and of what stands in them, by the words in which later complaints name them."""
    places: dict[str, str] = {}
    for draft in drafts:
        words = f"captures, {draft.capture.name}"
        places[words] = str(draft.shape.at())
        places |= {f"{words}, {key}": str(draft.shape.at(key)) for key in ("target", "measure", "usable_if")}
        places |= {f"{words}, measure, {name}": str(draft.shape.at("measure", name)) for name in draft.capture.measure}
        for limit, shape in draft.limits:
            places.setdefault(f"{words}, limit {limit.characteristic}", str(shape.at("quantity")))
    return places


def _document(shape: DocumentShape) -> Document:
    return Document(**{key: getattr(shape, key) or "" for key in shape.known_keys()})


def build_component(shape: ComponentShape) -> UncertaintyComponent:
    """Return a declared uncertainty component."""
    relative = share(shape.relative) if shape.relative is not None else None
    return UncertaintyComponent(shape.name, shape.of, relative, shape.absolute, shape.shared)
