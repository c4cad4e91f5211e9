"""Sets along a variable, brought to one of them."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from engine.combination import AS_GIVEN, Variable, aligned, difference, fitted_scale, given_scale
from tests.engine.combination.crystals import measured, random_set, table
from tests.strategies import refusal_of

THREE = Variable.of("temperature", [100.0, 150, 200], "K")


def three(**options):
    return [random_set(seed=seed, **options) for seed in (1, 2, 3)]


def test_sets_share_the_terms_of_all():
    sets = three()
    made = aligned(sets, THREE, scale=given_scale(2.0), reference=1)
    tables = [table(one) for one in sets]
    common = set.intersection(*(set(one) for one in tables))
    for number, one in enumerate(made.sets):
        factor = 1 if number == 1 else 2
        found = table(one)
        assert found.keys() == common
        assert all(value == pytest.approx(factor * tables[number][h]) for h, value in found.items())
        rows = [list(tables[number]).index(h) for h in found]
        np.testing.assert_allclose(one.sigma, factor * sets[number].sigma[rows])
        np.testing.assert_array_equal(one.phase_sigma, sets[number].phase_sigma[rows])
        np.testing.assert_array_equal(one.indices, made.sets[0].indices)
    assert made.left_out == tuple(one.count - len(common) for one in sets)


def test_each_set_may_keep_its_own_terms():
    sets = three()
    sets[2] = replace(sets[2], phase_known=np.arange(sets[2].count) % 5 > 0)
    made = aligned(sets, THREE, scale=AS_GIVEN, common="each")
    for before, after in zip(sets, made.sets, strict=True):
        assert table(before.phased()) == table(after)
    assert made.left_out == (0, 0, sets[2].unphased)


def test_phases_of_the_reference():
    sets = three()
    made = aligned(sets, THREE, scale=AS_GIVEN, reference=2, phases="reference")
    donor = table(sets[2])
    for before, after in zip(sets, made.sets, strict=True):
        given = table(before)
        for h, value in table(after).items():
            wanted = given[h] if h == (0, 0, 0) else abs(given[h]) * donor[h] / abs(donor[h])
            assert value == pytest.approx(wanted, rel=1e-9)
    np.testing.assert_array_equal(made.sets[0].phase_sigma, made.sets[2].phase_sigma)


def test_scales_are_fitted_to_the_reference():
    base = replace(random_set(seed=1, share=1), scale_sigma=0.04)
    sets = [replace(base, values=base.values * k, sigma=base.sigma * k, scale_sigma=0.5) for k in (4.0, 1.0, 0.2)]
    sets[1] = base
    made = aligned(sets, THREE, scale=fitted_scale(), reference=1)
    for one in made.sets:
        np.testing.assert_allclose(one.values, base.values, rtol=1e-6)
        assert one.scale_sigma == 0.04
    assert [scale.k for scale in made.scales] == pytest.approx([0.25, 1, 5])
    assert [len(modes) for modes in made.scale_modes] == [1, 0, 1]
    assert any("temperature = 200 K" in words for words in made.sets[2].history)
    assert made.fitted


def test_merit_and_covariances_are_kept():
    sets = [replace(one, merit=np.full(one.count, 0.5)) for one in three(share=1)]
    made = aligned(sets, THREE, scale=given_scale(3.0))
    assert np.all(made.sets[1].merit == 0.5)
    changes = [difference(one, sets[0], scale=AS_GIVEN).coefficients for one in sets]
    again = aligned(changes, THREE, scale=given_scale(3.0))
    np.testing.assert_allclose(again.sets[1].plane_errors.along, 3 * changes[1].plane_errors.along)
    np.testing.assert_allclose(again.sets[1].plane_errors.mixed, 9 * changes[1].plane_errors.mixed)


def test_each_set_keeps_its_symmetry():
    one, other = measured("P212121", 3), measured("P1", 4)
    sets = [one.coefficients(), replace(other.coefficients(), lattice=one.lattice)]
    pair = Variable.of("dose", [0, 1], "MGy")
    made = aligned(sets, pair, scale=AS_GIVEN)
    assert [made_one.group.order for made_one in made.sets] == [4, 1]
    imposed = aligned(sets, pair, scale=AS_GIVEN, phases="reference")
    assert [made_one.group.order for made_one in imposed.sets] == [4, 1]


def test_labels():
    assert THREE.label(1) == "temperature = 150 K"
    assert Variable.of("frame", [3]).label(0) == "frame = 3"


def test_refusals():
    sets = three()
    assert refusal_of(lambda: aligned(sets[:2], THREE, scale=AS_GIVEN)).path == ("variable",)
    assert refusal_of(lambda: aligned(sets, THREE, scale=AS_GIVEN, reference=3)).path == ("reference",)
    assert refusal_of(lambda: aligned(sets, THREE, scale=AS_GIVEN, reference=-1)).path == ("reference",)
    assert refusal_of(lambda: aligned([], THREE, scale=AS_GIVEN)).path == ("sets",)
    assert refusal_of(lambda: aligned(sets, THREE, scale=AS_GIVEN, common="all")).path == ("common",)
    assert refusal_of(lambda: aligned(sets, THREE, scale=AS_GIVEN, phases="second")).path == ("phases",)
    assert refusal_of(lambda: Variable.of("time", [0, np.nan])).path == ("variable", 1)
    assert refusal_of(lambda: Variable.of("time", ["early"])).path == ("variable",)
    unlike = [sets[0], replace(sets[1], lattice=random_set(2).lattice, indices=sets[1].indices[:, :2])]
    fault = refusal_of(lambda: aligned(unlike, Variable.of("time", [0, 1], "ps"), scale=AS_GIVEN))
    assert fault.path == ("time = 1 ps",)
