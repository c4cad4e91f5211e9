"""Words and files of a result."""

from __future__ import annotations

import pytest

from engine import InputError
from tests.engine.films.swelling.test_joint import humidity, joint_signs


def test_merit_goes_to_its_order():
    made = joint_signs(humidity()[0])
    mine = made.coefficients(3, mean=0.3)
    merit = dict(zip(mine.indices[:, 0].tolist(), mine.merit.tolist(), strict=True))
    assert merit == {0: 1.0, **dict(zip(made.orders[3].order.tolist(), made.merit[3].tolist(), strict=True))}


@pytest.mark.parametrize("call", [lambda made: made.coefficients(4), lambda made: made.coefficients(0, undecided="?")])
def test_refusals(call):
    with pytest.raises(InputError):
        call(joint_signs(humidity()[0]))
