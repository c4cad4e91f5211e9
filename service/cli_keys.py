"""``densityloom keys``: make, list and revoke API keys, in the store that the settings name."""

from __future__ import annotations

import argparse
import sys
from collections.abc import Iterator
from contextlib import contextmanager
from datetime import UTC, datetime
from typing import Any

from service.access.keys import Keys
from service.access.scopes import SCOPES
from service.settings import load_settings
from service.store.database import open_database


def add(actions: Any) -> None:  # noqa: ANN401 - argparse keeps the type to itself
    """Add the sub-command to the command's parser."""
    keys = actions.add_parser("keys", help="make, list and revoke API keys")
    wanted = keys.add_subparsers(required=True, metavar="ACTION")

    create = wanted.add_parser("create", help="make a key; it is shown this once")
    create.add_argument("--name", required=True, help="whose it is, or what for")
    create.add_argument(
        "--scope",
        action="append",
        required=True,
        choices=SCOPES,
        help="may be repeated; read: look and have stored sets drawn, compute: send something to be computed, "
        "write: keep and delete sets",
    )
    create.set_defaults(action=_create)

    wanted.add_parser("list", help="list the keys there are").set_defaults(action=_list)

    revoke = wanted.add_parser("revoke", help="refuse a key from now on")
    revoke.add_argument("id", help="as listed")
    revoke.set_defaults(action=_revoke)


@contextmanager
def _opened() -> Iterator[Keys]:
    settings = load_settings()
    database = open_database(settings.data_dir, settings.database_url)
    try:
        yield Keys(database)
    finally:
        database.close()


def _create(options: argparse.Namespace) -> int:
    with _opened() as keys:
        key, text = keys.create(options.name, options.scope)
    # The key alone goes to standard output, for scripts.
    print(f"key {key.id} for {', '.join(key.scopes)}; keep it safe, it is shown this once:", file=sys.stderr)
    print(text)
    return 0


def _list(_: argparse.Namespace) -> int:
    with _opened() as keys:
        found = keys.all()
    for key in found:
        state = "in force" if key.revoked is None else f"revoked {_day(key.revoked)}"
        print(f"{key.id}  {'+'.join(key.scopes):<18}  made {_day(key.created)}  {state:<25}  {key.name}")
    if not found:
        print("there are no keys; make one with densityloom keys create", file=sys.stderr)
    return 0


def _revoke(options: argparse.Namespace) -> int:
    with _opened() as keys:
        if not keys.revoke(options.id):
            raise ValueError(f"there is no key {options.id[:80]!r} in force; densityloom keys list shows them")
    print(f"key {options.id} is refused from now on", file=sys.stderr)
    return 0


def _day(seconds: float) -> str:
    return datetime.fromtimestamp(seconds, UTC).strftime("%Y-%m-%d %H:%MZ")
