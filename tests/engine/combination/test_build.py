"""Combined sets with weights of each term, and their accounts."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from engine.combination.build import build
from engine.combination.gathering import gather
from engine.combination.scales import AS_GIVEN, fitted_scale, given_scale
from tests.engine.combination.crystals import GROUPS, measured, random_set
from tests.strategies import refusal_of


def gathered(choice=AS_GIVEN, **changes):
    first = random_set(seed=1, share=1)
    second = replace(random_set(seed=2, share=1), **changes)
    return gather([first, second], ["first", "second"], choice)


def built(made, shares, phases="own", **options):
    terms = np.arange(len(made.indices))
    return build(made, terms, shares, phases, ["invented"], apply_merit=False, **options)


def test_weights_of_each_term():
    made = gathered(given_scale(2.0))
    size = len(made.indices)
    shares = [np.linspace(0, 1, size), np.linspace(-1, 2, size)]
    result = built(made, shares)
    first, second = made.sets
    np.testing.assert_allclose(result.coefficients.values, shares[0] * first.values + 2 * shares[1] * second.values)
    assert result.applied[1] == "invented"
    assert result.coefficients.phase_known.all()
    assert result.coefficients.lattice is first.lattice


def test_scale_of_the_first_is_that_of_all_only_where_others_were_fitted():
    size = len(gathered().indices)
    shares = [np.ones(size), np.ones(size)]
    for choice, wanted in ((fitted_scale(), 0.02), (AS_GIVEN, 0.0)):
        made = gathered(choice, scale_sigma=0.5)
        leader = replace(made.leader, scale_sigma=0.02)
        made = replace(made, leader=leader, sets=(leader, made.sets[1]))
        assert built(made, shares).coefficients.scale_sigma == wanted


def test_symmetry_of_the_phases_counts_too():
    crystal = measured("P212121", 3)
    sets = [crystal.coefficients(), crystal.coefficients()]
    made = gather(sets, ["first", "second"], AS_GIVEN)
    shares = [np.ones(len(made.indices))] * 2
    donor = sets[0]
    assert built(made, shares, donor).coefficients.group is crystal.group
    assert built(made, shares, replace(donor, group=GROUPS["P1"])).coefficients.group.order == 1
    assert built(made, shares, replace(donor, group=None)).coefficients.group is None


def test_a_vanishing_amplitude_takes_the_phase_that_symmetry_leaves_it():
    """Its axis is the one allowed for a centric reflection: no error lies across it."""
    crystal = measured("P212121", 3)
    donor = crystal.coefficients()
    donor = replace(donor, values=np.zeros_like(donor.values))
    made = gather([crystal.coefficients()], ["first"], AS_GIVEN)
    result = built(made, [np.ones(len(made.indices))], donor).coefficients
    sure = crystal.coefficients()
    centric = sure.phase_sigma == 0
    assert centric.any()
    turned = result.values[centric] / sure.values[centric]
    np.testing.assert_allclose(turned.imag, 0, atol=1e-12)
    np.testing.assert_allclose(np.abs(turned), 1)


def test_errors_name_what_they_hold_and_what_not():
    made = gathered(given_scale(2.0, k_sigma=0.1))
    shares = [np.ones(len(made.indices))] * 2
    errors = built(made, shares).coefficients.plane_errors
    assert "standard uncertainties of the amplitudes (first)" in errors.contains
    assert "the uncertainty of the scales of the sets to each other" in errors.omits
    errors = built(made, shares, 0).coefficients.plane_errors
    assert "standard uncertainties of the amplitudes of second" in errors.contains
    assert any("phase errors" in words for words in errors.contains)
    made = gathered(sigma=None, phase_sigma=None)
    errors = built(made, shares, 1).coefficients.plane_errors
    assert "errors of the phases: none were given" in errors.omits
    assert any("amplitudes of second" in words for words in errors.omits)


def test_nothing_in_common_is_refused():
    made = gathered(phase_known=np.zeros(random_set(seed=2, share=1).count, dtype=bool))
    size = len(made.indices)
    assert refusal_of(lambda: built(made, [np.ones(size)] * 2)).path == ("sets",)
    assert refusal_of(lambda: built(made, [np.ones(size)] * 2, -1)).path == ("phases",)
