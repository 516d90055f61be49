"""A release after this one, made up for the tests: one revision more, over the real first ones."""

import contextlib
import os
import pathlib
import shutil
import signal
import traceback
from unittest import mock

from sqlalchemy import Engine, event

from auditd.bundled import bundled_folder

NEXT = "9001"
_REVISION = '''"""A made-up later schema: several statements, to be killed between."""

import sqlalchemy as sa
from alembic import op

revision = "9001"
down_revision = "{head}"


def upgrade() -> None:
    columns = (sa.Column("row", sa.Integer, primary_key=True), sa.Column("word", sa.Text))
    op.create_table("extra", *columns)
    for word in ("one", "two", "three"):
        op.execute(sa.text("INSERT INTO extra (word) VALUES (:word)").bindparams(word=word))
    with op.batch_alter_table("looks") as batch:
        batch.add_column(sa.Column("remark", sa.Text))
    op.execute("UPDATE looks SET remark = 'old'")
    op.create_index("extra_word", "extra", ["word"])
'''


def folder_of_next(folder: pathlib.Path, head: str) -> pathlib.Path:
    """Make a copy of the migrations with one more."""
    made = folder / "migrations"
    shutil.copytree(bundled_folder("migrations"), made, ignore=shutil.ignore_patterns("__pycache__"))
    (made / "versions" / "9001_next.py").write_text(_REVISION.format(head=head))
    return made


@contextlib.contextmanager
def as_next_release(migrations: pathlib.Path):
    """Run what is within as the later release would."""
    with (
        mock.patch("auditd.store.engine.REVISION", NEXT),
        mock.patch("auditd.store.migrate.REVISION", NEXT),
        mock.patch("auditd.store.migrate.bundled_folder", return_value=migrations),
    ):
        yield


def in_child(action) -> int:
    """Do something in a forked process and return how it ended: 0, 1 for an error, or minus a signal."""
    pid = os.fork()
    if pid == 0:
        code = 1
        try:
            action()
            code = 0
        except BaseException:  # noqa: BLE001 - told here, since the parent sees only the code
            traceback.print_exc()
        finally:
            os._exit(code)
    return os.waitstatus_to_exitcode(os.waitpid(pid, 0)[1])


def die_at_statement(number: int) -> None:
    """Let this process be killed (-9) before the so-manieth statement that SQLAlchemy executes."""
    seen = 0

    def count(*_):
        nonlocal seen
        seen += 1
        if seen == number:
            os.kill(os.getpid(), signal.SIGKILL)

    event.listen(Engine, "before_cursor_execute", count)


def die_at_call(number: int, names: tuple[str, ...]) -> contextlib.ExitStack:
    """Let this process be killed (-9) before the so-manieth call of functions of files."""
    seen = 0

    def dying(plain):
        def call(*arguments, **options):
            nonlocal seen
            seen += 1
            if seen == number:
                os.kill(os.getpid(), signal.SIGKILL)
            return plain(*arguments, **options)

        return call

    stack = contextlib.ExitStack()
    for name in names:
        module, _, attribute = name.rpartition(".")
        plain = getattr(__import__(module, fromlist=["x"]), attribute)
        stack.enter_context(mock.patch(name, dying(plain)))
    return stack
