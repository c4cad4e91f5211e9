from __future__ import annotations

from contextlib import ExitStack, closing

import numpy as np
import pytest

from service.interpret_set import whole_set
from service.problems import Problem
from service.settings import Settings
from service.store.content import content_of
from service.store.database import open_database
from service.store.records import Quota, Sets
from service.store.shelf import Shelf
from tests.service.store.made import content, keep


@pytest.fixture
def settings(address):
    folder, url = address
    return Settings(data_dir=folder, database_url=url)


@pytest.fixture
def shelf_of():
    """Makes shelves, and closes them afterwards."""
    with ExitStack() as stack:
        yield lambda settings: stack.enter_context(closing(Shelf(settings)))


@pytest.fixture
def sets(address):
    made = open_database(*address)
    yield Sets(made, Quota(100, 10**9))
    made.close()


def test_a_set_is_handed_out_as_it_was_kept(shelf_of, settings, sets):
    record, _ = keep(sets, 1)
    found = shelf_of(settings)(record.id)
    assert content_of(found) == content(1)


def test_a_set_is_read_and_interpreted_once(shelf_of, settings, sets):
    record, _ = keep(sets, 1)
    shelf = shelf_of(settings)
    first = shelf(record.id)
    made = whole_set(first, "omit", max_coefficients=100)
    assert shelf(record.id) is first
    assert whole_set(shelf(record.id), "omit", max_coefficients=100) is made
    np.testing.assert_array_equal(made.indices[:, 0], [0, 1, 2, 3][-made.count :])


def test_what_is_made_depends_on_the_rule_for_missing_phases(shelf_of, settings, sets):
    record, _ = keep(sets, 1)
    shelf = shelf_of(settings)
    whole_set(shelf(record.id), "omit", max_coefficients=100)
    with pytest.raises(Problem, match="phase"):
        whole_set(shelf(record.id), "refuse", max_coefficients=100)


def test_a_deleted_set_is_not_answered_for(shelf_of, settings, sets):
    record, _ = keep(sets, 1)
    shelf = shelf_of(settings)
    shelf(record.id)
    sets.delete(record.id)
    with pytest.raises(Problem) as caught:
        shelf(record.id)
    assert caught.value.status == 404


@pytest.mark.parametrize("identity", ["", "0" * 64, "../../etc/passwd", "A" * 64, "0" * 63])
def test_an_unknown_id_is_not_found(shelf_of, settings, sets, identity):
    with pytest.raises(Problem) as caught:
        shelf_of(settings)(identity)
    assert caught.value.status == 404


def test_where_there_is_no_store_nothing_is_made(shelf_of, tmp_path):
    with pytest.raises(Problem) as caught:
        shelf_of(Settings(data_dir=tmp_path / "none"))("0" * 64)
    assert caught.value.status == 404
    assert not (tmp_path / "none").exists()


def test_the_least_used_sets_are_let_go(shelf_of, address, sets):
    folder, url = address
    records = [keep(sets, seed)[0] for seed in range(3)]
    one = shelf_of(Settings(data_dir=folder, database_url=url))(records[0].id).bytes_held
    shelf = shelf_of(Settings(data_dir=folder, database_url=url, set_cache_bytes=2 * one))
    held = [shelf(record.id) for record in records]
    assert shelf(records[2].id) is held[2]
    assert shelf(records[1].id) is held[1]
    assert shelf(records[0].id) is not held[0]
    assert shelf(records[2].id) is not held[2], "it was the least used of the three"


def test_a_set_larger_than_the_shelf_is_handed_out_all_the_same(shelf_of, address, sets):
    folder, url = address
    shelf = shelf_of(Settings(data_dir=folder, database_url=url, set_cache_bytes=0))
    record, _ = keep(sets, 1)
    assert shelf(record.id) is shelf(record.id)
