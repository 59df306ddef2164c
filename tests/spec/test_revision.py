"""Canonical JSON and its digest, against RFC 8785."""

import hashlib
import json
import struct

import pytest
from hypothesis import given
from hypothesis import strategies as st

from runner.errors import UsageError
from runner.spec.revision import canonical_json, digest

RFC_NUMBERS = {
    "0000000000000000": "0",
    "8000000000000000": "0",
    "0000000000000001": "5e-324",
    "8000000000000001": "-5e-324",
    "7fefffffffffffff": "1.7976931348623157e+308",
    "4340000000000000": "9007199254740992",
    "c340000000000000": "-9007199254740992",
    "4430000000000000": "295147905179352830000",
    "44b52d02c7e14af5": "9.999999999999997e+22",
    "44b52d02c7e14af6": "1e+23",
    "44b52d02c7e14af7": "1.0000000000000001e+23",
    "444b1ae4d6e2ef4e": "999999999999999700000",
    "444b1ae4d6e2ef4f": "999999999999999900000",
    "444b1ae4d6e2ef50": "1e+21",
    "3eb0c6f7a0b5ed8c": "9.999999999999997e-7",
    "3eb0c6f7a0b5ed8d": "0.000001",
    "41b3de4355555553": "333333333.3333332",
    "41b3de4355555554": "333333333.33333325",
    "becbf647612f3696": "-0.0000033333333333333333",
}
"""Doubles (IEEE 754, big-endian hexadecimal) and their text: RFC 8785, Appendix B (written down from memory; each is
confirmed below by reading it back to the same double)."""


@pytest.mark.parametrize(("bits", "text"), RFC_NUMBERS.items())
def test_numbers_are_those_of_rfc_8785(bits: str, text: str) -> None:
    """A double is printed as the published samples have it, and reads back to the same double."""
    (value,) = struct.unpack(">d", bytes.fromhex(bits))

    assert canonical_json(value).decode() == text
    assert float(text) == value


def test_the_published_document_is_canonical() -> None:
    """The sample document of RFC 8785, 3.2.2 and 3.2.3, comes out sorted and without spaces (from memory)."""
    data = json.loads(
        r'{"numbers": [333333333.33333329, 1E30, 4.50, 2e-3, 0.000000000000000000000000001],'
        r'"string": "\u20ac$\u000F\u000aA'
        r"'"
        r'\u0042\u0022\u005c\\\"\/", "literals": [null, true, false]}'
    )

    assert canonical_json(data).decode() == (
        '{"literals":[null,true,false],"numbers":[333333333.3333333,1e+30,4.5,0.002,1e-27],'
        '"string":"€$\\u000f\\nA\'B\\"\\\\\\\\\\"/"}'
    )


def test_keys_are_sorted_by_utf_16() -> None:
    """Keys sort by UTF-16 code units: RFC 8785, 3.2.3 puts the emoji before the Hebrew presentation form."""
    keys = ["€", "\r", "\ufb33", "1", "\U0001f600", "\x80", "ö"]

    assert list(json.loads(canonical_json(dict.fromkeys(keys)))) == [
        "\r",
        "1",
        "\x80",
        "ö",
        "€",
        "\U0001f600",
        "\ufb33",
    ]


TEXTS = st.text(st.characters(codec="utf-8"))
SCALARS = (
    st.none() | st.booleans() | st.integers(-(2**53), 2**53) | st.floats(allow_nan=False, allow_infinity=False) | TEXTS
)
DATA = st.recursive(
    SCALARS, lambda inner: st.lists(inner, max_size=4) | st.dictionaries(TEXTS, inner, max_size=4), max_leaves=12
)


@given(DATA)
def test_canonical_json_reads_back_and_is_stable(data: object) -> None:
    """Canonical JSON reads back to equal data, and reading and writing again changes no byte."""
    written = canonical_json(data)

    assert json.loads(written, parse_int=float) == data
    assert canonical_json(json.loads(written)) == written


def test_the_digest_is_sha_256() -> None:
    """The digest names its algorithm and ignores the order of keys."""
    assert digest({"b": 1, "a": [0.5]}) == "sha256:" + hashlib.sha256(b'{"a":[0.5],"b":1}').hexdigest()


@pytest.mark.parametrize(
    ("data", "told"),
    [
        (float("nan"), "nan is no JSON number"),
        ([float("inf")], "inf is no JSON number"),
        (2**53 + 1, "is too large for JSON"),
        ({1: 2}, "the key 1 is no text"),
        (object(), "a object is no JSON value"),
        ("\ud800", "half a character"),
    ],
)
def test_what_is_no_json_is_refused(data: object, told: str) -> None:
    """Nothing that another reader would refuse or change is ever written."""
    with pytest.raises(UsageError, match=told):
        canonical_json(data)
