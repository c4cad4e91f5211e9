"""Stored sets kept ready to be summed: read, checked and interpreted once, the least used let go."""

from __future__ import annotations

import re
from collections import OrderedDict

from service.problems import Problem
from service.schemas.coefficient_set import StoredSetIn
from service.settings import Settings
from service.store.content import stored_set
from service.store.database import FILE, Database, attach_database
from service.store.records import Quota, Sets

ID = re.compile("^[0-9a-f]{64}$")
"""What an id of a set looks like."""


class Shelf:
    """The sets of the store, as a computing process needs them.

    The database is another process's to open and migrate; here it is only read.
    """

    def __init__(self, settings: Settings) -> None:
        self._settings = settings
        self._database: Database | None = None
        self._ready: OrderedDict[str, StoredSetIn] = OrderedDict()

    def __call__(self, identity: str) -> StoredSetIn:
        """The set of an id.

        Raises
        ------
        Problem
            404: there is none; 503: the store cannot be read.
        """
        sets = self._opened() if ID.fullmatch(identity) else None
        # Looked for each time: one that was deleted is no longer answered for.
        if sets is None or not sets.holds(identity):
            self._ready.pop(identity, None)
            raise no_such_set(identity)
        if identity not in self._ready:
            content = sets.content(identity)
            if content is None:
                raise no_such_set(identity)
            self._ready[identity] = stored_set(content)
        self._ready.move_to_end(identity)
        self._trim()
        return self._ready[identity]

    def _trim(self) -> None:
        """Let go of the least used until the rest fits; the last one used stays."""
        sizes = {identity: one.bytes_held for identity, one in self._ready.items()}
        held = sum(sizes.values())
        for identity in list(self._ready)[:-1]:
            if held <= self._settings.set_cache_bytes:
                return
            held -= sizes[identity]
            del self._ready[identity]

    def _opened(self) -> Sets | None:
        settings = self._settings
        if self._database is None:
            if settings.database_url is None and not (settings.data_dir / FILE).exists():
                return None
            self._database = attach_database(settings.data_dir, settings.database_url)
        return Sets(self._database, Quota(settings.max_sets, settings.max_store_bytes))

    def close(self) -> None:
        """Let go of the database and of all sets."""
        self._ready.clear()
        if self._database is not None:
            self._database.close()
            self._database = None


def no_such_set(identity: str) -> Problem:
    """The problem of an id that no set has."""
    return Problem("not-found", f"There is no set {identity[:80]!r} in the store. GET /v1/sets lists those there are.")
