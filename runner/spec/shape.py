"""What all shapes of a spec file have in common: mappings with known keys that tell every complaint at once.

A shape never stops at the first fault. It reads what it can, tells its complaints to the collection that comes as the
validation context, and becomes None where it is broken; the words of the validating library never reach the reader.
"""

from collections.abc import Iterator
from typing import Annotated, Any, ClassVar, TypeVar

from pydantic import (
    BaseModel,
    BeforeValidator,
    ConfigDict,
    ModelWrapValidatorHandler,
    PlainValidator,
    PrivateAttr,
    ValidationError,
    ValidationInfo,
    WrapSerializer,
    model_validator,
)

from runner.spec.leaves import shown
from runner.spec.position_leaves import read_name
from runner.spec.tree import Complaints, Listed, Mapped, Place, Text, nearest, place_of

Found = tuple[str, str, str, str]
"""A complaint of a shape about itself: key, what was found, what is allowed, what to do."""


class Shape(BaseModel):
    """A mapping with known keys.

    Each kind says what complaints call it (`WORDS`), which key a bare text stands for (`SHORT`), which keys must be
    there (`REQUIRED`), and whether its good keys are still of use when others are wrong (`KEPT`).
    """

    model_config = ConfigDict(frozen=True, extra="forbid", use_attribute_docstrings=True)

    WORDS: ClassVar[str] = "this mapping"
    SHORT: ClassVar[str | None] = None
    KEPT: ClassVar[bool] = False
    REQUIRED: ClassVar[tuple[str, ...]] = ()
    _node: Any = PrivateAttr(default=None)
    _flawed: frozenset[str] = PrivateAttr(default=frozenset())

    def at(self, *path: str | int) -> Place:
        """Return where a key of it stands."""
        return place_of(self._node, *path)

    def stated(self, key: str) -> bool:
        """Tell whether the file gives a key."""
        return key in self.model_fields_set

    def sound(self, key: str) -> bool:
        """Tell whether nothing is wrong with a key."""
        return key not in self._flawed

    def whole(self) -> bool:
        """Tell whether nothing is wrong with any key."""
        return not self._flawed

    def check(self) -> Iterator[Found]:
        """Yield what is wrong between the keys, once each of them is right."""
        yield from ()

    @classmethod
    def known_keys(cls) -> tuple[str, ...]:
        """Return the keys as written in the file."""
        return tuple(field.alias or name for name, field in cls.model_fields.items())

    @model_validator(mode="wrap")
    @classmethod
    def _read(cls, data: Any, handler: ModelWrapValidatorHandler[Any], info: ValidationInfo) -> Any:
        complaints: Complaints = Complaints() if info.context is None else info.context
        node = _mapping_of(cls, data)
        if node is None:
            if data is not None:  # None was complained of when the file was read
                keys = f"a mapping with the keys {', '.join(cls.known_keys())}"
                complaints.error(place_of(data), f"{shown(data)} stands where {cls.WORDS} is meant", keys)
            return None
        flawed = _unknown(cls, node, complaints) | _missing(cls, node, complaints)
        known = {key: value for key, value in node.items() if key not in flawed}
        try:
            shape = handler(known)
        except ValidationError as error:
            flawed |= _tell(error, node, complaints)
            try:
                shape = handler({key: value for key, value in known.items() if key not in flawed})
            except ValidationError:
                return None
        flawed |= {key for key in shape.model_fields_set if getattr(shape, key) is None}
        shape._node, shape._flawed = node, frozenset(flawed)  # noqa: SLF001 - a pydantic private attribute of this very class
        for key, found, allowed, step in () if flawed else shape.check():
            complaints.error(shape.at(key), found, allowed, step)
            flawed |= {key}
        shape._flawed = frozenset(flawed)  # noqa: SLF001
        return shape if cls.KEPT or not flawed else None


def _mapping_of(cls: type[Shape], data: Any) -> Mapped | None:
    if isinstance(data, Text) and cls.SHORT:
        short = Mapped(data.place)
        short[cls.SHORT], short.key_places[cls.SHORT] = data, data.place
        return short
    return data if isinstance(data, Mapped) else None


def _unknown(cls: type[Shape], node: Mapped, complaints: Complaints) -> set[str]:
    known = cls.known_keys()
    unknown = {key for key in node if key not in known}
    for key in unknown:
        complaints.error(
            node.key_places[key],
            f"unknown key '{key}' in {cls.WORDS}",
            f"known are: {', '.join(known)}",
            nearest(key, known),
        )
    return unknown


def _missing(cls: type[Shape], node: Mapped, complaints: Complaints) -> set[str]:
    for key in cls.REQUIRED:
        if key not in node:
            complaints.error(node.place, f"{cls.WORDS} lacks the key '{key}'", "", f"add {key}:")
    lacking = {key for key in cls.REQUIRED if key not in node}
    return lacking | {key for key, value in node.items() if value is None}


def _tell(error: ValidationError, node: Mapped, complaints: Complaints) -> set[str]:
    """Tell pydantic's errors in our own sentences; return the keys they are about."""
    flawed: set[str] = set()
    for one in error.errors(include_url=False):
        path = one["loc"]
        flawed.add(str(path[0]) if path else "")
        told = one.get("ctx", {})
        if one["type"] == "spec":
            where = _key_place(node, path) if path and path[-1] == "[key]" else place_of(node, *path, *told["inside"])
            complaints.error(where, told["found"], told["allowed"], told["step"])
        elif one["type"] in {"dict_type", "list_type"}:
            form = "a mapping" if one["type"] == "dict_type" else "a list"
            complaints.error(place_of(node, *path), f"{shown(one['input'])} stands where {form} is meant", "", "")
        elif one["type"] not in {"missing", "told"}:  # told by _missing, or when the file was read
            complaints.error(place_of(node, *path), f"{shown(one['input'])} is not allowed here")
    return flawed


def _key_place(node: Any, path: tuple[str | int, ...]) -> Place:
    """Return the place of a key that is wrong itself; the path ends in the key and `[key]`."""
    for step in path[:-2]:
        node = node[step]
    return node.key_places[str(path[-2])] if isinstance(node, Mapped) else place_of(node)


def _named(node: Any) -> Any:
    """Turn a list of one-key mappings (as the expanded form has it, to keep the order) into a mapping."""
    if isinstance(node, Listed) and node and all(isinstance(item, Mapped) and len(item) == 1 for item in node):
        mapped = Mapped(node.place)
        for item in node:
            mapped.update(item)
            mapped.key_places.update(item.key_places)
        return mapped
    return node


Item = TypeVar("Item")
Name = Annotated[str, PlainValidator(read_name)]
Ordered = Annotated[
    dict[Name, Item],
    BeforeValidator(_named),
    WrapSerializer(lambda value, dump: [{name: item} for name, item in dump(value).items()], return_type=Any),
]
"""Named things whose order counts: a mapping in the file, a list of one-key mappings in the expanded form."""
