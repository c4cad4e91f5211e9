"""Which SQLite library is used, and how it keeps what was committed.

Versions 3.7.0 to 3.51.2 of the library can lose committed writes in WAL mode when several connections
write and checkpoint at the same instant (https://sqlite.org/wal.html, "The WAL-Reset Bug"). A library
that came with the package ``pysqlite3`` is preferred where it is free of that; otherwise, with an
affected library, the database keeps a rollback journal instead of a write-ahead log.
"""

from __future__ import annotations

import sqlite3
from dataclasses import dataclass
from importlib import import_module
from types import ModuleType
from typing import Any

from sqlalchemy import Connection, Engine, create_engine, event

AFFECTED = ((3, 7, 0), (3, 51, 2))
"""First and last version with the fault, but for the branches below."""
REPAIRED = {(3, 44): 6, (3, 50): 7}
"""Branches that got the repair, and from which patch on."""
BUSY_SECONDS = 20.0
"""How long a transaction waits for another one's lock."""
CONNECTIONS = 40
"""Threads of the server that may ask at once; a connection is opened when it is first needed."""
WRITING = "writing"
"""Execution option of a connection whose transactions write."""


@dataclass(frozen=True, slots=True)
class Library:
    """A loaded SQLite library.

    Attributes
    ----------
    module : module
        Its DB-API module.
    version : tuple of int
    name : str
        Name of that module, for the health answer.
    """

    module: ModuleType
    version: tuple[int, ...]
    name: str

    @property
    def sound(self) -> bool:
        """Whether a write-ahead log is safe with it."""
        return is_sound(self.version)

    @property
    def journal(self) -> str:
        """The journal mode it is used in."""
        return "WAL" if self.sound else "DELETE"

    def told(self) -> str:
        """In words."""
        reason = (
            "write-ahead log" if self.sound else "rollback journal, for this version's write-ahead log may lose writes"
        )
        return f"SQLite {'.'.join(map(str, self.version))} ({self.name}), {reason}, every commit synchronised"


def is_sound(version: tuple[int, ...]) -> bool:
    """Whether a version is free of the WAL-reset fault."""
    if not AFFECTED[0] <= version <= AFFECTED[1]:
        return True
    patch = REPAIRED.get((version[0], version[1]))
    return patch is not None and version[2] >= patch


def library() -> Library:
    """The first sound library there is, else the interpreter's own."""
    own = Library(sqlite3, sqlite3.sqlite_version_info, "sqlite3")
    if own.sound:
        return own
    try:
        module = import_module("pysqlite3")
    except ImportError:
        return own
    bundled = Library(module, tuple(module.sqlite_version_info), "pysqlite3")
    return bundled if bundled.sound else own


def open_engine(path: str, used: Library) -> Engine:
    """An engine whose every commit is on the disk before it returns."""
    # As many connections as there are threads that ask: to open one takes longer than most questions do.
    engine = create_engine(
        f"sqlite:///{path}",
        module=used.module,
        connect_args={"timeout": BUSY_SECONDS},
        pool_size=CONNECTIONS,
        max_overflow=0,
    )

    @event.listens_for(engine, "connect")
    def _prepare(connection: Any, _: object) -> None:  # noqa: ANN401
        # Transactions are begun by us: the driver would begin them late and deferred.
        connection.isolation_level = None
        cursor = connection.cursor()
        cursor.execute(f"PRAGMA journal_mode={used.journal}")
        # A rollback journal is gone for good only when its folder has been synchronised too.
        cursor.execute(f"PRAGMA synchronous={'FULL' if used.sound else 'EXTRA'}")
        cursor.execute("PRAGMA foreign_keys=ON")
        cursor.close()

    @event.listens_for(engine, "begin")
    def _begin(connection: Connection) -> None:
        # A transaction that reads first and writes later may be refused at once; so it takes its lock at the start.
        immediate = connection.get_execution_options().get(WRITING, False)
        connection.exec_driver_sql("BEGIN IMMEDIATE" if immediate else "BEGIN")

    return engine
