"""Files that travel with the program are found."""

import pytest

from runner import resources
from runner.errors import UsageError


@pytest.mark.parametrize(("name", "holds"), [("templates", "fonts/DejaVuSans.ttf"), ("specs", "FORMAT.md")])
def test_the_folders_are_found(name: str, holds: str) -> None:
    """Templates, fonts and ready specs lie where the program looks."""
    assert (resources.folder(name) / holds).is_file()


def test_a_missing_folder_is_told() -> None:
    """An incomplete installation says so in a sentence."""
    with pytest.raises(UsageError, match="the installation lacks its folder 'nothing'; install probatum again"):
        resources.folder("nothing")
