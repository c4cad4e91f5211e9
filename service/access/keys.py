"""API keys: made, listed, revoked, checked. A key itself is told once and kept nowhere."""

from __future__ import annotations

import hashlib
import hmac
import re
import secrets
import time
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from sqlalchemy import Row, exists, insert, select, update

from service.access.scopes import SCOPES
from service.problems import Problem
from service.store.database import Database
from service.store.tables import KEYS

PATTERN = re.compile(r"dl_([0-9a-f]{16})_[0-9a-f]{64}")
"""A key: a visible prefix, the id it is found by, 32 random bytes."""
LONGEST_NAME = 200
_NOBODY = "0" * 64
"""Stands for the digest of a key that does not exist; no text is known that has it."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Key:
    """What is known of a key.

    Attributes
    ----------
    scopes : tuple of str
        Some of `SCOPES`.
    created : float
        Seconds since 1970, UTC.
    revoked : float or None
        When it was revoked.
    """

    id: str
    name: str
    scopes: tuple[str, ...]
    created: float
    revoked: float | None = None


class Keys:
    """The keys in a database; with None, for a store that is not available, every check fails."""

    def __init__(self, database: Database | None) -> None:
        self._database = database

    def create(self, name: str, scopes: Sequence[str]) -> tuple[Key, str]:
        """Make a key.

        Returns
        -------
        (Key, str)
            What is kept, and the key itself, which nobody can find out again.

        Raises
        ------
        ValueError
            The name is empty or too long, or a scope is unknown or absent.
        Problem
            503, 507: it cannot be kept.
        """
        if not 0 < len(name.strip()) <= LONGEST_NAME or not name.isprintable():
            raise ValueError(f"a key's name has 1 to {LONGEST_NAME} characters that can be seen")
        if not scopes or not set(scopes) <= set(SCOPES):
            raise ValueError(f"give a key one or several of the scopes {', '.join(SCOPES)}")
        identity = secrets.token_hex(8)
        text = f"dl_{identity}_{secrets.token_hex(32)}"
        key = Key(
            id=identity,
            name=name.strip(),
            scopes=tuple(scope for scope in SCOPES if scope in scopes),
            created=time.time(),
        )
        with self._opened().writing() as connection:
            connection.execute(
                insert(KEYS).values(
                    id=key.id,
                    name=key.name,
                    digest=_digest(text),
                    scopes=" ".join(key.scopes),
                    created=key.created,
                    revoked=None,
                )
            )
        return key, text

    def all(self) -> tuple[Key, ...]:
        """Every key, also those that were revoked, oldest first."""
        with self._opened().reading() as connection:
            return tuple(map(_as_key, connection.execute(select(KEYS).order_by(KEYS.c.created, KEYS.c.id))))

    def any_valid(self) -> bool:
        """Whether there is a key that has not been revoked."""
        with self._opened().reading() as connection:
            return bool(connection.execute(select(exists().where(KEYS.c.revoked.is_(None)))).scalar_one())

    def revoke(self, identity: str) -> bool:
        """Refuse a key from now on; returns whether there was one in force."""
        with self._opened().writing() as connection:
            done = connection.execute(
                update(KEYS).where(KEYS.c.id == identity, KEYS.c.revoked.is_(None)).values(revoked=time.time())
            )
            return done.rowcount > 0

    def check(self, text: str) -> Key | None:
        """The key that a client has sent; None where there is none, or it was revoked.

        It is looked up each time, so that one that is revoked is refused at once.

        Raises
        ------
        Problem
            503: the store, which knows the keys, is not available.
        """
        database = self._opened()
        form = PATTERN.fullmatch(text)
        if form is None:
            return None
        with database.reading() as connection:
            row = connection.execute(select(KEYS).where(KEYS.c.id == form[1])).one_or_none()
        # The same work whether there is such a key or not.
        known = _NOBODY if row is None else str(row.digest)
        same = hmac.compare_digest(_digest(text).encode(), known.encode())
        return _as_key(row) if row is not None and same and row.revoked is None else None

    def _opened(self) -> Database:
        if self._database is None:
            raise Problem(
                "store-unavailable",
                "Keys cannot be checked, for the store is not available. Nothing is answered without a key.",
                headers={"Retry-After": "30"},
            )
        return self._database


def _digest(text: str) -> str:
    """A key has 256 random bits: nothing slower than SHA-256 is needed to hide it."""
    return hashlib.sha256(text.encode()).hexdigest()


def _as_key(row: Row[Any]) -> Key:
    return Key(id=row.id, name=row.name, scopes=tuple(row.scopes.split()), created=row.created, revoked=row.revoked)
