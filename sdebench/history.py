"""The history of a gate: error constants and cost of every run, in a local SQLite file.

SQLite's own locks keep two runs at once apart; a run is one transaction, so that one that is
ended half-way leaves nothing behind.
"""

import os
import sqlite3
from collections.abc import Iterator
from contextlib import closing, contextmanager
from dataclasses import dataclass
from pathlib import Path

from sdebench.errors import BadHistory
from sdebench.evidence import Evidence

APPLICATION = 0x5DEB  # in the file's header, so that it is told from other databases
VERSION = 1
PATIENCE = 60.0  # seconds to wait for another run that writes
TABLES = (
    "create table if not exists runs (run integer primary key, created text not null, "
    "revision text, sdebench text not null, exit_code integer not null)",
    "create table if not exists errors (run integer not null references runs, scheme text not "
    "null, problem text not null, kind text not null, functional text, at text, "
    "exponent real, constant real, low real, high real, step_seconds real)",
)


@dataclass(frozen=True)
class Point:
    """One kind of error in one run: its constant C in C h^exponent, and what a step costs."""

    run: int
    created: str
    revision: str | None
    exit_code: int
    scheme: str
    problem: str
    kind: str
    functional: str | None
    at: str | None
    exponent: float | None
    constant: float | None
    low: float | None
    high: float | None
    step_seconds: float | None

    @property
    def series(self) -> tuple[str, str, str, str, str]:
        """What the point is of."""
        return self.scheme, self.problem, self.kind, self.functional or "", self.at or ""


def check_history(path: Path) -> None:
    """Raise `BadHistory` unless a run can be appended; makes the file if there is none."""
    with _opened(path) as connection, _transaction(connection):
        pass


def append(path: Path, evidence: Evidence, exit_code: int) -> None:
    """Append a run to a history; raises `BadHistory`, and then nothing of it is kept."""
    p = evidence.provenance
    rows = [row for row in evidence.results if row.bears_on == row.kind and not row.check]
    with _opened(path) as connection, _transaction(connection):
        run = connection.execute(
            "insert into runs (created, revision, sdebench, exit_code) values (?, ?, ?, ?)",
            (p.created, p.revision, p.sdebench, exit_code),
        ).lastrowid
        connection.executemany(
            "insert into errors values (?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?)",
            [
                (
                    *(run, row.scheme, row.problem, row.kind, row.functional, row.at),
                    *((c.order, c.value, c.low, c.high) if c is not None else [None] * 4),
                    row.cost.step_seconds,
                )
                for row in rows
                for c in [row.error_constant]
            ],
        )


def read(path: Path) -> list[Point]:
    """Return all points of a history, oldest first; raises `BadHistory`."""
    if not path.is_file():
        raise BadHistory(str(path), "there is no such file")
    with _opened(path, read_only=True) as connection:
        found = connection.execute(
            "select run, created, revision, exit_code, scheme, problem, kind, functional, at, "
            "exponent, constant, low, high, step_seconds from runs join errors using (run) "
            "order by run"
        ).fetchall()
    return [Point(*row) for row in found]


@contextmanager
def _opened(path: Path, read_only: bool = False) -> Iterator[sqlite3.Connection]:
    """Open a history; every complaint of SQLite's is one sentence.

    To read, too, it is opened for writing where it can be: a run that was ended half-way is undone
    by whoever comes next.
    """
    mode = "rwc" if not read_only else "rw" if os.access(path, os.W_OK) else "ro"
    try:
        where = f"{path.absolute().as_uri()}?mode={mode}"
        with closing(
            sqlite3.connect(where, uri=True, timeout=PATIENCE, isolation_level=None)
        ) as connection:
            (mark,) = connection.execute("pragma application_id").fetchone()
            (version,) = connection.execute("pragma user_version").fetchone()
            (empty,) = connection.execute("select count(*) = 0 from sqlite_master").fetchone()
            if mark != APPLICATION and not (empty and mark == 0 and not read_only):
                raise BadHistory(str(path), "it is another program's database")
            if version > VERSION:
                raise BadHistory(str(path), f"its format {version} is newer than {VERSION}")
            yield connection
    except sqlite3.Error as cause:
        raise BadHistory(str(path), str(cause)) from None


@contextmanager
def _transaction(connection: sqlite3.Connection) -> Iterator[None]:
    """Do all or nothing, alone; the tables are made if there are none."""
    connection.execute("begin immediate")
    try:
        for table in TABLES:
            connection.execute(table)
        connection.execute(f"pragma application_id = {APPLICATION}")
        connection.execute(f"pragma user_version = {VERSION}")
        yield
        connection.execute("commit")
    except BaseException:
        if connection.in_transaction:
            connection.execute("rollback")
        raise
