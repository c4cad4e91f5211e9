from __future__ import annotations

import numpy as np
import pytest

from engine.surfaces import volume
from engine.surfaces.volume import JITTER, LEAST, above, padded_shape, signed_bytes

OPEN = (False, False, False)
VALUES = np.random.default_rng(3).normal(size=(4, 5, 6))


@pytest.mark.parametrize("slab", [1, 30, 1 << 18])
@pytest.mark.parametrize("closed", [False, True])
@pytest.mark.parametrize("wrapped", [OPEN, (True, False, True), (True, True, True)])
def test_signs_are_those_of_the_values_about_the_level(monkeypatch, slab, closed, wrapped):
    monkeypatch.setattr(volume, "SLAB", slab)
    found = above(VALUES, 0.3, wrapped, closed=closed, tie=0.0)
    whole = np.pad(VALUES, [(0, wrap) for wrap in wrapped], mode="wrap") > 0.3
    whole = np.pad(whole, int(closed))
    np.testing.assert_array_equal(found.signed > 0, whole)
    assert found.signed.shape == padded_shape(
        tuple(n + w for n, w in zip(VALUES.shape, wrapped, strict=True)), closed=closed
    )
    crossings = sum(np.count_nonzero(np.diff(whole.astype(int), axis=axis)) for axis in range(3))
    assert (found.crossings, found.padding) == (crossings, int(closed))


def test_sizes_are_proportional_but_not_too_small():
    found = above(VALUES, 0.0, OPEN, closed=False, tie=0.0)
    expected = np.maximum(np.abs(VALUES) / np.abs(VALUES).max() / LEAST, 1)
    np.testing.assert_allclose(np.abs(found.signed), expected, rtol=1.1 * JITTER)
    assert np.abs(found.signed).min() >= 1


def test_copies_of_a_plane_are_exact():
    signed = above(VALUES, 0.0, (True, True, True), closed=False, tie=0.0).signed
    for axis in range(3):
        np.testing.assert_array_equal(signed.take(0, axis), signed.take(-1, axis))


def test_what_is_below_by_its_error_alone_counts_as_above():
    values = np.array([[[0.0, -1e-13], [1.0, -1.0]], [[-1e-11, 1.0], [1.0, 1.0]]])
    signed = above(values, 0.0, OPEN, closed=False, tie=1e-12).signed
    np.testing.assert_array_equal(signed > 0, [[[True, True], [True, False]], [[False, True], [True, True]]])


def test_single_precision_is_taken():
    signed = above(VALUES.astype(np.float32), 0.0, OPEN, closed=False, tie=0.0).signed
    np.testing.assert_array_equal(signed > 0, VALUES > 0)


def test_memory_is_foreseen():
    found = above(VALUES, 0.0, OPEN, closed=True, tie=0.0)
    assert found.signed.nbytes <= signed_bytes(VALUES.shape, closed=True)
