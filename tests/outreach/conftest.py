"""Folders that the tests share."""

import pytest

from fieldgen.outreach.folder import ProductFolder
from tests.outreach.invented import write_folder


@pytest.fixture(scope="session")
def written(tmp_path_factory):
    """Path of a folder, and the fields and stations in it."""
    path = tmp_path_factory.mktemp("products")
    return path, *write_folder(path)


@pytest.fixture(scope="session")
def folder(written):
    return ProductFolder(written[0])
