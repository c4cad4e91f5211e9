from __future__ import annotations

import threading
from dataclasses import replace

import pytest
from sqlalchemy import event, select, update

from service.problems import Problem
from service.store import database as database_module
from service.store.database import open_database
from service.store.records import Labels, Quota, Sets
from service.store.tables import CONTENTS, TAGS
from tests.service.store.made import FACTS, content, file_content, keep

AMPLE = Quota(1000, 10**9)


@pytest.fixture
def sets(database):
    return Sets(database, AMPLE)


def test_a_set_comes_back_whole(sets):
    record, new = keep(sets, 1, "film KL-2", ("b", "a", "a"))
    assert new
    assert record.id == content(1).id
    assert record.labels == Labels(name="film KL-2", tags=("a", "b"))
    assert record.facts == FACTS
    assert record.bytes == content(1).bytes
    assert sets.record(record.id) == record
    assert sets.content(record.id) == content(1)
    assert sets.summary(record.id) == b'{"warnings":[]}'


def test_a_file_comes_back_whole(sets):
    whole = file_content()
    record, _ = sets.keep(whole, Labels(name="x"), FACTS, b"{}")
    assert sets.content(record.id) == whole


def test_sending_a_set_again_changes_nothing(sets):
    first, _ = keep(sets, 1, "first", ("a",))
    again, new = keep(sets, 1, "second", ("b",))
    assert not new
    assert again == first
    assert sets.used() == (1, first.bytes)


def test_what_is_not_there(sets):
    assert sets.record("0" * 64) is None
    assert sets.content("0" * 64) is None
    assert sets.summary("0" * 64) is None
    assert not sets.delete("0" * 64)


def test_a_deleted_set_leaves_nothing_behind(sets, database):
    record, _ = keep(sets, 1, tags=("a",))
    other, _ = keep(sets, 2)
    assert sets.delete(record.id)
    assert sets.record(record.id) is None
    with database.reading() as connection:
        assert not connection.execute(select(TAGS)).all()
        assert {row.number for row in connection.execute(select(CONTENTS.c.number))} == {other.number}
    assert keep(sets, 1)[1], "it can be sent anew"


def test_the_list_is_read_in_parts(sets):
    records = [keep(sets, seed, f"film {seed}")[0] for seed in range(7)]
    seen, after = [], None
    for _ in range(4):
        page = sets.page(limit=2, after=after)
        assert page.total == 7
        seen += page.records
        after = page.after
    assert after is None
    assert seen == records[::-1]


def test_a_part_is_not_disturbed_by_what_is_sent_meanwhile(sets):
    for seed in range(4):
        keep(sets, seed)
    first = sets.page(limit=2)
    keep(sets, 9)
    sets.delete(first.records[0].id)
    second = sets.page(limit=2, after=first.after)
    assert [one.id for one in second.records] == [content(1).id, content(0).id]


@pytest.mark.parametrize(
    ("search", "found"),
    [
        ("kl", {1, 2}),
        ("KL-2", {2}),
        ("ÉTÉ", {3}),
        ("%", {4}),
        ("_", {4}),
        ("\\", {4}),
        ("", {1, 2, 3, 4}),
        ("nothing such", set()),
    ],
)
def test_sets_are_found_by_text(sets, search, found):
    for seed, name in enumerate(("film KL-1", "film kl-2", "Été", "100 %_\\"), start=1):
        keep(sets, seed, name)
    page = sets.page(limit=10, search=search)
    assert {one.id for one in page.records} == {content(seed).id for seed in found}
    assert page.total == len(found)


def test_sets_are_found_by_the_beginning_of_their_id_and_by_their_file(sets):
    record, _ = keep(sets, 1)
    other, _ = sets.keep(file_content(), Labels(name="x"), replace(FACTS, file="Run7.CIF"), b"{}")
    assert sets.page(limit=5, search=record.id[:9]).records == (record,)
    assert sets.page(limit=5, search="run7.cif").records == (other,)


def test_sets_are_found_by_tags(sets):
    keep(sets, 1, tags=("film", "dry"))
    keep(sets, 2, tags=("film",))
    keep(sets, 3)
    assert {one.id for one in sets.page(limit=5, tags=["film"]).records} == {content(1).id, content(2).id}
    assert {one.id for one in sets.page(limit=5, tags=["film", "dry"]).records} == {content(1).id}
    assert sets.page(limit=5, tags=["fil"]).total == 0


def test_the_number_of_sets_is_bounded(database):
    sets = Sets(database, Quota(2, 10**9))
    keep(sets, 1)
    keep(sets, 2)
    with pytest.raises(Problem) as caught:
        keep(sets, 3)
    assert caught.value.status == 507
    assert not keep(sets, 2)[1], "what is there may be sent again"
    sets.delete(content(1).id)
    assert keep(sets, 3)[1]


def test_the_bytes_are_bounded(database):
    size = content(1).bytes
    sets = Sets(database, Quota(10, 2 * size + 1))
    keep(sets, 1)
    keep(sets, 2)
    with pytest.raises(Problem) as caught:
        keep(sets, 3)
    assert caught.value.status == 507
    assert sets.used() == (2, 2 * size)


def test_damage_is_found(sets, database):
    record, _ = keep(sets, 1)
    with database.writing() as connection:
        wrong = content(2).parts["amplitude"].data
        connection.execute(update(CONTENTS).where(CONTENTS.c.part == "amplitude").values(data=wrong))
    with pytest.raises(Problem, match="damaged"):
        sets.content(record.id)


def test_a_full_disk_is_a_problem_and_loses_nothing(tmp_path):
    made = open_database(tmp_path, None)
    sets = Sets(made, AMPLE)
    kept, _ = keep(sets, 1)

    # The library answers so when its file may not grow, whatever keeps it from growing.
    @event.listens_for(made._engine, "begin")
    def _no_more_pages(connection):
        pages = connection.exec_driver_sql("PRAGMA page_count").scalar_one()
        connection.exec_driver_sql(f"PRAGMA max_page_count={pages}")

    big = content(2, rows=50_000)
    with pytest.raises(Problem) as caught:
        sets.keep(big, Labels(name="big"), FACTS, b"{}")
    assert caught.value.status == 507
    assert sets.record(big.id) is None
    assert sets.content(kept.id) == content(1)
    assert sets.used() == (1, kept.bytes)
    made.close()


def test_many_who_send_at_once_are_all_answered(address, database):
    """Several connections, as of several server processes; some send the same set."""
    others = [database_module.attach_database(*address) for _ in range(4)]
    answers, faults = [], []

    def send(one, number):
        sets = Sets(one, AMPLE)
        try:
            answers.extend(keep(sets, seed) for seed in (0, *range(10 * number, 10 * number + 5)))
        except BaseException as fault:  # noqa: BLE001 - told below
            faults.append(fault)

    threads = [threading.Thread(target=send, args=(one, number)) for number, one in enumerate(others, start=1)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join(60)
    assert not faults
    assert sum(new for _, new in answers) == 21
    assert Sets(database, AMPLE).used()[0] == 21
    for record, _ in answers:
        assert Sets(database, AMPLE).content(record.id) is not None
    for one in others:
        one.close()
