"""An RFC 3161 server of our own on the loopback: `openssl ts` behind a small web server."""

import subprocess
from collections.abc import Iterator
from contextlib import contextmanager
from datetime import UTC, datetime, timedelta
from http.server import BaseHTTPRequestHandler, HTTPServer
from pathlib import Path
from threading import Thread
from typing import Any

from cryptography import x509
from cryptography.hazmat.primitives import hashes
from cryptography.hazmat.primitives.asymmetric import ec, rsa
from cryptography.hazmat.primitives.serialization import Encoding, NoEncryption, PrivateFormat
from cryptography.x509.oid import ExtendedKeyUsageOID

from runner.report import certificates as profiles

CONFIG = """
[tsa]
default_tsa = one
[one]
serial = serial
signer_cert = tsa.pem
signer_key = tsa.key
certs = root.pem
signer_digest = sha256
default_policy = 1.2.3.4.1
digests = sha256
ess_cert_id_alg = sha256
"""


def make(folder: Path, *, algorithm: str = "ec") -> x509.Certificate:
    """Make a server's authority and key in a folder; return the authority's certificate."""
    now = datetime.now(UTC) - timedelta(days=1)
    root_key = profiles.new_private_key()
    root = profiles.root_certificate(root_key, "Time authority", now)
    key: Any = ec.generate_private_key(ec.SECP256R1()) if algorithm == "ec" else rsa.generate_private_key(65537, 2048)
    certificate = (
        x509.CertificateBuilder()
        .subject_name(x509.Name([x509.NameAttribute(x509.NameOID.COMMON_NAME, "Time server")]))
        .issuer_name(root.subject)
        .public_key(key.public_key())
        .serial_number(x509.random_serial_number())
        .not_valid_before(now)
        .not_valid_after(now + timedelta(days=30))
        .add_extension(x509.ExtendedKeyUsage([ExtendedKeyUsageOID.TIME_STAMPING]), critical=True)
        .sign(root_key, hashes.SHA256())
    )
    (folder / "tsa.cnf").write_text(CONFIG)
    (folder / "serial").write_text("01")
    (folder / "root.pem").write_bytes(root.public_bytes(Encoding.PEM))
    (folder / "tsa.pem").write_bytes(certificate.public_bytes(Encoding.PEM))
    (folder / "tsa.key").write_bytes(key.private_bytes(Encoding.PEM, PrivateFormat.PKCS8, NoEncryption()))
    return root


@contextmanager
def serving(folder: Path, *, broken: bool = False) -> Iterator[str]:
    """Serve time stamps; yield the address. A broken server answers with something else."""

    class Answer(BaseHTTPRequestHandler):
        """Answers each query with a stamp."""

        def do_POST(self) -> None:
            """Stamp."""
            (folder / "query").write_bytes(self.rfile.read(int(self.headers["Content-Length"])))
            order = ["openssl", "ts", "-reply", "-config", "tsa.cnf", "-queryfile", "query"]
            reply = subprocess.run(order, cwd=folder, capture_output=True, check=True).stdout
            self.send_response(200)
            self.end_headers()
            self.wfile.write(b"<html>not here</html>" if broken else reply)

        def log_message(self, *_: object) -> None:
            """Stay quiet."""

    server = HTTPServer(("127.0.0.1", 0), Answer)
    thread = Thread(target=server.serve_forever)
    thread.start()
    try:
        yield f"http://127.0.0.1:{server.server_address[1]}/"
    finally:
        server.shutdown()
        server.server_close()
        thread.join()
