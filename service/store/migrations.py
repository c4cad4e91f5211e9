"""From an older schema to the newest, one numbered step after the other, in one transaction."""

from __future__ import annotations

from collections.abc import Callable

from sqlalchemy import Connection, insert, inspect, select, update

from service.store.tables import CONTENTS, KEYS, SCHEMA, SETS, TAGS


def _sets(connection: Connection) -> None:
    for table in (SETS, TAGS, CONTENTS):
        table.create(connection)


def _keys(connection: Connection) -> None:
    KEYS.create(connection)


STEPS: tuple[Callable[[Connection], None], ...] = (_sets, _keys)
"""Step n leads from version n to version n + 1. A step that has been released is never changed: one that alters a
table written by an earlier step writes its own DDL, and the earlier step keeps the table as it was then."""


class NewerSchema(Exception):
    """The database was written by a later version of this program."""


def migrate(connection: Connection, *, to: int = len(STEPS)) -> int:
    """Bring the schema to a version, within the caller's transaction; returns the version found.

    Nobody else may write meanwhile.

    Raises
    ------
    NewerSchema
        The database is ahead of this program; nothing was changed.
    """
    if not inspect(connection).has_table(SCHEMA.name):
        SCHEMA.create(connection)
        connection.execute(insert(SCHEMA).values(version=0))
    found: int = connection.execute(select(SCHEMA.c.version)).scalar_one()
    if found > len(STEPS):
        raise NewerSchema(f"the store has schema {found}, this program knows up to {len(STEPS)}; use a newer release")
    for step in STEPS[found:to]:
        step(connection)
    if found < to:
        connection.execute(update(SCHEMA).values(version=to))
    return found
