"""What the tests of the capture layer share."""

from typing import TYPE_CHECKING

import pytest

from runner.spec.build import read_spec
from runner.spec.model import Spec
from tests.capture.bad_frames import SPEC_TEXT

if TYPE_CHECKING:
    from pathlib import Path


@pytest.fixture(scope="session")
def spec(tmp_path_factory: pytest.TempPathFactory) -> Spec:
    """The spec of the staged captures."""
    path: Path = tmp_path_factory.mktemp("spec") / "spec.yaml"
    path.write_text(SPEC_TEXT, encoding="utf-8")
    return read_spec(path)
