from __future__ import annotations

from sqlalchemy import inspect

from service.store.tables import METADATA


def test_a_database_has_every_table_and_column(database):
    with database.reading() as connection:
        there = inspect(connection)
        for table in METADATA.sorted_tables:
            assert {column["name"] for column in there.get_columns(table.name)} == {one.name for one in table.columns}
