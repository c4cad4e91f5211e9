from __future__ import annotations

from dataclasses import FrozenInstanceError

import pytest

from service.analyses.report import Limits, Report
from tests.service.analyses import asked


def test_reports_and_limits_do_not_change():
    made = Report(document={}, table=(), told=())
    assert (made.figures, made.further) == ({}, ())
    with pytest.raises(FrozenInstanceError):
        made.told = ("x",)
    assert Limits(max_bytes=1, max_rows=1, max_values=1).threads == 1


@pytest.mark.parametrize("product", asked.GOOD)
def test_columns_of_every_table_are_equally_long(product):
    made = asked.report(product, asked.GOOD[product])
    for table in (made.table, *(one for _, one in made.further)):
        assert len({len(values) for _, values in table}) == 1
        assert len({name for name, _ in table}) == len(table)
    assert made.told[0].startswith(product)
