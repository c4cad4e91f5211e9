from __future__ import annotations

import io

import numpy as np

from engine.readers import read_npz
from service.schemas.coefficient_set import COLUMN_NAMES
from service.store.rows import columns_archive
from tests.service.store.made import content


def test_the_archive_holds_the_columns_bit_for_bit():
    whole = content(3, rows=50)
    data = columns_archive(whole)
    with np.load(io.BytesIO(data), allow_pickle=False) as archive:
        assert set(archive.files) == {"l", "amplitude", "phase_deg"}
        for name in archive.files:
            assert archive[name].tobytes() == whole.parts[name].data


def test_the_archive_can_be_sent_again():
    whole = content(3, rows=50)
    columns = read_npz(columns_archive(whole), COLUMN_NAMES, max_bytes=10**6)
    assert {name: column.tobytes() for name, column in columns.items()} == {
        name: part.data for name, part in whole.parts.items() if name != "document"
    }
