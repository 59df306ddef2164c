"""DER values are written as X.690 and its worked examples say."""

import pytest
from asn1crypto import core

from runner.report import der


def test_the_lengths_of_the_standard() -> None:
    """X.690, 8.1.3.4 and 8.1.3.5: short form up to 127; L = 201 is written 81 C9."""
    assert der.tlv(der.OCTETS, bytes(38))[:2] == b"\x04\x26"
    assert der.tlv(der.OCTETS, bytes(201))[:3] == b"\x04\x81\xc9"


@pytest.mark.parametrize("size", [0, 1, 127, 128, 255, 256, 65535, 65536])
def test_another_library_writes_the_same(size: int) -> None:
    """Octet strings of every length class, against an ASN.1 library."""
    assert der.tlv(der.OCTETS, bytes(size)) == core.OctetString(bytes(size)).dump()


def test_an_object_identifier_of_the_standard() -> None:
    """X.690, 8.19.5: {2 999 3} is 06 03 88 37 03."""
    assert der.oid("2.999.3") == bytes.fromhex("0603883703")


def test_small_numbers() -> None:
    """A whole number of one octet."""
    assert der.small(3) == core.Integer(3).dump()
