"""`probatum keys`: a plant's authority, its stations, its revocation list."""

from pathlib import Path

import click

from runner.commands.passphrase import VARIABLE, find_passphrase
from runner.errors import UsageError

AUTHORITY_VARIABLE = "PROBATUM_AUTHORITY_PASSPHRASE"
_AUTHORITY = click.option(
    "--authority", required=True, type=click.Path(path_type=Path), help="Folder of the authority."
)
_AUTHORITY_FILE = click.option(
    "--authority-passphrase-file",
    type=click.Path(path_type=Path),
    help=f"File with the authority's pass phrase; else {AUTHORITY_VARIABLE}, or a prompt.",
)
_FILE = click.option(
    "--passphrase-file",
    type=click.Path(path_type=Path),
    help=f"File with the new key's pass phrase; else {VARIABLE}, or a prompt.",
)


@click.group("keys")
def command() -> None:
    """Make keys that sign reports.

    Make an authority once, keep its folder offline, and give its root.pem to everyone who reads reports. Make a
    station's key for each test station.
    """


@command.command("make-authority")
@click.argument("folder", type=click.Path(path_type=Path))
@click.option("--name", required=True, help="Name of the authority, as readers will see it.")
@_FILE
def make_authority(folder: Path, name: str, passphrase_file: Path | None) -> None:
    """Make an authority in a new FOLDER: its key, root.pem for readers, and a revocation list (15 years)."""
    from runner.report import keys  # noqa: PLC0415 - heavy

    root = keys.make_authority(folder, name, _new_passphrase(passphrase_file))
    print(f"authority '{name}' made in {folder}; give {root} to whoever reads reports, keep the rest offline")


@command.command("make-station")
@click.argument("folder", type=click.Path(path_type=Path))
@click.option("--name", required=True, help="Name of the station, as readers will see it.")
@_AUTHORITY
@_AUTHORITY_FILE
@_FILE
@click.option("--pem", is_flag=True, help="Write an encrypted PEM file in place of PKCS#12.")
@click.option("--crl-url", metavar="URL", help="Where the authority publishes its revocation list.")
def make_station(
    folder: Path,
    name: str,
    authority: Path,
    authority_passphrase_file: Path | None,
    passphrase_file: Path | None,
    pem: bool,
    crl_url: str | None,
) -> None:
    """Make a station's key in a new FOLDER, issued by an authority (2 years)."""
    from runner.report import keys  # noqa: PLC0415 - heavy

    file = keys.make_station(
        folder,
        name,
        authority,
        _authority_passphrase(authority_passphrase_file),
        _new_passphrase(passphrase_file),
        pem=pem,
        crl_url=crl_url,
    )
    print(f"station '{name}' made; sign with: probatum run … --key {file}")


@command.command("renew-crl")
@_AUTHORITY
@_AUTHORITY_FILE
@click.option("--revoke", type=click.Path(path_type=Path), help="Certificate that holds no longer (station.crt).")
def renew_crl(authority: Path, authority_passphrase_file: Path | None, revoke: Path | None) -> None:
    """Write the authority's revocation list anew, good for another 90 days; with --revoke add a certificate."""
    from runner.report import keys  # noqa: PLC0415 - heavy

    file = keys.renew_crl(authority, _authority_passphrase(authority_passphrase_file), revoke)
    print(f"{file} written; readers give it to: probatum verify … --crl {file.name}")


def _new_passphrase(file: Path | None) -> bytes:
    found = find_passphrase(file, confirm=True, question="Pass phrase of the new key")
    return _asked(found, "the new key", VARIABLE, "--passphrase-file")


def _authority_passphrase(file: Path | None) -> bytes:
    found = find_passphrase(file, variable=AUTHORITY_VARIABLE, question="Pass phrase of the authority")
    return _asked(found, "the authority", AUTHORITY_VARIABLE, "--authority-passphrase-file")


def _asked(passphrase: bytes | None, of: str, variable: str, option: str) -> bytes:
    if not passphrase:
        step = f"set {variable}, give {option}, or run on a terminal"
        raise UsageError(f"the pass phrase of {of} is {'missing' if passphrase is None else 'empty'}", next_step=step)
    return passphrase
