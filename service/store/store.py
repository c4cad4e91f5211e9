"""The store as the server holds it: opened at start, or not there for a reason that is told."""

from __future__ import annotations

import asyncio
import logging

from starlette.concurrency import run_in_threadpool

from service.problems import Problem
from service.settings import Settings
from service.store.database import Database, open_database
from service.store.records import Quota, Sets

log = logging.getLogger("densityloom.store")


RETRY_SECONDS = 5.0
"""Between two tries to open a store that could not be opened."""


class Store:
    """The sets; or, as long as the database cannot be opened, the problem that keeps them away.

    Parameters
    ----------
    settings : Settings
    """

    def __init__(self, settings: Settings) -> None:
        self._settings = settings
        self._quota = Quota(settings.max_sets, settings.max_store_bytes)
        self._problem: Problem | None = None
        self._sets: Sets | None = None
        self.database: Database | None = None

    def open(self) -> bool:
        """Open the database; returns whether it is open. One that cannot be used costs the store, not the service.

        Raises
        ------
        ValueError
            The database's URL is none, or a later version of this program wrote the database.
        """
        try:
            self.database = open_database(self._settings.data_dir, self._settings.database_url)
        except Problem as problem:
            if self._problem is None:
                log.error("no sets can be kept: %s", problem.detail)
            self._problem = problem
            return False
        self._sets = Sets(self.database, self._quota)
        self._problem = None
        log.info("store: %s", self.database.told)
        return True

    async def keep_trying(self) -> None:
        """Open the database as soon as it can be opened: a server may start later than we do."""
        while self.database is None:
            await asyncio.sleep(RETRY_SECONDS)
            await run_in_threadpool(self.open)

    @property
    def sets(self) -> Sets:
        """The sets.

        Raises
        ------
        Problem
            503: the store could not be opened yet.
        """
        if self._sets is None:
            raise self._problem or Problem("store-unavailable", "The store is not open yet.")
        return self._sets

    def told(self) -> str:
        """What it is, in words, for the health answer."""
        if self.database is None:
            return f"not available: {self._problem.detail if self._problem else 'it is not open yet'}"
        return self.database.told

    def close(self) -> None:
        if self.database is not None:
            self.database.close()
