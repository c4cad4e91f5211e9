"""Tables of the store, as they are in the newest schema; `migrations` makes them."""

from __future__ import annotations

from sqlalchemy import (
    BigInteger,
    Column,
    Float,
    ForeignKey,
    Identity,
    Integer,
    LargeBinary,
    MetaData,
    String,
    Table,
    Text,
)

METADATA = MetaData()

# SQLite counts rows by itself only in a column of the plain type INTEGER.
_NUMBER = BigInteger().with_variant(Integer(), "sqlite")

SCHEMA = Table("schema_version", METADATA, Column("version", Integer, nullable=False))

SETS = Table(
    "sets",
    METADATA,
    Column("number", _NUMBER, Identity(always=True), primary_key=True),
    Column("id", String(64), nullable=False, unique=True),
    Column("name", Text, nullable=False),
    Column("folded", Text, nullable=False),
    Column("created", Float, nullable=False),
    Column("kind", String(16), nullable=False),
    Column("file", Text, nullable=False),
    Column("dimension", Integer, nullable=False),
    Column("rows", Integer, nullable=False),
    Column("coefficients", Integer, nullable=False),
    Column("d_min", Float),
    Column("d_max", Float),
    Column("unit", Text, nullable=False),
    Column("bytes", BigInteger, nullable=False),
    sqlite_autoincrement=True,
)
"""One row a set. `folded`: what a search for text looks in."""

TAGS = Table(
    "tags",
    METADATA,
    Column("number", _NUMBER, ForeignKey("sets.number", ondelete="CASCADE"), primary_key=True),
    Column("tag", String(64), primary_key=True, index=True),
)

CONTENTS = Table(
    "contents",
    METADATA,
    Column("number", _NUMBER, ForeignKey("sets.number", ondelete="CASCADE"), primary_key=True),
    Column("part", String(64), primary_key=True),
    Column("media_type", Text, nullable=False),
    Column("file", Text, nullable=False),
    Column("data", LargeBinary, nullable=False),
)
"""What was sent: the document, and each column or file; and the summary made of it."""

KEYS = Table(
    "keys",
    METADATA,
    Column("id", String(16), primary_key=True),
    Column("name", Text, nullable=False),
    Column("digest", String(64), nullable=False, unique=True),
    Column("scopes", Text, nullable=False),
    Column("created", Float, nullable=False),
    Column("revoked", Float),
)
"""API keys; of a key itself only its SHA-256 is known."""
