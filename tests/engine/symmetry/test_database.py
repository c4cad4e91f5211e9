"""What is asked of the reference library, and what happens where it has no answer."""

from __future__ import annotations

import numpy as np
import pytest

from engine import TransformError
from engine.symmetry.database import setting, setting_operations


def test_names_of_a_setting():
    """Number 14 with cell choice 2: International Tables A."""
    found = setting(82)
    assert (found.number, found.full, found.hall, found.choice) == (14, "P 1 21/n 1", "-P 2yn", "b2")
    assert found.names[0] == "P21/c"


def test_operations_of_a_setting():
    rotations, translations = setting_operations(2)
    np.testing.assert_array_equal(rotations, [np.eye(3), -np.eye(3)])
    assert not translations.any()


@pytest.mark.parametrize("call", [setting, setting_operations])
def test_a_setting_that_the_library_does_not_know(call):
    with pytest.raises(TransformError, match="531"):
        call(531)
