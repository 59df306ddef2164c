"""A signed PDF is read by position, and nothing may be added, left out or written in another way.

Kinds of attack: see `tests.report.attacks`.
"""

import re
from pathlib import Path
from typing import Any

import pikepdf
import pytest

from runner.errors import VerificationRefused
from runner.exits import Exit
from runner.report import sign, verify, verify_pdf
from tests.report import attacks, attacks_cms
from tests.report import signed_world as world


def _refusals(tmp_path: Path, pdf: bytes) -> str:
    """Verify as a reader does who trusts the authority; return why it is refused."""
    file = tmp_path / "report.pdf"
    file.write_bytes(pdf)
    outcome = verify.verify_unit(file, roots=[attacks.target().authority.root], now=world.NOW, tools=world.TOOLS)
    assert outcome.exit is Exit.DOES_NOT_CONFORM
    return "; ".join(check.sentence for check in outcome.checks if check.held is False)


def test_the_true_report_holds(tmp_path: Path) -> None:
    """What is attacked below holds before it is attacked."""
    file = tmp_path / "report.pdf"
    file.write_bytes(attacks.target().signed)

    outcome = verify.verify_unit(file, roots=[attacks.target().authority.root], now=world.NOW, tools=world.TOOLS)

    assert outcome.exit is Exit.CONFORMS, outcome.checks


@pytest.mark.parametrize("name", attacks.BYTES)
def test_every_known_attack_on_the_file_is_refused(tmp_path: Path, name: str) -> None:
    """Each attack is built for real and ends in its own sentence."""
    build, words = attacks.BYTES[name]

    assert re.search(words, _refusals(tmp_path, build(attacks.target())))


@pytest.mark.parametrize("change", attacks_cms.CMS, ids=lambda change: str(change.__name__))
def test_nothing_unsigned_in_the_cms_may_differ(tmp_path: Path, change: "attacks_cms.CmsAttack") -> None:
    """A CMS of which only unsigned parts were changed is as bad as any other."""
    t = attacks.target()
    other = change(attacks.der_of(t.signed), t.authority)
    assert other != attacks.der_of(t.signed)

    _refusals(tmp_path, attacks.with_der(t.signed, other))


def test_signed_bytes_wrapped_still_have_the_signed_digest() -> None:
    """The wrapping attack is built rightly: its own byte range covers exactly the bytes that were signed."""
    t = attacks.target()
    pdf = attacks.wrapped(t)
    first = re.search(rb"/ByteRange \[0 (\d+) (\d+) (\d+)\]", pdf)
    true = verify_pdf.read_signature(t.signed)

    assert first is not None
    a, b, c = (int(n) for n in first.groups())
    assert pdf[:a] + pdf[b : b + c] == t.signed[: true.start] + t.signed[true.end :]


def test_a_reader_agrees_with_the_true_report() -> None:
    """The second opinion, by a PDF library, holds for a true report."""
    signed = verify_pdf.read_signature(attacks.target().signed)

    verify_pdf.check_structure(signed)

    assert signed.time == world.SIGNED
    assert signed.signature.certificate == attacks.target().authority.station.certificate
    assert len(signed.blank) == len(signed.data)


def test_a_report_that_allows_changes_is_refused(monkeypatch: pytest.MonkeyPatch) -> None:
    """A certification that lets others fill in forms or comment is no closed report (ISO 32000-2, table 257)."""
    from pyhanko.sign.fields import MDPPerm
    from pyhanko.sign.signers import cms_embedder

    lax = cms_embedder.SigMDPSetup("sha256", certify=True, docmdp_perms=MDPPerm.ANNOTATE)
    monkeypatch.setattr(cms_embedder, "SigMDPSetup", lambda *_args, **_kwargs: lax)
    pdf = sign.sign_pdf(attacks.target().unsigned, attacks.target().authority.station, time=world.SIGNED)
    monkeypatch.undo()

    with pytest.raises(VerificationRefused, match="not closed to changes"):
        verify_pdf.check_structure(verify_pdf.read_signature(pdf))


def test_a_report_signed_but_not_certified_is_refused(monkeypatch: pytest.MonkeyPatch) -> None:
    """An approval signature closes nothing: readers call such a file good with later parts in it (ISO 32000-2)."""
    from pyhanko.sign.signers import cms_embedder

    approval = cms_embedder.SigMDPSetup("sha256", certify=False)
    monkeypatch.setattr(cms_embedder, "SigMDPSetup", lambda *_args, **_kwargs: approval)
    pdf = sign.sign_pdf(attacks.target().unsigned, attacks.target().authority.station, time=world.SIGNED)
    monkeypatch.undo()

    with pytest.raises(VerificationRefused, match="signed, but not closed to changes"):
        verify_pdf.check_structure(verify_pdf.read_signature(pdf))


def test_attachments_come_out_by_name() -> None:
    """Attached files are read by their names."""
    found = verify_pdf.attachments(attacks.target().signed)

    assert found == {"results.json": world.canonical(world.results()), **world.PICTURES}


def test_a_file_attached_behind_the_list_is_refused(tmp_path: Path) -> None:
    """A file specification that the list of attachments does not name could be shown by some readers."""
    with pikepdf.open(world_file(tmp_path)) as pdf:
        embedded = pdf.make_stream(b"{}", {"/Type": pikepdf.Name.EmbeddedFile})
        files = pikepdf.Dictionary(F=embedded)
        pdf.Root.Extra = pdf.make_indirect(pikepdf.Dictionary(Type=pikepdf.Name.Filespec, EF=files))
        pdf.save(tmp_path / "more.pdf")

    with pytest.raises(VerificationRefused, match="the list of attachments does not name"):
        verify_pdf.attachments((tmp_path / "more.pdf").read_bytes())


def test_an_attachment_of_another_relation_is_refused(tmp_path: Path) -> None:
    """PDF/A-3 says what an attached file is to the page: the report's is its data (ISO 19005-3, 6.8)."""
    with pikepdf.open(world_file(tmp_path)) as pdf:
        _attached(pdf)["results.json"].AFRelationship = pikepdf.Name.Alternative
        pdf.save(tmp_path / "more.pdf")

    with pytest.raises(VerificationRefused, match="not marked as what it is to the report"):
        verify_pdf.attachments((tmp_path / "more.pdf").read_bytes())


def test_a_file_attached_under_two_names_is_refused(tmp_path: Path) -> None:
    """Readers differ about which of an attachment's names they show."""
    with pikepdf.open(world_file(tmp_path)) as pdf:
        _attached(pdf)["chart-overview.png"].UF = pikepdf.String("results.json")
        pdf.save(tmp_path / "more.pdf")

    with pytest.raises(VerificationRefused, match="under two names"):
        verify_pdf.attachments((tmp_path / "more.pdf").read_bytes())


def _attached(pdf: pikepdf.Pdf) -> dict[str, Any]:
    return dict(pikepdf.NameTree(pdf.Root.Names.EmbeddedFiles).items())


def world_file(tmp_path: Path) -> Path:
    """Write the unsigned report and return where."""
    file = tmp_path / "unsigned.pdf"
    file.write_bytes(attacks.target().unsigned)
    return file


@pytest.mark.parametrize("data", [b"", b"%PDF-1.7\n", b"GIF89a", b"%PDF-1.7\n%%EOF\n"])
def test_what_is_no_report_is_refused(data: bytes) -> None:
    """Files of other kinds end in a sentence."""
    with pytest.raises(VerificationRefused, match=r"cut off or appended|carries no signature"):
        verify_pdf.read_signature(data)
