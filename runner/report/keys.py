"""Keys that sign reports: a plant's authority, its stations, and the key of a computer that has none.

Files are readable by their owner only, and nothing is ever overwritten. An authority's folder holds `authority.pem`
(its key, encrypted), `root.pem` (its certificate: what readers of reports are given) and `root.crl`.
"""

import os
import tempfile
from dataclasses import dataclass, field
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

from cryptography import x509
from cryptography.exceptions import UnsupportedAlgorithm
from cryptography.hazmat.primitives import hashes
from cryptography.hazmat.primitives.asymmetric import ec
from cryptography.hazmat.primitives.serialization import (
    BestAvailableEncryption,
    Encoding,
    KeySerializationEncryption,
    NoEncryption,
    PrivateFormat,
    load_pem_private_key,
    pkcs12,
)

from runner.errors import SigningError, UsageError
from runner.report import certificates as profiles

AUTHORITY_KEY = "authority.pem"
ROOT = "root.pem"
REVOKED = "root.crl"
STATION = "station"
LOCAL_NAME = "local key, not vouched for"
KDF_ROUNDS = 600_000
"""PBKDF2 rounds of a PKCS#12 file (OWASP's figure for HMAC-SHA-256, from memory)."""


@dataclass(frozen=True)
class StationKey:
    """What signs reports."""

    private: ec.EllipticCurvePrivateKey = field(repr=False)
    """P-256 key."""
    certificate: x509.Certificate
    """Its certificate."""
    local: bool = False
    """Made by this computer for itself: nobody vouches for it."""

    def statement(self) -> dict[str, Any]:
        """Return what a report may say of its signer, as plain JSON data."""
        return {
            "signer": profiles.common_name(self.certificate),
            "certificate": profiles.fingerprint(self.certificate),
            "vouched_for": not self.local,
        }


def make_authority(folder: Path, name: str, passphrase: bytes, *, now: datetime | None = None) -> Path:
    """Make a plant's authority in a new folder; return the certificate that readers of reports are given.

    Args:
        folder: Does not exist yet, or is empty.
        name: The authority's name, e.g. `Walnut Works test authority`.
        passphrase: Encrypts its key.
        now: Begin of its 15 years.

    Raises:
        UsageError: Something stands there already, or the folder cannot be written.
        SigningError: The name or the pass phrase will not do.
    """
    now = now or datetime.now(UTC)
    key = profiles.new_private_key()
    root = profiles.root_certificate(key, name, now)
    crl = profiles.revocation_list(root, key, now)
    files = {
        AUTHORITY_KEY: _pem(key, _encryption(passphrase)),
        ROOT: root.public_bytes(Encoding.PEM),
        REVOKED: crl.public_bytes(Encoding.DER),
    }
    _write_new(folder, files)
    return folder / ROOT


def make_station(
    folder: Path,
    name: str,
    authority: Path,
    authority_passphrase: bytes,
    passphrase: bytes,
    *,
    pem: bool = False,
    crl_url: str | None = None,
    now: datetime | None = None,
) -> Path:
    """Make a station's key in a new folder, issued by an authority; return the file for `--key`.

    Args:
        folder: Does not exist yet, or is empty.
        name: The station's name.
        authority: Folder of the authority.
        authority_passphrase: Opens the authority's key.
        passphrase: Encrypts the station's key.
        pem: Write an encrypted PEM file in place of PKCS#12.
        crl_url: Where the authority publishes its revocation list.
        now: Begin of its two years.

    Raises:
        UsageError: Something stands there already, or a folder cannot be read or written.
        SigningError: A pass phrase is wrong, the authority has expired, or a name will not do.
    """
    now = now or datetime.now(UTC)
    root, root_key = _open_authority(authority, authority_passphrase, now)
    key = profiles.new_private_key()
    certificate = profiles.station_certificate(key.public_key(), name, root, root_key, now, crl_url)
    public = certificate.public_bytes(Encoding.PEM)
    _encryption(passphrase)  # an empty one is told before anything is written
    if pem:
        file, data = f"{STATION}.pem", _pem(key, _encryption(passphrase)) + public
    else:
        file, data = f"{STATION}.p12", _pkcs12(key, certificate, passphrase)
    _write_new(folder, {file: data, f"{STATION}.crt": public, ROOT: root.public_bytes(Encoding.PEM)})
    return folder / file


def renew_crl(authority: Path, passphrase: bytes, revoke: Path | None = None, *, now: datetime | None = None) -> Path:
    """Write the authority's revocation list anew, with one more certificate on it if asked; return its file.

    Raises:
        UsageError: A file cannot be read or written.
        SigningError: The pass phrase is wrong, or the certificate is not one of this authority's.
    """
    now = now or datetime.now(UTC)
    root, key = _open_authority(authority, passphrase, now)
    file = authority / REVOKED
    earlier = load_crl(file) if file.exists() else None
    certificate = None if revoke is None else load_certificate(revoke)
    if certificate is not None and not issued_by(certificate, root):
        raise SigningError("this authority did not issue it", where=str(revoke))
    data = profiles.revocation_list(root, key, now, earlier=earlier, revoke=certificate).public_bytes(Encoding.DER)
    handle, beside = tempfile.mkstemp(dir=authority, prefix=f".{REVOKED}.")
    with os.fdopen(handle, "wb") as out:
        out.write(data)
    Path(beside).replace(file)
    return file


def load_key(path: Path, passphrase: bytes | None = None, *, now: datetime | None = None) -> StationKey:
    """Read a signing key with its certificate from a PKCS#12 or a PEM file.

    Args:
        path: The file.
        passphrase: Opens it; None for a file without.
        now: When it shall sign.

    Raises:
        UsageError: The file cannot be read.
        SigningError: No key or certificate in it, a wrong pass phrase, another curve, a usage or date that will not do.
    """
    data = _read(path)
    where = str(path)
    opened = _from_pem(data, passphrase, where) if b"-----BEGIN" in data else _from_pkcs12(data, passphrase, where)
    private, certificate = opened
    fault = profiles.usage_fault(certificate) or _date_fault(certificate, now or datetime.now(UTC))
    if fault:
        step = "use the key of a station, made by `probatum keys make-station`"
        raise SigningError(f"the certificate cannot sign reports: {fault}", where=where, next_step=step)
    if not isinstance(private, ec.EllipticCurvePrivateKey) or private.public_key() != certificate.public_key():
        raise SigningError("the key and the certificate in it do not belong together", where=where)
    return StationKey(private, certificate)


def local_station_key(folder: Path | None = None, *, now: datetime | None = None) -> StationKey:
    """Return this computer's own key, made at its first use.

    Its root's key is thrown away once the certificate is issued, so nothing else can ever be issued under it. Several
    processes may come here at once: whoever renames its folder into place first wins. An expired key moves aside and
    is followed by a new one.

    Args:
        folder: Where it is kept; default: `probatum/local-key` in the user's folder of settings.
        now: When it shall sign.

    Raises:
        UsageError: The folder cannot be written.
        SigningError: What stands there is no key.
    """
    now = now or datetime.now(UTC)
    folder = folder or _settings() / "local-key"
    file = folder / f"{STATION}.pem"
    if file.exists():
        certificate = load_certificate(file)
        if certificate.not_valid_after_utc > now:
            key = load_key(file, now=now)
            return StationKey(key.private, key.certificate, local=True)
        _move_aside(folder, certificate)
    root_key, private = profiles.new_private_key(), profiles.new_private_key()
    root = profiles.root_certificate(root_key, LOCAL_NAME, now)
    certificate = profiles.station_certificate(private.public_key(), LOCAL_NAME, root, root_key, now)
    pem = _pem(private, NoEncryption()) + certificate.public_bytes(Encoding.PEM)
    try:
        _write_new(folder, {f"{STATION}.pem": pem, ROOT: root.public_bytes(Encoding.PEM)})
    except UsageError:
        if not file.exists():
            raise
        other = load_key(file, now=now)  # another process was first
        private, certificate = other.private, other.certificate
    return StationKey(private, certificate, local=True)


def load_certificate(path: Path) -> x509.Certificate:
    """Read the first certificate of a PEM file, or one in DER.

    Raises:
        UsageError: The file cannot be read or holds none.
    """
    data = _read(path)
    try:
        if b"-----BEGIN" in data:
            return x509.load_pem_x509_certificates(data)[0]
        return x509.load_der_x509_certificate(data)
    except ValueError as error:
        raise UsageError("it holds no certificate", where=str(path), allowed="a certificate, PEM or DER") from error


def load_crl(path: Path) -> x509.CertificateRevocationList:
    """Read a revocation list, PEM or DER.

    Raises:
        UsageError: The file cannot be read or holds none.
    """
    data = _read(path)
    try:
        return x509.load_pem_x509_crl(data) if b"-----BEGIN" in data else x509.load_der_x509_crl(data)
    except ValueError as error:
        raise UsageError("it holds no revocation list", where=str(path), allowed="a CRL, PEM or DER") from error


def issued_by(certificate: x509.Certificate, root: x509.Certificate) -> bool:
    """Tell whether an authority's key signed a certificate that names it; dates are not looked at."""
    try:
        certificate.verify_directly_issued_by(root)
    except Exception:  # noqa: BLE001 - whatever a foreign certificate provokes, it was not issued by this authority
        return False
    return True


def _settings() -> Path:
    base = os.environ.get("XDG_CONFIG_HOME", "")
    return (Path(base) if base.startswith("/") else Path.home() / ".config") / "probatum"


def _move_aside(folder: Path, certificate: x509.Certificate) -> None:
    until = certificate.not_valid_after_utc.strftime("%Y%m%d")
    serial = f"{certificate.serial_number:x}"[:8]
    aside = folder.with_name(f"{folder.name}-until-{until}-{serial}")
    try:
        folder.rename(aside)
    except FileNotFoundError:
        return  # another process was first
    except OSError as error:
        raise UsageError(f"an expired key cannot be moved aside: {error.strerror}", where=str(folder)) from error


def _open_authority(
    folder: Path, passphrase: bytes, now: datetime
) -> tuple[x509.Certificate, ec.EllipticCurvePrivateKey]:
    root = load_certificate(folder / ROOT)
    file = folder / AUTHORITY_KEY
    private = _private(_read(file), passphrase, str(file))
    fault = profiles.authority_fault(root) or _date_fault(root, now)
    if fault:
        raise SigningError(f"the authority cannot issue: {fault}", where=str(folder / ROOT))
    if not isinstance(private, ec.EllipticCurvePrivateKey):
        raise SigningError("the authority's key is not on the curve P-256", where=str(file))
    return root, private


def _date_fault(certificate: x509.Certificate, now: datetime) -> str | None:
    if now > certificate.not_valid_after_utc:
        return f"it expired on {certificate.not_valid_after_utc:%Y-%m-%d}"
    if now < certificate.not_valid_before_utc:
        return f"it is valid only from {certificate.not_valid_before_utc:%Y-%m-%d %H:%M} UTC"
    return None


def _from_pem(data: bytes, passphrase: bytes | None, where: str) -> tuple[Any, x509.Certificate]:
    if b"PRIVATE KEY-----" not in data:
        raise SigningError("it holds no private key", where=where, allowed="PKCS#12, or PEM with key and certificate")
    if b"-----BEGIN CERTIFICATE-----" not in data:
        step = "append the certificate to it, or use the PKCS#12 file"
        raise SigningError("it holds a key but no certificate", where=where, next_step=step)
    private = _private(data, passphrase, where)
    try:
        found = x509.load_pem_x509_certificates(data)
    except ValueError as error:
        raise SigningError("the certificate in it cannot be read", where=where) from error
    mine = [c for c in found if c.public_key() == private.public_key()]
    return private, (mine or found)[0]


def _private(data: bytes, passphrase: bytes | None, where: str) -> Any:
    encrypted = b"ENCRYPTED" in data
    if encrypted and not passphrase:
        raise _no_passphrase(where)
    try:
        return load_pem_private_key(data, passphrase if encrypted else None)
    except (ValueError, TypeError, UnsupportedAlgorithm) as error:
        found = "the pass phrase does not open it" if encrypted else "the key in it cannot be read"
        raise SigningError(found, where=where) from error


def _from_pkcs12(data: bytes, passphrase: bytes | None, where: str) -> tuple[Any, x509.Certificate]:
    try:
        private, certificate, _others = pkcs12.load_key_and_certificates(data, passphrase)
    except (ValueError, UnsupportedAlgorithm) as error:
        if data[:1] != b"\x30":
            allowed = "PKCS#12, or PEM with key and certificate"
            raise SigningError("it is no key file", where=where, allowed=allowed) from error
        if not passphrase:
            raise _no_passphrase(where) from error
        raise SigningError("the pass phrase does not open it, or it is no PKCS#12 file", where=where) from error
    if private is None:
        raise SigningError("it holds no private key", where=where)
    if certificate is None:
        raise SigningError("it holds a key but no certificate", where=where)
    return private, certificate


def _no_passphrase(where: str) -> SigningError:
    step = "set PROBATUM_PASSPHRASE or give --passphrase-file"
    return SigningError("it is encrypted and no pass phrase was given", where=where, next_step=step)


def _encryption(passphrase: bytes | None) -> KeySerializationEncryption:
    if not passphrase:
        raise SigningError("a key needs a pass phrase", next_step="set PROBATUM_PASSPHRASE or give --passphrase-file")
    return BestAvailableEncryption(passphrase)


def _pem(key: ec.EllipticCurvePrivateKey, encryption: KeySerializationEncryption) -> bytes:
    return key.private_bytes(Encoding.PEM, PrivateFormat.PKCS8, encryption)


def _pkcs12(key: ec.EllipticCurvePrivateKey, certificate: x509.Certificate, passphrase: bytes) -> bytes:
    encryption = (
        PrivateFormat.PKCS12.encryption_builder()
        .kdf_rounds(KDF_ROUNDS)
        .key_cert_algorithm(pkcs12.PBES.PBESv2SHA256AndAES256CBC)
        .hmac_hash(hashes.SHA256())
        .build(passphrase)
    )
    return pkcs12.serialize_key_and_certificates(b"station", key, certificate, None, encryption)


def _read(path: Path) -> bytes:
    try:
        return path.read_bytes()
    except OSError as error:
        raise UsageError(f"it cannot be read: {error.strerror}", where=str(path)) from error


def _write_new(folder: Path, files: dict[str, bytes]) -> None:
    """Write a folder of files that only their owner may read, whole or not at all; an existing one is left alone."""
    try:
        folder.parent.mkdir(parents=True, exist_ok=True)
        making = Path(tempfile.mkdtemp(dir=folder.parent, prefix=f".{folder.name}."))  # mode 0700
        try:
            for name, data in files.items():
                handle = os.open(making / name, os.O_WRONLY | os.O_CREAT | os.O_EXCL, 0o600)
                with os.fdopen(handle, "wb") as file:
                    file.write(data)
                    file.flush()
                    os.fsync(file.fileno())
            making.rename(folder)  # refused by the system unless the folder is missing or empty
        finally:
            if making.exists():
                for name in files:
                    (making / name).unlink(missing_ok=True)
                making.rmdir()
    except OSError as error:
        found = "something stands there already" if folder.exists() else f"it cannot be written: {error.strerror}"
        step = "choose a new folder; keys are never overwritten"
        raise UsageError(found, where=str(folder), next_step=step) from error
