"""What tests of layers share."""

import shutil
import tempfile
from collections.abc import Iterator
from pathlib import Path

import pytest


@pytest.fixture
def public_path() -> Iterator[Path]:
    """A temporary folder that anybody may enter; pytest's own is closed to others."""
    folder = Path(tempfile.mkdtemp())
    folder.chmod(0o777)
    yield folder
    shutil.rmtree(folder)
