from __future__ import annotations

import pytest

from service.spool import Spool
from service.store.parcel import Parcel, pack, unpack
from service.store.records import Labels
from tests.service.store.made import FACTS, content, file_content


@pytest.mark.parametrize("whole", [content(), content(rows=4000), file_content(), file_content(b"")])
@pytest.mark.parametrize("labels", [Labels(name="film ü"), Labels(name="x", tags=("a", "b"))])
def test_a_parcel_arrives_as_it_was_sent(whole, labels):
    sent = Parcel(whole, labels, FACTS, '{"warnings":["ü"]}'.encode())
    with Spool.unnamed() as spool:
        pack(sent, spool)
        assert unpack(spool.view()) == sent
