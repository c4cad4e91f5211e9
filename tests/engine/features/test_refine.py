import numpy as np
import pytest

from engine.features.jets import JetField
from engine.features.refine import newton_steps, refine, thinned
from engine.series import Series
from tests.engine.features.densities import plain_jet, random_set
from tests.strategies import LATTICES


@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_it_ends_where_the_gradient_vanishes(dimension):
    coefficients, made = random_set(dimension, 8)
    field = JetField.of(coefficients.series())
    starts = np.random.default_rng(3).random((60, dimension))
    done = refine(field, starts, radius=0.5, reach=5.0)
    assert done.positions.shape[0] + done.wandered + done.unsettled == 60
    assert done.positions.shape[0] > 20
    for x, index, row in zip(done.positions, done.index, done.rows, strict=True):
        _, gradient, hessian = plain_jet(made, x)
        assert np.linalg.norm(np.linalg.solve(hessian, gradient)) < 2e-9
        assert np.count_nonzero(np.linalg.eigvalsh(hessian) < 0) == index
        assert np.linalg.norm((x - starts[row]) @ made.lattice.vectors) < 5.0


def test_a_step_is_newtons_or_as_long_as_allowed():
    rng = np.random.default_rng(5)
    hessian = rng.normal(size=(50, 3, 3))
    hessian += hessian.transpose(0, 2, 1)
    gradient = rng.normal(size=(50, 3))
    steps, length, negative = newton_steps(gradient, hessian, 0.7)
    full = -np.linalg.solve(hessian, gradient[..., None])[..., 0]
    np.testing.assert_allclose(length, np.linalg.norm(full, axis=1))
    np.testing.assert_allclose(steps, full * np.minimum(1, 0.7 / length)[:, None], atol=1e-12)
    np.testing.assert_array_equal(negative, (np.linalg.eigvalsh(hessian) < 0).sum(axis=1))


def test_a_hessian_of_zeros_gives_a_finite_step():
    steps, _, _ = newton_steps(np.ones((1, 3)), np.zeros((1, 3, 3)), 0.5)
    assert np.linalg.norm(steps) <= 0.5 + 1e-12


def test_thinning_keeps_one_to_a_cell_and_kind():
    lattice = LATTICES[3]
    x = np.repeat(np.random.default_rng(1).random((30, 3)), 4, axis=0)
    kind = np.tile([0, 0, 1, 1], 30)
    kept = thinned(lattice, x + np.repeat(np.arange(30), 4)[:, None] % 3, kind, 1e-3)
    assert len(kept) == 60


@pytest.mark.parametrize("seek", [1, -1])
def test_uphill_leads_to_maxima_alone_and_downhill_to_minima(seek):
    coefficients, made = random_set(2, 8)
    field = JetField.of(coefficients.series())
    starts = np.random.default_rng(3).random((80, 2))
    done = refine(field, starts, radius=0.5, reach=30.0, seek=seek)
    assert done.positions.shape[0] > 70
    assert set(done.index.tolist()) == {2 if seek == 1 else 0}
    for x, row in zip(done.positions, done.rows, strict=True):
        assert seek * (plain_jet(made, x)[0] - plain_jet(made, starts[row])[0]) > -1e-9


def test_a_saddle_exactly_is_left_where_maxima_are_sought():
    """cos x + cos y at (½, 0): the slope is zero and there is no uphill."""
    indices = np.array([[0, 1], [1, 0]])
    field = JetField.of(Series(LATTICES[2], indices, np.full(2, 0.5 + 0j), real=True))
    starts = np.array([[0.5, 0.0], [0.0, 0.0], [0.5, 0.5]])
    done = refine(field, starts, radius=0.5, reach=30.0, seek=1)
    assert done.rows.tolist() == [1]
    assert done.unsettled == 2


def test_steps_that_lead_nowhere_are_halved():
    """Without a trust radius to speak of: of sixty starts more than forty still arrive, thirty if none were halved."""
    coefficients, _ = random_set(2, 8)
    field = JetField.of(coefficients.series())
    starts = np.random.default_rng(3).random((60, 2))
    assert refine(field, starts, radius=50.0, reach=1e3).positions.shape[0] > 40
