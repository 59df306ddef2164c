"""Refuses or warns of what a spec asks against logic or physics."""

from runner.spec.captures import Draft
from runner.spec.tree import Complaints


def lint(drafts: tuple[Draft, ...], complaints: Complaints) -> None:
    """Add complaints about limits that cannot be met, cannot fail or contradict one another."""
