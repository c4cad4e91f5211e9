"""What the border lets through, and what it names when it does not."""

from __future__ import annotations

import numpy as np
import pytest

from engine.amplitudes.checks import as_flags, as_weights, require_intensities, require_no_zero_term, require_sigma
from engine.errors import InputError
from tests.engine.amplitudes.simulated import reflections, stack


def test_what_is_left_out_is_neutral():
    given = stack([1.0, 2.0])
    assert as_weights(None, given, "epsilon").tolist() == [1.0, 1.0]
    assert as_flags(None, given, "centric").tolist() == [False, False]


def test_good_input_passes_unchanged():
    given = stack([1.0, 2.0], [0.1, 0.2])
    require_intensities(given)
    require_no_zero_term(given)
    assert require_sigma(given).tolist() == [0.1, 0.2]
    assert as_weights([2, 4], given, "epsilon").tolist() == [2.0, 4.0]
    assert as_flags([True, False], given, "centric").tolist() == [True, False]


@pytest.mark.parametrize(
    ("call", "path", "rows"),
    [
        (lambda: require_intensities(stack([1.0], quantity="amplitude")), ("reflections",), ()),
        (lambda: require_no_zero_term(reflections([[1, 0, 0], [0, 0, 0]], [1, 1])), ("indices",), (1,)),
        (lambda: require_sigma(stack([1.0])), ("sigma",), ()),
        (lambda: require_sigma(stack([1.0, 1.0, 1.0], [1.0, np.nan, 0.0])), ("sigma",), (1, 2)),
        (lambda: as_weights([1.0, 0.0], stack([1.0, 1.0]), "epsilon"), ("epsilon",), (1,)),
        (lambda: as_weights([1.0, np.nan], stack([1.0, 1.0]), "epsilon"), ("epsilon", 1), ()),
        (lambda: as_flags([0, 1], stack([1.0, 1.0]), "centric"), ("centric",), ()),
    ],
)
def test_refusals(call, path, rows):
    with pytest.raises(InputError) as fault:
        call()
    assert fault.value.path == path
    assert fault.value.rows == rows
