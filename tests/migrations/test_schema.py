"""Empty to head on both databases, and the head is what the program's tables say."""

import pytest
from alembic.autogenerate import compare_metadata
from alembic.migration import MigrationContext
from alembic.script import ScriptDirectory
from sqlalchemy import inspect
from sqlalchemy.engine import URL

from auditd.bundled import bundled_folder
from auditd.store.migrate import open_or_make
from auditd.store.tables import REVISION, metadata


@pytest.fixture(params=["sqlite", "postgresql"])
def engine(request, tmp_path):
    """An engine on a store made from nothing."""
    if request.param == "postgresql":
        url = request.getfixturevalue("postgres_url")
    else:
        url = URL.create("sqlite", database=str(tmp_path / "store.sqlite"))
    made = open_or_make(url)
    yield made
    made.dispose()


def test_the_migrations_make_what_the_tables_say(engine):
    """Tables, columns, types, indexes and constraints, compared by Alembic."""
    with engine.connect() as connection:
        context = MigrationContext.configure(connection, opts={"compare_type": True})
        assert compare_metadata(context, metadata) == []
        assert "run_values" in inspect(connection).get_view_names()


def test_defaults_of_the_server_are_those_of_the_tables(engine):
    """Alembic does not compare them by itself: a collector that leaves them out relies on them."""
    with engine.connect() as connection:
        inspector = inspect(connection)
        for table in metadata.tables.values():
            made = {column["name"]: column for column in inspector.get_columns(table.name)}
            for column in table.columns:
                assert made[column.name]["nullable"] == column.nullable, (table.name, column.name)
                if column.server_default is not None:
                    assert made[column.name]["default"] is not None, (table.name, column.name)


def test_the_heads_number_is_the_one_that_the_program_reads():
    """One line of revisions, whose numbers grow as texts and as numbers."""
    script = ScriptDirectory(str(bundled_folder("migrations")))
    assert script.get_heads() == [REVISION]
    numbers = [revision.revision for revision in script.walk_revisions()][::-1]
    assert all(len(number) == 4 and number.isdigit() for number in numbers)
    assert numbers == sorted(numbers)
