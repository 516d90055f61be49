"""The stores over which the contract is held, each new one by one word here."""

import pytest
from sqlalchemy.engine import URL

from auditd.store.migrate import open_or_make

STORES = ("sqlite", "postgresql")


@pytest.fixture(params=STORES)
def store_address(request, tmp_path):
    """The address of a store that does not exist yet."""
    if request.param == "postgresql":
        return request.getfixturevalue("postgres_url")
    return URL.create("sqlite", database=str(tmp_path / "store.sqlite"))


@pytest.fixture
def engine(store_address):
    """An engine on a new, empty store."""
    made = open_or_make(store_address)
    yield made
    made.dispose()
