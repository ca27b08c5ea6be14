import pytest

from service.settings import Settings
from service.store.database import Store


@pytest.fixture
def settings(tmp_path):
    return Settings(data=tmp_path / "data", workers=1)


@pytest.fixture
def store(settings):
    opened = Store.open(settings)
    yield opened
    opened.close()
