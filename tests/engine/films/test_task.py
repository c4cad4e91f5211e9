"""Tasks: what is not asked for is not done."""

from __future__ import annotations

import dataclasses

import pytest

from engine.films.scans import Scan
from engine.films.signs import DECISIVE
from engine.films.task import FilmTask, Region

SCAN = Scan.of(q=[0.3, 0.6], intensity=[9.0, 4.0], intensity_sigma=[0.1, 0.1])


def test_nothing_is_done_unasked():
    task = FilmTask(scan=SCAN)
    assert not any([task.zero_shift, task.displacement, task.corrections, task.facts, task.regions])
    assert task.phases_deg is task.criteria is task.content is task.envelope is task.critical_q is None
    assert task.unit == "arbitrary"
    assert task.window.kind == "none"
    assert task.decisive == DECISIVE


def test_tasks_do_not_share_what_they_hold_and_cannot_be_changed():
    one, other = FilmTask(scan=SCAN), FilmTask(scan=SCAN)
    assert one.fixed is not other.fixed
    with pytest.raises(dataclasses.FrozenInstanceError):
        one.unit = "e/Å³"
    assert Region(name="sheet", start=-1.0, end=1.0) == Region(name="sheet", start=-1.0, end=1.0)
