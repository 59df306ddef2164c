"""Variants: a spec that names a base file with `include:` is laid over it before anything is read.

Mappings are merged key by key; what is not a mapping is replaced. Limits are merged by characteristic: the variant's
limits of a characteristic take the place of all the base's limits of that characteristic in that capture. `remove:
true` takes a key, or a characteristic, away. A base lies in the folder of the spec or below it. Last, the contents of
chart files take the place of their names.
"""

from pathlib import Path, PurePosixPath
from typing import Any, TypeGuard

from runner.errors import UsageError
from runner.spec.charts import lay_in
from runner.spec.leaves import read_truth, shown
from runner.spec.tree import Complaints, Listed, Mapped, Text, read_tree

MAX_FILES = 8
"""Files in one chain of bases."""


def read_merged(path: Path, complaints: Complaints) -> Mapped | None:
    """Read a spec and its bases into one tree, whose places name the files.

    Args:
        path: The spec.
        complaints: Takes the complaints.

    Raises:
        UsageError: The spec itself cannot be read.
    """
    tree = _read(path, path.as_posix(), path.resolve().parent, (), complaints)
    if tree is None:
        return None
    whole = _without_removed(tree, complaints)
    lay_in(whole, path.resolve().parent, complaints)
    return whole


def _read(path: Path, label: str, top: Path, seen: tuple[Path, ...], complaints: Complaints) -> Mapped | None:
    tree = read_tree(path, label, complaints)
    if tree is None or "include" not in tree:
        return tree
    name, place = tree.pop("include"), tree.key_places.pop("include")
    if not isinstance(name, Text):
        if name is not None:
            complaints.error(place, f"{shown(name)} stands where a file is meant", "for example include: base.yaml")
        return tree
    target = path.parent / PurePosixPath(name)
    resolved = target.resolve()
    if PurePosixPath(name).is_absolute() or "\\" in name or not resolved.is_relative_to(top):
        complaints.error(
            name.place, f"the base '{name}' lies outside the spec's folder", "a file in it or below it, with /"
        )
    elif resolved in (*seen, path.resolve()):
        complaints.error(
            name.place, f"the base '{name}' includes itself, directly or through others", "", "break the circle"
        )
    elif len(seen) + 1 >= MAX_FILES:
        complaints.error(name.place, f"more than {MAX_FILES} files include one another", "", "write it flatter")
    else:
        try:
            base = _read(target, str(PurePosixPath(label).parent / name), top, (*seen, path.resolve()), complaints)
        except UsageError as error:
            complaints.error(name.place, f"the base '{name}' cannot be read: {error.found}", "", "check the name")
            return tree
        return tree if base is None else _laid_over(base, tree, complaints)
    return tree


def _laid_over(base: Mapped, variant: Mapped, complaints: Complaints) -> Mapped:
    """Return the base with the variant's keys laid over it; the base's order is kept."""
    merged = Mapped(variant.place)
    for source in (base, variant):
        merged.key_places.update(source.key_places)
    for key in (*base, *(key for key in variant if key not in base)):
        below, above = base.get(key), variant.get(key, base.get(key))
        if key in base and key in variant and _mergeable(below) and _mergeable(above):
            merged[key] = _laid_over(below, above, complaints)
        elif key == "limits" and key in variant and isinstance(below, Listed) and isinstance(above, Listed):
            merged[key] = _limits(below, above, complaints)
        else:
            merged[key] = above
    return merged


def _mergeable(node: Any) -> TypeGuard[Mapped]:
    return isinstance(node, Mapped) and "remove" not in node


def _limits(base: Listed, variant: Listed, complaints: Complaints) -> Listed:
    replaced: dict[str, list[Any]] = {}
    for limit in variant:
        replaced.setdefault(_characteristic(limit), []).append(limit)
    known = {_characteristic(limit) for limit in base}
    for number, limits in replaced.items():
        for limit in limits:
            if number not in known and _removed(limit, complaints):
                complaints.error(limit.place, f"there is no characteristic {number} to remove", "", "check the number")
    merged = Listed(variant.place)
    done: set[str] = set()
    for limit in (*base, *variant):
        number = _characteristic(limit)
        if number not in replaced:
            merged.append(limit)
        elif number not in done:
            done.add(number)
            merged.extend(one for one in replaced[number] if not _removed(one, complaints))
    return merged


def _characteristic(limit: Any) -> str:
    return str(limit.get("characteristic")) if isinstance(limit, Mapped) else ""


def _removed(node: Any, complaints: Complaints) -> bool:
    if not isinstance(node, Mapped) or node.get("remove") is None:
        return False
    extra = [key for key in node if key not in {"remove", "characteristic"}]
    if extra:
        complaints.error(
            node.key_places[extra[0]], f"'{extra[0]}' stands beside remove", "", "remove it or override it"
        )
    if not (isinstance(node["remove"], Text) and node["remove"] == "true" and read_truth(node["remove"])):
        complaints.error(node.key_places["remove"], f"remove is {shown(node['remove'])}", "remove: true", "")
    return True


def _without_removed(node: Mapped, complaints: Complaints) -> Mapped:
    kept = Mapped(node.place)
    kept.key_places = node.key_places
    for key, value in node.items():
        if not _removed(value, complaints):
            kept[key] = _without_removed(value, complaints) if isinstance(value, Mapped) else value
    return kept
