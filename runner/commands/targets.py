"""`probatum targets`: list the targets, or tell about one."""

import click

from runner.commands.shelf_text import tell


@click.command("targets")
@click.argument("name", required=False)
def command(name: str | None) -> None:
    """List the targets, or tell about NAME: what it offers, its options, its references."""
    from runner.measure import shelf  # noqa: PLC0415 - heavy

    tell("target", shelf.targets(), name)
