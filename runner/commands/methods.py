"""`probatum methods`: list the methods, or tell about one."""

import click

from runner.commands.shelf_text import tell


@click.command("methods")
@click.argument("name", required=False)
def command(name: str | None) -> None:
    """List the methods, or tell about NAME: its quantities with units, its options, its references."""
    from runner.measure import shelf  # noqa: PLC0415 - heavy

    tell("method", shelf.methods(), name)
