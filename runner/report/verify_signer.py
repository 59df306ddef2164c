"""Who signed, when, and whether that counts: chain, usages, dates, time stamp, revocation; nothing is fetched.

All is judged at the signing time: a report stays good after its station's certificate has run out. That time is the
time stamp's, if one is there whose server an authority of the reader's vouches for; else the time that the signer
claims.

References:
    RFC 5280 (2008), 6 (path validation) and 5 (revocation lists).
"""

from dataclasses import dataclass
from datetime import datetime, timedelta

from cryptography import x509

from runner.errors import VerificationRefused
from runner.report import certificates as profiles
from runner.report import time_stamp, verify_record
from runner.report.cms_form import Signature
from runner.report.keys import issued_by
from runner.report.verify_record import Check, Terms

CLOCKS = timedelta(minutes=5)
"""How far clocks may differ (common practice, no source)."""


@dataclass(frozen=True)
class _Moment:
    """When a signature was made, as far as it is known."""

    time: datetime
    """The time to judge at."""
    stamped: bool
    """A vouched-for server saw it then; else the signer claims it."""


def check_signer(signature: Signature, claimed: datetime, terms: Terms) -> list[Check]:
    """Check time, signer and revocation of a signature that is known to be true.

    Args:
        signature: As read.
        claimed: Signing time as the signer states it.
        terms: What the reader trusts.
    """
    checks: list[Check] = []
    moment = _moment(signature, claimed, terms, checks)
    root, signer = _signer(signature.certificate, moment, terms)
    checks.append(signer)
    if root is not None and terms.crls:
        checks.append(_revocation(signature.certificate, root, moment, terms))
    return checks


def _moment(signature: Signature, claimed: datetime, terms: Terms, checks: list[Check]) -> _Moment:
    text = f"{claimed:%Y-%m-%d %H:%M:%S} UTC"
    if claimed > terms.now + CLOCKS:
        checks.append(Check("time", False, f"the claimed signing time, {text}, lies in the future"))
    elif signature.time_stamp is None:
        checks.append(Check("time", True, f"signed on {text}, as the signer claims"))
    if signature.time_stamp is None:
        return _Moment(claimed, stamped=False)
    try:
        stamp = time_stamp.read(signature.time_stamp, signature.value)
    except VerificationRefused as error:
        checks.append(Check("time stamp", False, error.found))
        return _Moment(claimed, stamped=False)
    seen = f"{stamp.time:%Y-%m-%d %H:%M:%S} UTC"
    name = profiles.common_name(stamp.certificate)
    if stamp.time > terms.now + CLOCKS or claimed > stamp.time + CLOCKS:
        found = f"claimed time {text} and time stamp {seen} contradict each other or the clock"
        checks.append(Check("time stamp", False, found))
        return _Moment(claimed, stamped=False)
    if _issuer(stamp.certificate, stamp.time, terms) is None or _out_of_date(stamp.certificate, stamp.time):
        found = f"stamped on {seen} by '{name}', for which no given authority vouches; the claimed time counts"
        checks.append(Check("time stamp", None, found, verify_record.STAMP))
        return _Moment(claimed, stamped=False)
    checks.append(Check("time stamp", True, f"stamped on {seen} by '{name}'"))
    return _Moment(stamp.time, stamped=True)


def _signer(certificate: x509.Certificate, moment: _Moment, terms: Terms) -> tuple[x509.Certificate | None, Check]:
    name = profiles.common_name(certificate)
    fault = profiles.usage_fault(certificate) or _out_of_date(certificate, moment.time)
    if fault:
        return None, Check("signer", False, f"the certificate of '{name}' could not sign: {fault}")
    if not terms.roots:
        mark = short_mark(profiles.fingerprint(certificate))
        found = f"signed by '{name}' ({mark}), for whom nobody vouches: no --root was given, and a name proves nothing"
        return None, Check("signer", None, found, verify_record.UNKNOWN_SIGNER)
    root = _issuer(certificate, moment.time, terms)
    if root is None:
        found = f"none of the given authorities issued the certificate of '{name}'; a name alone proves nothing"
        return None, Check("signer", False, found)
    return root, Check("signer", True, f"signed by '{name}', for whom '{profiles.common_name(root)}' vouches")


def short_mark(fingerprint: str) -> str:
    """Return the first 64 bits of `sha256:…` in groups that two people can read out to each other."""
    digits = fingerprint.removeprefix("sha256:")
    return " ".join(digits[n : n + 4] for n in range(0, 16, 4)) + " …"


def _issuer(certificate: x509.Certificate, time: datetime, terms: Terms) -> x509.Certificate | None:
    """Return the trusted authority that issued a certificate itself and was valid then."""
    for root in terms.roots:
        good = profiles.authority_fault(root) is None and _out_of_date(root, time) is None
        if good and issued_by(certificate, root):
            return root
    return None


def _out_of_date(certificate: x509.Certificate, time: datetime) -> str | None:
    begin, end = certificate.not_valid_before_utc, certificate.not_valid_after_utc
    if begin <= time <= end:
        return None
    return f"it was valid from {begin:%Y-%m-%d %H:%M} to {end:%Y-%m-%d %H:%M} UTC, not on {time:%Y-%m-%d %H:%M}"


def _revocation(certificate: x509.Certificate, root: x509.Certificate, moment: _Moment, terms: Terms) -> Check:
    mine = [crl for crl in terms.crls if crl.issuer == root.subject]
    if not mine:
        found = "none of the given revocation lists is of the signer's authority"
        return Check("revocation", None, found, verify_record.CRL)
    crl = max(mine, key=lambda one: one.last_update_utc)
    public = root.public_key()
    try:
        true = crl.is_signature_valid(public)  # type: ignore[arg-type] # any other key raises
        strange = [e.oid.dotted_string for e in crl.extensions if e.critical]
    except (TypeError, ValueError):
        true, strange = False, []
    if not true or strange:
        return Check("revocation", False, "the revocation list is not the authority's, or is of a kind not understood")
    if crl.last_update_utc > terms.now + CLOCKS:
        return Check("revocation", False, "the revocation list is dated in the future")
    entry = crl.get_revoked_certificate_by_serial_number(certificate.serial_number)
    if entry is not None:
        since = f"{entry.revocation_date_utc:%Y-%m-%d %H:%M} UTC"
        if not moment.stamped:
            found = f"the certificate was revoked on {since}, and no time stamp proves that the report is older"
            return Check("revocation", False, found)
        if entry.revocation_date_utc <= moment.time:
            return Check("revocation", False, f"the certificate had been revoked on {since}")
        return Check("revocation", True, f"revoked on {since}, after the time stamp")
    if crl.next_update_utc is None or crl.next_update_utc < terms.now:
        found = f"not revoked by the list of {crl.last_update_utc:%Y-%m-%d}, which is out of date"
        return Check("revocation", None, found, verify_record.CRL)
    return Check("revocation", True, f"not revoked by the list of {crl.last_update_utc:%Y-%m-%d}")
