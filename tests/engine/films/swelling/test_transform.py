"""The continuous transform of a bounded layer from its values at even q."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import integrate

from engine import InputError
from engine.films.swelling import LayerTransform
from engine.films.swelling.transform import basis, basis_slope, node_count

D = 30.0


def bump(z):
    """Smooth, even, zero outside |z| = D/2 with all slopes up to the fifth."""
    return np.where(np.abs(z) < D / 2, (1 - (2 * z / D) ** 2) ** 6 * (1 + 4 * np.cos(0.9 * z)), 0.0)


def quadrature(q):
    return np.array([2 * integrate.quad(lambda z, k: bump(z) * np.cos(k * z), 0, D / 2, (k,), limit=300)[0] for k in q])


def made(count=40):
    nodes = quadrature(2 * np.pi * np.arange(count) / D)
    return LayerTransform(thickness=D, value=nodes, covariance=np.zeros((count, count)), largest=5.0)


def test_it_is_the_transform_between_the_nodes():
    q = np.random.default_rng(0).uniform(0, 5, 25)
    np.testing.assert_allclose(made().at(q)[0], quadrature(q), atol=1e-6)


def test_it_is_even():
    q = np.linspace(0, 3, 17)
    np.testing.assert_allclose(made().at(-q)[0], made().at(q)[0], rtol=1e-12)


def test_its_layer_is_the_layer():
    z = np.linspace(-25, 25, 101)
    np.testing.assert_allclose(made().contrast(z)[0], bump(z), atol=1e-6)


def test_slope_is_the_derivative():
    q, step = np.concatenate([np.random.default_rng(1).uniform(0, 3, 20), [0.0, 2 * np.pi / D]]), 1e-6
    expected = (basis(q + step, D, 12) - basis(q - step, D, 12)) / (2 * step)
    np.testing.assert_allclose(basis_slope(q, D, 12), expected, atol=1e-7)


def test_at_a_node_only_that_node_counts():
    np.testing.assert_allclose(basis(2 * np.pi * np.arange(9) / D, D, 9), np.eye(9), atol=1e-12)


def test_uncertainties_are_those_of_many_draws():
    rng = np.random.default_rng(2)
    root = rng.normal(size=(6, 6))
    value, q, z = rng.normal(size=6), np.array([0.1, 0.35, 0.9]), np.array([0.0, 4.4, 14.0, 20.0])
    base = LayerTransform(thickness=D, value=value, covariance=root @ root.T, largest=1.0)
    draws = [
        LayerTransform(thickness=D, value=value + root @ rng.normal(size=6), covariance=root @ root.T, largest=1.0)
        for _ in range(2000)
    ]
    np.testing.assert_allclose(np.std([one.at(q)[0] for one in draws], axis=0), base.at(q)[1], rtol=0.05)
    spread = np.std([one.contrast(z)[0] for one in draws], axis=0)
    np.testing.assert_allclose(spread, base.contrast(z)[1], rtol=0.05)


def test_nodes_reach_beyond_the_largest_q():
    assert 2 * np.pi * (node_count(2.0, D) - 1) / D > 2.0


@pytest.mark.parametrize("bad", [[np.nan], [[0.1, 0.2], [0.3, 0.4]]])
def test_refusals(bad):
    with pytest.raises(InputError):
        made().at(bad)
    with pytest.raises(InputError):
        made().contrast(bad)
