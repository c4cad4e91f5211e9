import numpy as np
import pytest

from engine.errors import TooLargeError
from engine.features.jets import JetField
from engine.features.regions import ball_region
from engine.features.search import Wanted, prepare_search, run
from engine.features.sites import Domain
from engine.symmetry import space_group
from tests.engine.features.densities import apart, gaussian_atoms, random_set, symmetric_set
from tests.strategies import CRYSTAL


def searched(coefficients, **wanted):
    field = JetField.of(coefficients.series())
    search = prepare_search(field, 2 * np.pi / field.g_max / 6)
    return run(search, Wanted(**wanted))


def found_of(coefficients, places, index):
    field = JetField.of(coefficients.series())
    kinds = (np.linalg.eigvalsh(field.at(places).hessian) < 0).sum(axis=1)
    return places[np.isin(kinds, index)]


def test_all_zeros_of_the_slope_of_a_stack():
    """Against sign changes of the plain derivative on two hundred thousand samples, for many stacks.

    In the last three a maximum and a minimum lie less than half a step of the grid apart.
    """
    x = np.arange(200_000) / 200_000
    for seed in (*range(20), 5201, 5541, 6028):
        coefficients, made = random_set(1, seed)
        waves = 2j * np.pi * made.indices[:, 0]
        modes = np.zeros(200_000, dtype=complex)
        modes[made.indices[:, 0]] = waves * made.values
        slope = (np.fft.ifft(modes) * 200_000).real
        crossings = x[np.sign(slope) != np.sign(np.roll(slope, -1))]
        places, _ = searched(coefficients, indices=(0, 1))
        gap = np.abs(places - crossings)
        gap = np.minimum(gap, 1 - gap)
        assert gap.min(axis=0).max() < 1e-5
        assert gap.min(axis=1).max() < 1e-5


@pytest.mark.parametrize("dimension", [2, 3])
def test_one_kind_alone_loses_none_of_it(dimension):
    for seed in range(4):
        coefficients, _ = random_set(dimension, 50 + seed)
        every, _ = searched(coefficients, indices=tuple(range(dimension + 1)))
        for index in (0, dimension):
            one, _ = searched(coefficients, indices=(index,))
            expected = found_of(coefficients, every, [index])
            assert len(expected)
            assert apart(coefficients.lattice, expected, one).min(axis=1).max() < 1e-6


def test_bounds_of_the_value_lose_none_within():
    coefficients, _ = random_set(3, 3)
    field = JetField.of(coefficients.series())
    every, _ = searched(coefficients, indices=(0, 1, 2, 3))
    values = field.at(every).value
    low, high = np.quantile(values, [0.6, 0.9])
    some, tally = searched(coefficients, indices=(0, 1, 2, 3), least=low, greatest=high)
    expected = every[(values >= low) & (values <= high)]
    assert apart(coefficients.lattice, expected, some).min(axis=1).max() < 1e-6
    assert tally.candidates < searched(coefficients, indices=(0, 1, 2, 3))[1].candidates


def test_a_region_loses_none_within():
    coefficients, _ = random_set(3, 6)
    every, _ = searched(coefficients, indices=(0, 1, 2, 3))
    region = ball_region(coefficients.lattice, [0.9, 0.1, 0.5], 3.0)
    some, tally = searched(coefficients, indices=(0, 1, 2, 3), region=region)
    expected = every[apart(coefficients.lattice, every, [[0.9, 0.1, 0.5]])[:, 0] < 3.0]
    assert len(expected)
    assert apart(coefficients.lattice, expected, some).min(axis=1).max() < 1e-6
    assert 2 * tally.candidates < searched(coefficients, indices=(0, 1, 2, 3))[1].candidates


def test_a_domain_loses_no_orbit():
    coefficients = symmetric_set(space_group(19), 2)
    group = coefficients.group
    every, _ = searched(coefficients, indices=(0, 1, 2, 3))
    some, tally = searched(coefficients, indices=(0, 1, 2, 3), domain=Domain(group))
    images = np.concatenate([some @ r.T + t for r, t in zip(group.rotations, group.translations, strict=True)])
    assert apart(coefficients.lattice, every, images).min(axis=1).max() < 1e-6
    assert tally.candidates < searched(coefficients, indices=(0, 1, 2, 3))[1].candidates


def test_the_cost_is_a_bound_that_is_kept():
    field = JetField.of(random_set(3, 1)[0].series())
    need = prepare_search(field, 0.4).bytes
    assert prepare_search(field, 0.4, need).bytes == need
    with pytest.raises(TooLargeError) as caught:
        prepare_search(field, 0.4, need - 1)
    assert caught.value.path == ("spacing",)
    assert prepare_search(field, 0.2).bytes > need


def test_progress_counts_planes_and_may_end_the_work():
    field = JetField.of(random_set(3, 1)[0].series())
    search = prepare_search(field, 0.5)
    seen = []
    run(search, Wanted(indices=(3,)), lambda done, total: seen.append((done, total)))
    assert seen[-1] == (search.grid.shape[0],) * 2
    assert [done for done, _ in seen] == sorted({done for done, _ in seen})

    def stop(done, total):
        raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        run(search, Wanted(indices=(3,)), stop)


def test_a_maximum_between_two_saddles_close_by_is_not_lost():
    """Atoms at random and ripples: the maxima found alone are those found among all."""
    rng = np.random.default_rng(4)
    coefficients = gaussian_atoms(CRYSTAL, rng.random((25, 3)), np.full(25, 6.0), 8.0, 2.1)
    every, _ = searched(coefficients, indices=(0, 1, 2, 3))
    one, _ = searched(coefficients, indices=(3,))
    expected = found_of(coefficients, every, [3])
    assert len(expected) > 60
    assert apart(coefficients.lattice, expected, one).min(axis=1).max() < 1e-6
