"""Sets in the database: keep, list, find, delete."""

from __future__ import annotations

import time
from collections.abc import Sequence
from dataclasses import dataclass
from datetime import UTC, datetime
from typing import Any

from sqlalchemy import Connection, Row, Select, delete, exists, func, insert, select

from service.parts import Part
from service.problems import Problem
from service.store.content import Content, Damaged
from service.store.database import Database
from service.store.tables import CONTENTS, SETS, TAGS

SUMMARY = "summary"
"""Part that holds what was found out about a set when it was kept; not of its content."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Labels:
    """What people call a set."""

    name: str
    tags: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True, kw_only=True)
class Facts:
    """What is listed of a set beside its labels; spacings in Å, None where only the zero term is held."""

    kind: str
    file: str
    dimension: int
    rows: int
    coefficients: int
    d_min: float | None
    d_max: float | None
    unit: str


@dataclass(frozen=True, slots=True, kw_only=True)
class Record:
    """One line of the list of sets.

    Attributes
    ----------
    id : str
        SHA-256 of the content, hexadecimal.
    created : float
        Seconds since 1970, UTC.
    bytes : int
        Of the content.
    """

    number: int
    id: str
    labels: Labels
    created: float
    facts: Facts
    bytes: int

    def document(self) -> dict[str, Any]:
        """As plain data."""
        facts = self.facts
        return {
            "id": self.id,
            "name": self.labels.name,
            "tags": list(self.labels.tags),
            "created": datetime.fromtimestamp(self.created, UTC).isoformat(timespec="seconds").replace("+00:00", "Z"),
            "kind": facts.kind,
            "file": facts.file,
            "dimension": facts.dimension,
            "rows": facts.rows,
            "coefficients": facts.coefficients,
            "d_min": facts.d_min,
            "d_max": facts.d_max,
            "unit": facts.unit,
            "bytes": self.bytes,
        }


@dataclass(frozen=True, slots=True, kw_only=True)
class Page:
    """A part of the list, newest first; `after` is where the next part goes on, None at the end."""

    records: tuple[Record, ...]
    after: int | None
    total: int


@dataclass(frozen=True, slots=True)
class Quota:
    """How much the store may hold."""

    sets: int
    bytes: int


class Sets:
    """The sets of one database."""

    def __init__(self, database: Database, quota: Quota) -> None:
        self._database = database
        self._quota = quota

    def keep(self, content: Content, labels: Labels, facts: Facts, summary: bytes) -> tuple[Record, bool]:
        """Keep a set; when this returns it is on the disk.

        Returns
        -------
        (Record, bool)
            The set as it is kept, and whether it is new. One that is there already keeps its labels.

        Raises
        ------
        Problem
            507: the store or its disk is full; 503: it cannot be written.
        """
        identity, size = content.id, content.bytes
        with self._database.writing() as connection:
            if (found := _record(connection, identity)) is not None:
                return found, False
            self._admit(connection, size)
            row: dict[str, Any] = {
                "id": identity,
                "name": labels.name,
                "folded": f"{labels.name}\n{facts.file}\n{identity}".casefold(),
                "created": time.time(),
                "bytes": size,
                **{name: getattr(facts, name) for name in Facts.__dataclass_fields__},
            }
            number = connection.execute(insert(SETS).values(row).returning(SETS.c.number)).scalar_one()
            if labels.tags:
                connection.execute(insert(TAGS), [{"number": number, "tag": tag} for tag in sorted(set(labels.tags))])
            parts = {**content.parts, SUMMARY: Part("application/json", summary)}
            connection.execute(
                insert(CONTENTS),
                [
                    {"number": number, "part": name, "media_type": one.media_type, "file": one.name, "data": one.data}
                    for name, one in parts.items()
                ],
            )
            made = _record(connection, identity)
        if made is None:
            raise RuntimeError("a row that was inserted is not there")
        return made, True

    def _admit(self, connection: Connection, size: int) -> None:
        count, held = _used(connection)
        if count >= self._quota.sets:
            raise Problem(
                "store-full", f"The store holds {count:,} sets, as many as it may. Delete some, or raise the limit."
            )
        if held + size > self._quota.bytes:
            raise Problem(
                "store-full",
                f"The store holds {held:,} bytes; with {size:,} more it would exceed its limit of "
                f"{self._quota.bytes:,}. Delete sets, or raise the limit.",
            )

    def used(self) -> tuple[int, int]:
        """Sets held, and their bytes."""
        with self._database.reading() as connection:
            return _used(connection)

    def holds(self, identity: str) -> bool:
        """Whether there is a set of that id."""
        with self._database.reading() as connection:
            return connection.execute(select(SETS.c.number).where(SETS.c.id == identity)).first() is not None

    def record(self, identity: str) -> Record | None:
        """What is listed of a set; None where there is none of that id."""
        with self._database.reading() as connection:
            return _record(connection, identity)

    def summary(self, identity: str) -> bytes | None:
        """What was found out about a set when it was kept, as JSON."""
        with self._database.reading() as connection:
            found: bytes | None = connection.execute(
                select(CONTENTS.c.data)
                .join(SETS, SETS.c.number == CONTENTS.c.number)
                .where(SETS.c.id == identity, CONTENTS.c.part == SUMMARY)
            ).scalar_one_or_none()
        return None if found is None else bytes(found)

    def content(self, identity: str) -> Content | None:
        """The content of a set, compared with its id.

        Raises
        ------
        Problem
            500: the content has been damaged.
        """
        with self._database.reading() as connection:
            rows = connection.execute(
                select(CONTENTS.c.part, CONTENTS.c.media_type, CONTENTS.c.file, CONTENTS.c.data)
                .join(SETS, SETS.c.number == CONTENTS.c.number)
                .where(SETS.c.id == identity, CONTENTS.c.part != SUMMARY)
            ).all()
        if not rows:
            return None
        content = Content({row.part: Part(row.media_type, bytes(row.data), row.file) for row in rows})
        try:
            return content.checked(identity)
        except Damaged as fault:
            raise Problem("internal", f"The stored set {identity} is damaged: delete it and send it again.") from fault

    def page(self, *, limit: int, after: int | None = None, search: str = "", tags: Sequence[str] = ()) -> Page:
        """A part of the list, newest first.

        Parameters
        ----------
        after : int, optional
            Goes on after the record of this number.
        search : str
            Text that name, file name or id contain, whatever the case.
        tags : sequence of str
            All of which a set has.
        """
        wanted: Select[Any] = select(SETS)
        if search:
            wanted = wanted.where(SETS.c.folded.contains(search.casefold(), autoescape=True))
        for tag in tags:
            wanted = wanted.where(exists().where(TAGS.c.number == SETS.c.number, TAGS.c.tag == tag))
        with self._database.reading() as connection:
            total = connection.execute(select(func.count()).select_from(wanted.subquery())).scalar_one()
            if after is not None:
                wanted = wanted.where(SETS.c.number < after)
            rows = connection.execute(wanted.order_by(SETS.c.number.desc()).limit(limit + 1)).all()
            shown = rows[:limit]
            labels = _tags(connection, [row.number for row in shown])
        records = tuple(_as_record(row, labels.get(row.number, ())) for row in shown)
        return Page(records=records, after=shown[-1].number if len(rows) > limit else None, total=total)

    def delete(self, identity: str) -> bool:
        """Forget a set; returns whether there was one."""
        with self._database.writing() as connection:
            return connection.execute(delete(SETS).where(SETS.c.id == identity)).rowcount > 0


def _used(connection: Connection) -> tuple[int, int]:
    count, held = connection.execute(select(func.count(), func.coalesce(func.sum(SETS.c.bytes), 0))).one()
    return int(count), int(held)


def _record(connection: Connection, identity: str) -> Record | None:
    row = connection.execute(select(SETS).where(SETS.c.id == identity)).one_or_none()
    return None if row is None else _as_record(row, _tags(connection, [row.number]).get(row.number, ()))


def _tags(connection: Connection, numbers: list[int]) -> dict[int, tuple[str, ...]]:
    found: dict[int, tuple[str, ...]] = {}
    if numbers:
        rows = connection.execute(select(TAGS).where(TAGS.c.number.in_(numbers)).order_by(TAGS.c.tag))
        for number, tag in rows:
            found[number] = (*found.get(number, ()), tag)
    return found


def _as_record(row: Row[Any], tags: tuple[str, ...]) -> Record:
    return Record(
        number=row.number,
        id=row.id,
        labels=Labels(name=row.name, tags=tags),
        created=row.created,
        facts=Facts(**{name: getattr(row, name) for name in Facts.__dataclass_fields__}),
        bytes=row.bytes,
    )
