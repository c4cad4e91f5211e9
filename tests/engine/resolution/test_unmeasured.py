"""Missing terms: which they are, what random phases of theirs do, how far they could go."""

from __future__ import annotations

import math

import numpy as np
import pytest

from engine import Lattice, TooLargeError
from engine.resolution import Envelope, largest, missing_beyond, missing_inside, unmeasured
from engine.scattering import composition
from engine.symmetry import expand, space_group, unique_reflections
from engine.uncertainty import PointDerivatives, covariance, errors_of
from tests.engine.resolution.sets import ball_indices, coefficient_set
from tests.engine.symmetry import crystals
from tests.strategies import LATTICES, refusal_of

BOUND = Envelope.from_bound(0.3, 6.0)


def variance_at(terms, points):
    return np.diag(covariance(errors_of(terms), PointDerivatives(np.asarray(points))))


def keys(indices):
    return set(map(tuple, indices.tolist()))


@pytest.mark.parametrize("real", [True, False])
@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_inside_and_beyond_are_what_is_not_there(dimension, real):
    lattice = LATTICES[dimension]
    d_min = {1: 3.0, 2: 2.5, 3: 2.1}[dimension]

    def ball(d):
        made = ball_indices(lattice, d)
        return made if real else np.concatenate([made, -made[made.any(axis=1)]])

    full, wide = ball(d_min), ball(d_min / 1.4)
    outer = lattice.spacings(full).min()
    rng = np.random.default_rng(3)
    kept = (rng.random(len(full)) < 0.7) | (lattice.spacings(full) <= outer * 1.0001)
    given = coefficient_set(lattice, full[kept], real=real)
    inside = missing_inside(given, BOUND)
    beyond = missing_beyond(given, BOUND, d_min / 1.4)
    zero = {(0,) * dimension}
    assert keys(inside.indices) == keys(full) - keys(full[kept]) - zero
    assert keys(beyond.indices) == keys(wide) - keys(full)
    for part in (inside, beyond):
        assert np.array_equal(part.indices, part.indices[np.lexsort(part.indices.T[::-1])])
        assert np.abs(part.values) == pytest.approx(0.3 * np.exp(-6 * lattice.sine_over_wavelength(part.indices) ** 2))
        assert np.all(part.merit == 0)
        assert part.phase_known.all()
        assert part.sigma is None
        assert part.real == real
    double = 2 if real else 1
    assert largest(beyond, BOUND) == pytest.approx(double * np.abs(beyond.values).sum())
    whole = coefficient_set(lattice, full, real=real)
    assert missing_inside(whole, BOUND) is None
    assert largest(None, BOUND) == 0.0


@pytest.mark.parametrize("symbol", ["P1", "P212121", "P21/c", "I41", "P3121"])
def test_the_variance_is_that_of_random_phases(symbol):
    """Monte Carlo: each independent missing term gets a random phase (a sign where centric), symmetry the rest."""
    group = space_group(symbol)
    lattice = crystals.cell_of(group, volume_per_axis=8.0)
    unique = unique_reflections(lattice, group, 2.0, friedel=True)
    every = expand(crystals.reflections_of(lattice, unique, observed=np.ones(len(unique))), group).reflections.indices
    spacing = lattice.spacings(every)
    rng = np.random.default_rng(11)
    # Whole orbits are left out: nothing but the outermost shell is measured.
    measured = spacing < np.quantile(spacing, 0.4)
    given = coefficient_set(lattice, every[measured], group=group)
    missing = missing_inside(given, BOUND)
    assert keys(missing.indices) == keys(every[~measured])
    points = np.concatenate([rng.random((3, 3)), [[0.0, 0, 0], [0, 0, 0.3]]])
    expected = variance_at(missing, points)

    strengths = dict(zip(map(tuple, missing.indices.tolist()), np.abs(missing.values), strict=True))
    trials = 3000
    plain = crystals.plain_asymmetric(missing.indices, group, friedel=True)
    fields = np.zeros((trials, len(points)))
    for h in plain:
        amplitude = strengths[tuple(h.tolist())]
        # A random density with one orbit: n = Σ over the operations of a wave with a random phase.
        angle = 2 * np.pi * rng.random(trials)
        waves = np.array(
            [2 * np.pi * (points @ r.T + t) @ h for r, t in zip(group.rotations, group.translations, strict=True)]
        )
        made = np.cos(waves[None] + angle[:, None, None]).sum(axis=1)
        # Scaled so that |n_h| is the one expected: of a centric term only its sign is left of the random phase.
        coefficient = np.zeros(trials, dtype=complex)
        for r, t in zip(group.rotations, group.translations, strict=True):
            image = h @ r
            phase = 2 * np.pi * t @ h
            if np.array_equal(image, h):
                coefficient += 0.5 * np.exp(1j * (angle + phase))
            if np.array_equal(image, -h):
                coefficient += 0.5 * np.exp(-1j * (angle + phase))
        size = np.abs(coefficient)
        made = made / np.where(size > 1e-12, size, 1)[:, None]
        fields += amplitude * made
    assert expected == pytest.approx(fields.var(axis=0), rel=0.12)


def test_without_symmetry_the_variance_is_the_same_everywhere():
    lattice = LATTICES[3]
    given = coefficient_set(lattice, ball_indices(lattice, 2.5))
    terms = missing_beyond(given, BOUND, 1.5)
    found = variance_at(terms, np.random.default_rng(0).random((4, 3)))
    assert found == pytest.approx(np.full(4, 2 * (np.abs(terms.values) ** 2).sum()), rel=1e-9)


@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_what_is_listed_and_the_tail_add_up(dimension):
    """Wherever the list ends, terms and integral together make the same variance and the same bound."""
    lattice = {
        1: Lattice.from_period(300.0),
        2: Lattice.from_planar_parameters(61, 73, 100),
        3: Lattice.from_parameters(17, 19, 22, 82, 97, 105),
    }[dimension]
    given = coefficient_set(lattice, ball_indices(lattice, 4.0))
    outer = 2 * math.pi / lattice.magnitudes(given.indices).max()
    envelope = Envelope.from_bound(0.3, 20.0)
    totals = []
    for d_stop in (outer / 1.01, outer / 1.6, outer / 2.2, None):
        found = unmeasured(given, envelope, d_stop)
        listed = 0.0 if found.beyond is None else 2 * float((np.abs(found.beyond.values) ** 2).sum())
        totals.append((listed + found.tail_variance, found.largest_beyond, found.tail_variance))
    totals = np.array(totals)
    assert totals[:, 0] == pytest.approx(np.full(4, totals[2, 0]), rel=0.03)
    assert totals[:, 1] == pytest.approx(np.full(4, totals[2, 1]), rel=0.03)
    # Left to itself the list ends where a thousandth remains.
    assert totals[3, 2] == pytest.approx(1e-3 * totals[3, 0], rel=0.03)
    # Against plain numbers: all terms out to where nothing is left.
    far = ball_indices(lattice, 0.9)
    far = far[lattice.spacings(far) < outer * 0.99999]
    plain = 0.3 * np.exp(-20 * lattice.sine_over_wavelength(far) ** 2)
    assert totals[3, 0] == pytest.approx(2 * (plain**2).sum(), rel=2e-3)


def test_the_count_ends_the_list_and_says_so():
    lattice = Lattice.from_parameters(17, 19, 22, 82, 97, 105)
    given = coefficient_set(lattice, ball_indices(lattice, 2.0))
    free = unmeasured(given, Envelope.from_bound(0.3, 4.0))
    tight = unmeasured(given, Envelope.from_bound(0.3, 4.0), max_terms=1500)
    assert free.beyond.count > 3000
    assert 1000 < tight.beyond.count <= 1500
    assert any("1500" in word for word in tight.words)
    assert not any("1500" in word for word in free.words)
    whole = [2 * (np.abs(x.beyond.values) ** 2).sum() + x.tail_variance for x in (free, tight)]
    assert whole[0] == pytest.approx(whole[1], rel=0.02)


def test_terms_without_phase_keep_their_strength():
    lattice = Lattice.from_period(60.0)
    known = np.array([True, False, True, True, True, False])
    values = np.array([1, 0.11, 1, 1, 1, 0.07])
    # Orders 1, 2, 3, 5, 6 and 7: 4 is missing, 7 lies beyond those with a phase.
    given = coefficient_set(lattice, np.array([[1], [2], [3], [5], [6], [7]]), values=values, known=known)
    found = unmeasured(given, BOUND, 60 / 9.5)
    inside = dict(zip(found.inside.indices[:, 0].tolist(), np.abs(found.inside.values), strict=True))
    beyond = dict(zip(found.beyond.indices[:, 0].tolist(), np.abs(found.beyond.values), strict=True))

    def expected(l):
        return 0.3 * math.exp(-6 * (l / 120) ** 2)

    assert inside == {2: pytest.approx(0.11), 4: pytest.approx(expected(4))}
    assert beyond == {7: pytest.approx(0.07), 8: pytest.approx(expected(8)), 9: pytest.approx(expected(9))}
    assert found.largest_inside == pytest.approx(2 * (0.11 + expected(4)))
    assert any("2 terms were measured without a phase" in word for word in found.words)
    assert any("mean density" in word for word in found.words)


def test_a_composition_in_electrons():
    """Atoms at random in P1: the variance of their density's missing part, by many structures."""
    lattice = Lattice.from_parameters(6.0, 6.5, 7.0, 90, 100, 90)
    given = coefficient_set(lattice, ball_indices(lattice, 1.6), unit="e/Å³")
    envelope = Envelope.from_composition(composition("O"), 4.0, units=12)
    found = unmeasured(given, envelope, 1.0)
    assert found.inside is None
    # The largest change that is possible exceeds what is likely by far, and holds for any structure.
    listed = found.beyond
    sigma = math.sqrt(2 * (np.abs(listed.values) ** 2).sum())
    assert found.largest_beyond > 10 * sigma
    rng = np.random.default_rng(5)
    s = lattice.sine_over_wavelength(listed.indices)
    single = envelope.bound_at(given, s) / 12
    point = np.zeros(3)
    deviations = []
    for _ in range(250):
        atoms = rng.random((12, 3))
        n = single * np.exp(-2j * np.pi * listed.indices @ atoms.T).sum(axis=1)
        deviations.append(2 * float((n * np.exp(2j * np.pi * listed.indices @ point)).sum().real))
    assert np.std(deviations) == pytest.approx(sigma, rel=0.2)
    assert np.abs(deviations).max() < found.largest_beyond


def test_a_profile_lacks_only_its_own_orders():
    lattice = Lattice.from_parameters(5, 5, 90, 90, 90, 120)
    orders = np.array([[0, 0, l] for l in (0, 1, 2, 4, 5)])
    found = unmeasured(coefficient_set(lattice, orders), BOUND, 90 / 8.5)
    assert found.inside.indices.tolist() == [[0, 0, 3]]
    assert found.beyond.indices.tolist() == [[0, 0, 6], [0, 0, 7], [0, 0, 8]]
    row = unmeasured(coefficient_set(Lattice.from_period(90), orders[:, 2:]), BOUND, 90 / 8.5)
    assert found.tail_variance == pytest.approx(row.tail_variance, rel=1e-9)


def test_forbidden_terms_are_not_missing():
    group = space_group("I222")
    lattice = Lattice.from_parameters(9, 10, 11, 90, 90, 90)
    full = ball_indices(lattice, 2.0)
    allowed = full[full.sum(axis=1) % 2 == 0]
    given = coefficient_set(lattice, allowed, group=group)
    assert missing_inside(given, BOUND) is None
    beyond = missing_beyond(given, BOUND, 1.6)
    assert np.all(beyond.indices.sum(axis=1) % 2 == 0)
    assert beyond.group is group


def test_what_is_out_of_bounds_is_refused():
    lattice = LATTICES[3]
    given = coefficient_set(lattice, ball_indices(lattice, 2.0))
    refusal = refusal_of(lambda: unmeasured(given, BOUND, 0.2, max_terms=1000))
    assert isinstance(refusal, TooLargeError)
    assert refusal.path == ("d_stop",)
    some = given.select(np.arange(given.count) % 40 == 0)
    lacking = missing_inside(some, BOUND).count
    assert missing_inside(some, BOUND, max_terms=lacking).count == lacking
    refusal = refusal_of(lambda: missing_inside(some, BOUND, max_terms=lacking - 1))
    assert (type(refusal), refusal.path) == (TooLargeError, ("d_min",))
    assert refusal_of(lambda: missing_beyond(given, BOUND, 3.0)).path == ("d_stop",)
    assert refusal_of(lambda: unmeasured(given, BOUND, -1.0)).path == ("d_stop",)
    assert refusal_of(lambda: unmeasured(given, BOUND, max_terms=0)).path == ("max_terms",)
    zero = coefficient_set(lattice, np.zeros((1, 3), dtype=np.int64))
    assert refusal_of(lambda: unmeasured(zero, BOUND)).path == ("phase_deg",)
    # Nothing is allocated on the way: a cell of half a millimetre, in no time.
    huge = Lattice.from_parameters(5e6, 5e6, 5e6, 90, 90, 90)
    wide = coefficient_set(huge, np.array([[1000000, 0, 0], [0, 1000000, 0], [0, 0, 1000000]]))
    assert isinstance(refusal_of(lambda: unmeasured(wide, BOUND)), TooLargeError)
