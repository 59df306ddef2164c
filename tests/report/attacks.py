"""Builds every known attack on a signed PDF for real, on its bytes and on its signer; see `attacks_cms` for its CMS.

Sources of the kinds: Mladenov et al. 2019, "1 Trillion Dollar Refund" (universal forgery, incremental saving, signature
wrapping), doi:10.1145/3319535.3339812; Mainka et al. 2021, "Shadow Attacks", doi:10.14722/ndss.2021.24117; Rohlmann et
al. 2021, "Breaking the Specification: PDF Certification", doi:10.1109/SP40001.2021.00110.
"""

import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from datetime import timedelta
from functools import cache
from io import BytesIO
from typing import Any

import pikepdf
from cryptography import x509
from cryptography.hazmat.primitives import hashes
from pyhanko.pdf_utils import generic as _generic
from pyhanko.pdf_utils.generic import pdf_name, pdf_string
from pyhanko.pdf_utils.incremental_writer import IncrementalPdfFileWriter
from pyhanko.sign.fields import SigFieldSpec, SigSeedSubFilter
from pyhanko.sign.signers import cms_embedder, pdf_byterange

from runner.report import cms_form
from runner.report.certificates import new_private_key, station_certificate
from runner.report.keys import StationKey
from runner.report.sign import sign_pdf
from tests.report import signed_world as world
from tests.report.signed_world import Authority

generic: Any = _generic  # its classes are only half annotated
OVERLAY = b"q 0 1 0 rg 0 600 600 200 re f Q BT 0 g /F1 40 Tf 60 700 Td (CONFORMS) Tj ET"


@dataclass(frozen=True)
class Target:
    """What is attacked."""

    authority: Authority
    """Who signed."""
    unsigned: bytes
    """The PDF before."""
    signed: bytes
    """The PDF."""


@cache
def target() -> Target:
    """Make a signed PDF."""
    authority = world.authority()
    document = world.results()
    unsigned = world.render_pdf(document, world.PICTURES, world.canonical(document))
    return Target(authority, unsigned, sign_pdf(unsigned, authority.station, time=world.SIGNED))


def gap(pdf: bytes) -> tuple[int, int]:
    """Return begin and end of the signature's hexadecimal digits."""
    found = re.search(rb"/Contents <([0-9A-F]+)>", pdf)
    assert found is not None
    return found.span(1)


def der_of(pdf: bytes) -> bytes:
    """Return the CMS in a PDF."""
    start, end = gap(pdf)
    contents = bytes.fromhex(pdf[start:end].decode())
    return contents[: cms_form.length(contents)]


def with_der(pdf: bytes, der: bytes) -> bytes:
    """Put another CMS into a PDF's gap."""
    start, end = gap(pdf)
    return pdf[:start] + der.hex().upper().encode().ljust(end - start, b"0") + pdf[end:]


# ---- bytes


def flip_in_page(t: Target) -> bytes:
    """One bit of a page's content."""
    at = t.signed.index(b"stream\n") + 40
    return t.signed[:at] + bytes([t.signed[at] ^ 1]) + t.signed[at + 1 :]


def flip_in_time(t: Target) -> bytes:
    """One bit of the signing time."""
    at = t.signed.index(b"/M (D") + 12
    return t.signed[:at] + bytes([t.signed[at] ^ 1]) + t.signed[at + 1 :]


def padding(t: Target) -> bytes:
    """Something behind the CMS in the gap."""
    _, end = gap(t.signed)
    return t.signed[: end - 4] + b"BEEF" + t.signed[end:]


def small_letters(t: Target) -> bytes:
    """The same digits in small letters mean the same."""
    start, end = gap(t.signed)
    return t.signed[:start] + t.signed[start:end].lower() + t.signed[end:]


def appended_space(t: Target) -> bytes:
    """A space behind the end."""
    return t.signed + b" "


def appended_comment(t: Target) -> bytes:
    """A comment and a second end."""
    return t.signed + b"% nothing to see\n%%EOF\n"


def range_of_zeros(t: Target) -> bytes:
    """A byte range that covers nothing."""
    return re.sub(rb"/ByteRange \[[^\]]*\]", lambda m: b"/ByteRange [0 0 0 0]".ljust(len(m[0])), t.signed)


def range_missing(t: Target) -> bytes:
    """No byte range."""
    return t.signed.replace(b"/ByteRange", b"/BiteRange")


def range_short(t: Target) -> bytes:
    """A byte range that leaves out the end, e.g. the signing time."""
    found = re.search(rb"/ByteRange \[0 (\d+) (\d+) (\d+)\]", t.signed)
    assert found is not None
    less = b"/ByteRange [0 %d %d %d]" % (int(found[1]), int(found[2]) + 9, int(found[3]) - 9)
    return t.signed.replace(found[0], less.ljust(len(found[0])))


def contents_zero(t: Target) -> bytes:
    """No signature in the gap."""
    return with_der(t.signed, b"")


def cut_off(t: Target) -> bytes:
    """The first revision alone."""
    return t.unsigned


def removed(t: Target) -> bytes:
    """The form taken out by an editor."""
    with pikepdf.open(BytesIO(t.signed)) as pdf:
        del pdf.Root.AcroForm, pdf.Root.Perms, pdf.pages[0].Annots
        out = BytesIO()
        pdf.save(out)
    return out.getvalue()


def saved_again(t: Target) -> bytes:
    """Opened and saved by an editor."""
    with pikepdf.open(BytesIO(t.signed)) as pdf:
        out = BytesIO()
        pdf.save(out)
    return out.getvalue()


# ---- later revisions


def _updated(pdf: bytes, change: Callable[[Any], None]) -> bytes:
    writer: Any = IncrementalPdfFileWriter(BytesIO(pdf))
    change(writer)
    out = BytesIO()
    writer.write(out)
    return out.getvalue()


def _page(writer: Any) -> Any:
    return writer.find_page_for_modification(0)[0].get_object()


def page_content(t: Target) -> bytes:
    """An overlay over the verdict."""

    def change(writer: Any) -> None:
        page = _page(writer)
        stream = writer.add_object(generic.StreamObject(stream_data=OVERLAY))
        page["/Contents"] = generic.ArrayObject([page.raw_get("/Contents"), stream])
        writer.update_container(page)

    return _updated(t.signed, change)


def attachment_swapped(t: Target) -> bytes:
    """Other data under the page."""

    def change(writer: Any) -> None:
        names = writer.root["/Names"]["/EmbeddedFiles"]["/Names"]
        place = names[names.index("results.json") + 1]["/EF"]
        better = world.canonical(world.results(value=0.25, verdict="conforms"))
        stream = generic.StreamObject({pdf_name("/Type"): pdf_name("/EmbeddedFile")}, stream_data=better)
        place["/F"] = writer.add_object(stream)
        writer.update_container(place)

    return _updated(t.signed, change)


def second_results(t: Target) -> bytes:
    """A second results.json."""

    def change(writer: Any) -> None:
        stream = generic.StreamObject({pdf_name("/Type"): pdf_name("/EmbeddedFile")}, stream_data=b"{}\n")
        spec = generic.DictionaryObject(
            {
                pdf_name("/Type"): pdf_name("/Filespec"),
                pdf_name("/F"): pdf_string("results.json"),
                pdf_name("/UF"): pdf_string("results.json"),
                pdf_name("/AFRelationship"): pdf_name("/Data"),
                pdf_name("/EF"): generic.DictionaryObject({pdf_name("/F"): writer.add_object(stream)}),
            }
        )
        names = writer.root["/Names"]["/EmbeddedFiles"]["/Names"]
        names.extend([pdf_string("results2.json"), writer.add_object(spec)])
        writer.update_container(names)

    return _updated(t.signed, change)


def font_redefined(t: Target) -> bytes:
    """Another font under the same name: other glyphs for the same codes."""

    def change(writer: Any) -> None:
        fonts = _page(writer)["/Resources"]["/Font"]
        key = next(iter(fonts))
        fonts[key] = generic.DictionaryObject(
            {
                pdf_name("/Type"): pdf_name("/Font"),
                pdf_name("/Subtype"): pdf_name("/Type1"),
                pdf_name("/BaseFont"): pdf_name("/Symbol"),
            }
        )
        writer.update_container(fonts)

    return _updated(t.signed, change)


def stamp_annotation(t: Target) -> bytes:
    """A stamp over the verdict."""

    def change(writer: Any) -> None:
        page = _page(writer)
        box = generic.ArrayObject([generic.NumberObject(n) for n in (0, 600, 600, 800)])
        stamp = generic.DictionaryObject(
            {
                pdf_name("/Type"): pdf_name("/Annot"),
                pdf_name("/Subtype"): pdf_name("/FreeText"),
                pdf_name("/Rect"): box,
                pdf_name("/Contents"): pdf_string("CONFORMS"),
                pdf_name("/DA"): pdf_string("/Helv 40 Tf 0 g"),
            }
        )
        page["/Annots"].append(writer.add_object(stamp))
        writer.update_container(page["/Annots"])
        writer.update_container(page)

    return _updated(t.signed, change)


def second_signature(t: Target) -> bytes:
    """A stranger's visible signature over the verdict."""
    stranger = world.authority("Someone", "Someone else").station
    writer = IncrementalPdfFileWriter(BytesIO(t.signed))
    embedder = cms_embedder.PdfCMSEmbedder(SigFieldSpec("Over", on_page=0, box=(0, 600, 600, 800)))
    steps: Any = embedder.write_cms("Over", writer)
    next(steps)
    placeholder = pdf_byterange.SignatureObject(world.SIGNED, SigSeedSubFilter.PADES, bytes_reserved=4096)
    steps.send(cms_embedder.SigObjSetup(placeholder))
    prepared, output = steps.send(cms_embedder.SigIOSetup("sha256"))
    value = cms_form.sign_digest(prepared.document_digest, stranger.private, stranger.certificate, None)
    steps.send(cms_form.build(prepared.document_digest, stranger.certificate, None, value))
    data: bytes = output.getvalue()
    return data


def shadow_swapped(t: Target) -> bytes:
    """A table that moves the page's content to a twin hidden before signing."""
    hidden = shadow_hidden(t)
    twin, place = _twin(hidden)
    table = b"xref\n%d 1\n%010d 00000 n \ntrailer\n" % (_contents_number(hidden), place)
    root, size = re.findall(rb"/Root (\d+ 0 R)", hidden)[-1], re.findall(rb"/Size (\d+)", hidden)[-1]
    last = re.findall(rb"startxref\n(\d+)", hidden)[-1]
    trailer = b"<< /Root %s /Size %s /Prev %s >>\nstartxref\n%d\n%%%%EOF\n" % (root, size, last, len(hidden))
    assert twin > 0
    return hidden + table + trailer


def shadow_hidden(t: Target) -> bytes:
    """A report whose own signer hid a twin of the page's content, not yet swapped in."""

    def change(writer: Any) -> None:
        writer.add_object(generic.StreamObject({pdf_name("/Twin"): generic.BooleanObject(True)}, stream_data=OVERLAY))

    return sign_pdf(_updated(t.unsigned, change), t.authority.station, time=world.SIGNED)


def shadow_built_in(t: Target) -> bytes:
    """The same, written as one whole file and not as a later part."""
    with pikepdf.open(BytesIO(t.unsigned)) as pdf:
        twin = pdf.make_stream(OVERLAY)
        pdf.Root.Twin = twin
        out = BytesIO()
        pdf.save(out)
    return sign_pdf(out.getvalue(), t.authority.station, time=world.SIGNED)


def _twin(pdf: bytes) -> tuple[int, int]:
    found = re.search(rb"(\d+) 0 obj\n<<[^>]*/Twin true", pdf)
    assert found is not None
    return int(found[1]), found.start()


def _contents_number(pdf: bytes) -> int:
    found = re.search(rb"/Type /Page\n.*?/Contents (\d+) 0 R", pdf, re.DOTALL)
    assert found is not None
    return int(found[1])


def wrapped(t: Target) -> bytes:
    """The signed bytes moved apart, something else between them, and a byte range that still finds them."""
    start, end = gap(t.signed)
    first, hexadecimal, second = t.signed[: start - 1], t.signed[start - 1 : end + 1], t.signed[end + 1 :]
    evil = b"\n/Type /Sig /Filter /Adobe.PPKLite /SubFilter /ETSI.CAdES.detached >>\nendobj\n"
    evil += b"6 0 obj\n<< /Length %d >>\nstream\n%s\nendstream\nendobj\n" % (len(OVERLAY), OVERLAY)
    head = b" /ByteRange [0 %d %d %d]"
    size = len(head % (len(first), 10**6, len(second)))
    behind = len(first) + len(hexadecimal) + size + len(evil)
    numbers = head % (len(first), behind, len(second))
    return first + hexadecimal + numbers + b" " * (size - len(numbers)) + evil + second


BYTES: Mapping[str, tuple[Callable[[Target], bytes], str]] = {
    "one bit of the page": (flip_in_page, "changed after signing"),
    "one bit of the signing time": (flip_in_time, "changed after signing"),
    "something in the padding": (padding, "behind the signature in its own gap"),
    "digits in small letters": (small_letters, "capital hexadecimal digits"),
    "a space appended": (appended_space, "cut off or appended"),
    "a comment appended": (appended_comment, "appended after signing"),
    "a byte range of zeros": (range_of_zeros, "does not say which bytes it covers"),
    "no byte range": (range_missing, "carries no signature"),
    "a short byte range": (range_short, "leaves out more than itself"),
    "no signature in the gap": (contents_zero, "begins with no sequence"),
    "the first revision alone": (cut_off, "carries no signature"),
    "the signature taken out": (removed, "cut off or appended|carries no signature"),
    "saved again": (saved_again, "does not say which bytes it covers"),
    "a page overlaid": (page_content, "appended after signing"),
    "other data attached": (attachment_swapped, "appended after signing"),
    "a second results.json": (second_results, "appended after signing"),
    "a font redefined": (font_redefined, "appended after signing"),
    "a stamp over the verdict": (stamp_annotation, "appended after signing"),
    "a second signature over the verdict": (second_signature, "more than one signature"),
    "a hidden twin swapped in": (shadow_swapped, "appended after signing"),
    "a hidden twin in a part of its own": (shadow_hidden, "more than one revision"),
    "a hidden twin": (shadow_built_in, "the same versions print another page"),
    "signed bytes wrapped": (wrapped, "more than one signature"),
}
"""Name, builder, and words of the refusal (a regular expression)."""


# ---- the signer


def look_alike() -> StationKey:
    """A station of another authority with the same names."""
    return world.authority().station


def issued_by_station(authority: Authority) -> StationKey:
    """A certificate that a station issued, as if it were an authority."""
    key = new_private_key()
    station = authority.station
    certificate = station_certificate(key.public_key(), "Bench 9", station.certificate, station.private, world.MADE)
    return StationKey(key, certificate)


def strange_certificate(
    authority: Authority, *, usage: bool = True, purpose: Any = None, critical: bool = False, begin: Any = world.MADE
) -> StationKey:
    """A certificate of the authority that is not a station's."""
    key = new_private_key()
    builder = (
        x509.CertificateBuilder()
        .subject_name(authority.station.certificate.subject)
        .issuer_name(authority.root.subject)
        .public_key(key.public_key())
        .serial_number(x509.random_serial_number())
        .not_valid_before(begin)
        .not_valid_after(begin + timedelta(days=10_000 if begin == world.MADE else 5))
        .add_extension(x509.BasicConstraints(ca=False, path_length=None), critical=True)
        .add_extension(x509.KeyUsage(usage, usage, not usage, False, False, False, False, False, False), critical=True)
    )
    if purpose is not None:
        builder = builder.add_extension(x509.ExtendedKeyUsage([purpose]), critical=False)
    if critical:
        strange = x509.UnrecognizedExtension(x509.ObjectIdentifier("1.3.6.1.4.1.99999.2"), b"\x05\x00")
        builder = builder.add_extension(strange, critical=True)
    return StationKey(key, builder.sign(authority.root_key, hashes.SHA256()))
