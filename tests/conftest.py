"""What the tests of documents and of foreign clients share."""

import shutil

import pytest
from documents import shell


@pytest.fixture(scope="session")
def island(tmp_path_factory):
    """The demo's folder as the demo leaves it; only to be read."""
    folder = tmp_path_factory.mktemp("demo")
    assert "To copy:" in shell("driftbook demo", folder)
    return folder / "island"


@pytest.fixture
def folder(island, tmp_path):
    """A folder of one's own with the demo's folder in it."""
    shutil.copytree(island, tmp_path / "island")
    return tmp_path
