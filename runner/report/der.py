"""Writes ASN.1 values in their distinguished encoding (DER), of which there is one for each value.

References:
    ITU-T X.690 (2021), 8.1 (tag, length, contents), 10.1 (lengths), 11.6 (order of a set).
"""

from asn1crypto import core

INTEGER, OCTETS, NULL = 2, 4, b"\x05\x00"
UTC_TIME, GENERALIZED_TIME = 23, 24
SEQUENCE, SET, CONTEXT_0, CONTEXT_1 = 0x30, 0x31, 0xA0, 0xA1


def tlv(tag: int, *parts: bytes) -> bytes:
    """Return one value: tag, length, contents.

    Args:
        tag: Identifier octet.
        parts: Contents, one after another.
    """
    contents = b"".join(parts)
    size = len(contents)
    if size < 0x80:
        return bytes((tag, size)) + contents
    octets = size.to_bytes((size.bit_length() + 7) // 8, "big")
    return bytes((tag, 0x80 | len(octets))) + octets + contents


def oid(dotted: str) -> bytes:
    """Return an object identifier."""
    encoded: bytes = core.ObjectIdentifier(dotted).dump()
    return encoded


def small(number: int) -> bytes:
    """Return a whole number from 0 to 127."""
    return bytes((INTEGER, 1, number))
