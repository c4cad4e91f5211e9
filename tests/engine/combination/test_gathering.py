"""Terms of several sets side by side."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from engine.combination.gathering import gather
from engine.combination.scales import AS_GIVEN, given_scale
from tests.engine.combination.crystals import GROUPS, random_set, table
from tests.strategies import refusal_of


@given(st.lists(st.integers(0, 2**16), min_size=1, max_size=4), st.sampled_from((1, 2, 3)), st.booleans())
def test_every_term_of_every_set_is_found(seeds, dimension, real):
    sets = [random_set(dimension, seed=seed, real=real) for seed in seeds]
    made = gather(sets, [str(seed) for seed in seeds], AS_GIVEN)
    every = sorted(set().union(*(table(one) for one in sets)))
    assert list(map(tuple, made.indices.tolist())) == every
    for number, one in enumerate(sets):
        held = table(one)
        assert made.present[number].tolist() == [h in held for h in every]
        rows = made.rows[number][made.present[number]]
        assert one.values[rows].tolist() == [held[h] for h in every if h in held]


def test_a_mean_given_in_an_absolute_unit_is_not_scaled():
    first = replace(random_set(seed=1, share=1), unit="e/Å³")
    zero = ~first.indices.any(axis=1)

    def factor(**changes):
        second = replace(first, **changes)
        made = gather([first, second], ["first", "second"], given_scale(2.0))
        factors = made.factors(1, np.arange(first.count))
        assert np.all(factors[~zero] == 2)
        assert any("left unscaled" in words for words in made.words()) == (factors[zero][0] == 1)
        return factors[zero][0]

    given_mean = replace(first.tally, zero_term="given")
    assert factor(tally=given_mean) == 1
    assert factor() == 2
    assert factor(tally=given_mean, unit="arbitrary") == 2
    first = replace(first, unit="arbitrary")
    assert factor(tally=given_mean) == 2


def test_zero_terms_are_named_after_those_they_are_made_of():
    measured = random_set(seed=1)
    given_one = replace(measured, tally=replace(measured.tally, zero_term="given"))
    absent = random_set(seed=2, zero=False)

    def kind(*sets):
        made = gather(sets, "abc"[: len(sets)], AS_GIVEN)
        return made.zero_term(np.arange(len(made.indices)))

    assert kind(measured, measured) == kind(measured, given_one) == kind(measured, absent) == "measured"
    assert kind(given_one, given_one) == kind(given_one, absent) == "given"
    assert kind(absent, absent) == "absent"


def test_one_of_the_sets_keeps_its_scale_and_symmetry():
    sets = [replace(random_set(seed=1), group=GROUPS["P1"]), replace(random_set(seed=2), group=GROUPS["P-1"])]
    made = gather(sets, ["first", "second"], given_scale(3.0))
    alone = made.only(1)
    assert alone.sets == (sets[1],)
    assert alone.leader is sets[0]
    assert (made.group.order, alone.group.order) == (1, 2)
    np.testing.assert_array_equal(alone.present[0], made.present[1])
    assert alone.factors(0, np.arange(3)).tolist() == [3, 3, 3]
    assert len(alone.words()) == 1
    assert made.only(0).words() == ()


def test_refusals():
    one = random_set()
    none = one.select(np.zeros(one.count, dtype=bool))
    assert refusal_of(lambda: gather([], [], AS_GIVEN)).path == ("sets",)
    assert refusal_of(lambda: gather([none, one], ["first", "second"], AS_GIVEN)).path == ("first",)
