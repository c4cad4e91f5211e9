"""What a database's complaint means for a client."""

from __future__ import annotations

from sqlalchemy.exc import DBAPIError

from service.problems import Problem

FULL_STATE = "53100"
READ_ONLY_STATE = "25006"
"""SQLSTATE of PostgreSQL for a full disk, and for a server that only reads."""


def fault_of(fault: DBAPIError) -> Problem:
    """The problem to answer; nothing of the transaction has been kept."""
    words = str(fault.orig).lower()
    state = str(getattr(fault.orig, "sqlstate", "") or "")
    if "disk is full" in words or state == FULL_STATE:
        return Problem(
            "store-full", "The store's disk is full; nothing was changed. Delete sets, or give the store more room."
        )
    if "readonly" in words or "read-only" in words or state == READ_ONLY_STATE:
        return Problem("store-unavailable", "The store can only be read; nothing was changed.")
    if "locked" in words or "busy" in words:
        return Problem(
            "store-unavailable", "The store is busy; nothing was changed. Try again.", headers={"Retry-After": "2"}
        )
    return Problem(
        "store-unavailable",
        "The store does not answer; nothing was changed. The fault has been logged.",
        headers={"Retry-After": "5"},
    )
