"""The store as the server holds it: opened at start, or not there for a reason that is told."""

from __future__ import annotations

import logging

from service.problems import Problem
from service.settings import Settings
from service.store.database import Database, open_database
from service.store.records import Quota, Sets

log = logging.getLogger("densityloom.store")


class Store:
    """The sets, or the problem that keeps them away."""

    def __init__(self, database: Database | None, quota: Quota, problem: Problem | None = None) -> None:
        self.database = database
        self._sets = None if database is None else Sets(database, quota)
        self._problem = problem

    @property
    def sets(self) -> Sets:
        """The sets.

        Raises
        ------
        Problem
            503: the store could not be opened at start.
        """
        if self._sets is None:
            raise self._problem or Problem("store-unavailable", "The service runs without a store.")
        return self._sets

    def told(self) -> str:
        """What it is, in words, for the health answer and the log."""
        if self.database is None:
            return f"not available: {self._problem.detail if self._problem else 'there is none'}"
        return self.database.told

    def close(self) -> None:
        if self.database is not None:
            self.database.close()


def open_store(settings: Settings) -> Store:
    """Open the store of the settings; a folder that cannot be used costs the store, not the service.

    Raises
    ------
    ValueError
        The database's URL is none, or a later version of this program wrote the database.
    """
    quota = Quota(settings.max_sets, settings.max_store_bytes)
    try:
        made = Store(open_database(settings.data_dir, settings.database_url), quota)
    except Problem as problem:
        log.error("no sets can be kept: %s", problem.detail)
        return Store(None, quota, problem)
    log.info("store: %s", made.told())
    return made
