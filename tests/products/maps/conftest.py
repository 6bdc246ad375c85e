"""Fields and painters that the tests of maps share."""

import pytest

from tests.products.maps.invented import GRIDS, make_island, make_painter


@pytest.fixture(params=GRIDS.values(), ids=GRIDS.keys())
def small(request):
    return make_island(**request.param)


@pytest.fixture(scope="session")
def island():
    return make_island()


@pytest.fixture(scope="session")
def painter(island):
    return make_painter(island)
