"""Numbers gathered while a field is computed."""

from __future__ import annotations

import math

import numpy as np
import pytest

from engine.statistics import Tracker


def gathered(values, pieces=1):
    tracker = Tracker()
    for piece in np.array_split(values, pieces):
        tracker.add(piece)
    return tracker.statistics()


@pytest.mark.parametrize("pieces", [1, 3, 10])
@pytest.mark.parametrize("shape", [(40,), (12, 7), (10, 4, 5)])
@pytest.mark.parametrize("dtype", [np.float64, np.float32])
def test_real_values(dtype, shape, pieces):
    values = np.random.default_rng(1).normal(3.0, 2.0, shape).astype(dtype)
    made = gathered(values, pieces)
    bound = 1e-14 if dtype == np.float64 else 1e-6
    assert made.minimum == values.min()
    assert made.maximum == values.max()
    assert made.mean == pytest.approx(values.mean(dtype=np.float64), rel=1e-14)
    assert made.rms == pytest.approx(math.sqrt((values.astype(float) ** 2).mean()), rel=bound)
    assert type(made.mean) is float


@pytest.mark.parametrize("pieces", [1, 3])
@pytest.mark.parametrize("dtype", [np.complex128, np.complex64])
def test_complex_values(dtype, pieces):
    rng = np.random.default_rng(2)
    values = (rng.normal(size=(9, 8)) + 1j * rng.normal(size=(9, 8))).astype(dtype)
    made = gathered(values, pieces)
    assert made.minimum == np.abs(values).min()
    assert made.maximum == np.abs(values).max()
    assert made.mean == pytest.approx(complex(values.astype(complex).mean()), rel=1e-13)
    assert made.rms == pytest.approx(math.sqrt((np.abs(values.astype(complex)) ** 2).mean()), rel=1e-6)


def test_a_complex_field_of_real_mean():
    made = gathered(np.array([1j, -1j, 3 + 0j]))
    assert made.mean == 1.0
    assert type(made.mean) is float


def test_values_in_strided_memory():
    values = np.random.default_rng(3).normal(size=(6, 5, 3))
    made = gathered(values[..., 1])
    assert made.rms == pytest.approx(math.sqrt((values[..., 1] ** 2).mean()), rel=1e-14)
    assert made.maximum == values[..., 1].max()


@pytest.mark.parametrize("scale", [1e25, 1e-25, 1e19, 1e-19])
@pytest.mark.parametrize("dtype", [np.float32, np.complex64])
def test_squares_beyond_single_precision(dtype, scale):
    values = (scale * np.array([1.0, 2.0, -2.0])).astype(dtype)
    assert gathered(values).rms == pytest.approx(scale * math.sqrt(3), rel=1e-6)


def test_many_values_in_single_precision():
    """Squares are added up in single precision in blocks: some thousand ulp of 6e-8 at most."""
    values = (np.random.default_rng(4).random(1 << 21) + 5).astype(np.float32)
    assert gathered(values).rms == pytest.approx(math.sqrt((values.astype(float) ** 2).mean()), rel=1e-5)


def test_zeros():
    made = gathered(np.zeros((4, 5)))
    assert (made.minimum, made.maximum, made.mean, made.rms) == (0, 0, 0, 0)
