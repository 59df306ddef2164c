"""Canonical JSON and its digest, by which a revision of a spec is known.

Canonical JSON is that of RFC 8785: keys sorted by UTF-16 code units, no spaces, numbers as the shortest decimals that
read back to the same double, UTF-8, no NaN. Two specs with the same digest ask for the same.

References:
    RFC 8785, JSON Canonicalization Scheme (2020), doi:10.17487/RFC8785.
"""

import hashlib
from collections.abc import Mapping
from json.encoder import encode_basestring
from math import isfinite
from typing import Any

from runner.errors import UsageError

MAX_WHOLE = 2**53
"""Beyond it a JSON number is not every whole number (RFC 7493, 2.2); those that spell a double are still read."""


def canonical_json(data: Any) -> bytes:
    """Return plain data (mappings, lists, text, numbers, booleans, None) as canonical JSON.

    Raises:
        UsageError: A number is not finite or too large, a text is not Unicode, or something is no JSON value.
    """
    parts: list[str] = []
    _write(data, parts.append)
    try:
        return "".join(parts).encode("utf-8")
    except UnicodeEncodeError as error:
        raise UsageError("a text holds half a character (a lone surrogate)", next_step="write it anew") from error


def digest(data: Any) -> str:
    """Return `sha256:…` of data as canonical JSON."""
    return "sha256:" + hashlib.sha256(canonical_json(data)).hexdigest()


def _write(data: Any, put: Any) -> None:
    if isinstance(data, str):
        put(encode_basestring(data))
    elif data is None or isinstance(data, bool):
        put("null" if data is None else "true" if data else "false")
    elif isinstance(data, float):
        put(_decimal(data))
    elif isinstance(data, int):
        if abs(data) > MAX_WHOLE and (abs(data) > 1e21 or _decimal(float(data)) != str(data)):
            raise UsageError(f"the whole number {data} is too large for JSON", allowed=f"up to {MAX_WHOLE}")
        put(str(int(data)))
    elif isinstance(data, Mapping):
        _write_mapping(data, put)
    elif isinstance(data, list | tuple):
        separator = "["
        for value in data:
            put(separator)
            _write(value, put)
            separator = ","
        put("]" if data else "[]")
    else:
        raise UsageError(f"a {type(data).__name__} is no JSON value")


def _write_mapping(data: Mapping[Any, Any], put: Any) -> None:
    separator = "{"
    for key in sorted(data, key=_code_units):
        put(separator)
        put(encode_basestring(key))
        put(":")
        _write(data[key], put)
        separator = ","
    put("}" if data else "{}")


def _code_units(key: Any) -> bytes:
    if not isinstance(key, str):
        raise UsageError(f"the key {key!r} is no text", allowed="JSON keys are text")
    return key.encode("utf-16-be", "surrogatepass")


def _decimal(value: float) -> str:
    """Return a double as ECMAScript prints it (RFC 8785, 3.2.2.3); Python finds the same shortest digits."""
    if not isfinite(value):
        raise UsageError(f"{value} is no JSON number", allowed="finite numbers")
    text = repr(float(value))
    size = abs(value)
    if 1e-4 <= size < 1e16:
        return text.removesuffix(".0")
    if size == 0:
        return "0"
    sign, digits, exponent = _parts(text)
    point = exponent + 1  # digits before the decimal point
    if 1e-6 <= size < 1:
        return f"{sign}0.{'0' * -point}{digits}"
    if 1 <= size < 1e21:
        return f"{sign}{digits}{'0' * (point - len(digits))}"
    fraction = f".{digits[1:]}" if len(digits) > 1 else ""
    return f"{sign}{digits[0]}{fraction}e{exponent:+d}"


def _parts(text: str) -> tuple[str, str, int]:
    """Split Python's `-1.25e-07` into sign, digits `125` and exponent -7."""
    sign = "-" if text.startswith("-") else ""
    mantissa, _, exponent = text.removeprefix("-").partition("e")
    whole, _, fraction = mantissa.partition(".")
    return sign, (whole + fraction).rstrip("0") if fraction else whole.rstrip("0") or "0", int(exponent)
