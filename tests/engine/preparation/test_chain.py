"""The chain of preparation: each step alone, steps together, what it counts and what it says."""

from __future__ import annotations

import dataclasses
import math
from dataclasses import replace

import numpy as np
import pytest
from scipy import integrate

from engine import InputError, Lattice, Treatment, evaluate, sampling
from engine.amplitudes.corrections import Lorentz, Polarisation
from engine.amplitudes.shells import shell_means
from engine.preparation import Recipe, prepare_reflections
from engine.symmetry import plane_group, stack_group
from tests.engine.preparation.crystal import (
    CONTENT,
    D_MIN,
    OR,
    P1,
    ROUNDING,
    agrees_with_the_structure,
    by_index,
    crystal,
    exact,
    measured,
    noisy,
    plain_kinds,
    recipe,
    with_row,
)

NO_CORRECTION = "No correction was asked for: intensities are taken to be proportional to |F|²."
NO_SCALE = "The scale is arbitrary: nothing was said that would make it absolute."


# Nothing asked


def test_amplitudes_in_p1_pass_through():
    """Nothing is asked, so nothing is done and nothing is said of steps that were not taken."""
    given = measured(OR, OR.sphere(D_MIN, half=True), quantity="amplitude")
    given = given.select(given.observed > 0)
    prepared = prepare_reflections(given, Recipe(group=P1))
    agrees_with_the_structure(prepared.coefficients(), OR)
    assert prepared.converted is None
    assert prepared.plot is None
    assert prepared.zero_term is None
    assert prepared.notes == (NO_SCALE,)
    n = given.count
    assert prepared.applied == (
        f"{n} measurements merged to {n} unique in {P1.name}, Friedel mates joined",
        f"expanded by {P1.name} from {n} unique to {n} reflections",
    )


def test_an_absolute_scale_that_was_given_stays():
    given = replace(measured(OR, OR.sphere(2.0), quantity="amplitude"), scale="absolute")
    prepared = prepare_reflections(given, recipe())
    assert prepared.unique.scale == "absolute"
    assert NO_SCALE not in prepared.notes
    assert prepared.zero_term is None
    assert prepare_reflections(exact(), recipe(amplitudes="root")).unique.scale == "arbitrary"


# Merging and expansion


@pytest.mark.parametrize(
    ("symbol", "cell"),
    [
        ("P 21 21 21", {}),
        ("C 1 2/c 1", {"lengths": (9.1, 6.3, 8.2), "angles": (90.0, 101.0, 90.0)}),
        ("P 31", {"lengths": (7.1, 7.1, 8.3), "angles": (90.0, 90.0, 120.0)}),
    ],
)
def test_equivalents_are_merged_and_expanded_with_their_phases(symbol, cell):
    """A third of the sphere at random, exact: the whole density comes out, equivalents that were not measured too."""
    one = crystal(symbol, **cell)
    indices = one.sphere(1.2)
    # Of every pair at least one, so that every orbit is met whatever its size.
    half = one.sphere(1.2, half=True)
    rng = np.random.default_rng(8)
    chosen = half * rng.choice([1, -1], len(half))[:, None]
    chosen = np.concatenate([chosen, indices[rng.random(len(indices)) < 0.2]])
    prepared = prepare_reflections(measured(one, chosen), Recipe(group=one.group, amplitudes="root"))
    made = prepared.coefficients()
    agrees_with_the_structure(made, one)
    assert prepared.expansion.reflections.count == made.count
    assert made.history == prepared.applied
    assert made.tally.repeats_joined == made.tally.mates_joined == 0


def test_without_friedels_law_mates_stand_for_themselves():
    """A complex density: F(−h) is not conj F(h); here by an imaginary part added to every form factor."""
    indices = OR.sphere(1.4)
    images = np.concatenate([OR.group.rotations @ site + OR.group.translations for site in OR.sites])
    factors = OR.factors(indices) + 4j * np.exp(2j * np.pi * (indices @ images.T)).sum(axis=1)
    allowed = np.abs(factors) > 1e-9
    given = replace(
        measured(OR, indices), observed=np.abs(factors) ** 2, phase=np.where(allowed, np.angle(factors), np.nan)
    )
    prepared = prepare_reflections(given, recipe(friedel=False, amplitudes="root"))
    made = prepared.coefficients()
    assert not made.real
    assert made.count == np.count_nonzero(allowed)
    expected = dict(
        zip(map(tuple, (-indices[allowed]).tolist()), (factors[allowed] / OR.lattice.volume).tolist(), strict=True)
    )
    found = by_index(made)
    assert found.keys() == expected.keys()
    np.testing.assert_allclose([found[m] for m in expected], list(expected.values()), rtol=0, atol=ROUNDING)
    assert "Friedel mates kept apart" in prepared.applied[0]
    # Joined, the same intensities are a different set: mates differ by far more than rounding.
    joined = prepare_reflections(replace(given, phase=None), recipe(amplitudes="root"))
    assert joined.unique.count < prepared.unique.count
    assert joined.merged.overall.r_merge > 0.01
    assert prepared.merged.overall.r_merge < 1e-12


def test_absences_are_left_out_and_counted():
    """P2₁2₁2₁ forbids h00, 0k0 and 00l of odd index (International Tables A, No. 19)."""
    given = noisy()
    odd = (np.count_nonzero(given.indices, axis=1) == 1) & (given.indices.sum(axis=1) % 2 != 0)
    prepared = prepare_reflections(given, recipe())
    assert odd.sum() > 20
    assert prepared.merged.absences.row.tolist() == np.flatnonzero(odd).tolist()
    assert f"{odd.sum()} rows are systematically absent in P 21 21 21 and left out." in prepared.notes
    assert not prepared.kinds.absent.any()


# Corrections


def test_corrections_are_undone_in_words_and_numbers():
    """1/sin 2θ and (1 + cos²2θ)/2 of Bragg's angle, written out."""
    wavelength = 0.71
    true = exact()
    theta = np.arcsin(wavelength / 2 * np.linalg.norm(true.indices @ OR.lattice.reciprocal, axis=1) / (2 * np.pi))
    recorded = true.scaled((1 + np.cos(2 * theta) ** 2) / 2 / np.sin(2 * theta))
    asked = recipe(amplitudes="root", wavelength=wavelength, corrections=(Lorentz("rotation"), Polarisation()))
    prepared = prepare_reflections(recorded, asked)
    agrees_with_the_structure(prepared.coefficients(), OR)
    assert prepared.applied[0].startswith("corrected for the Lorentz factor of a crystal in rotation")
    assert prepared.applied[1].startswith("corrected for the polarisation factor")
    assert NO_CORRECTION not in prepared.notes
    assert prepared.given.observed is recorded.observed
    uncorrected = prepare_reflections(recorded, recipe(amplitudes="root", wavelength=wavelength))
    assert NO_CORRECTION in uncorrected.notes
    assert uncorrected.unique.observed.max() > 2 * prepared.unique.observed.max()


# Intensities to amplitudes


def test_root():
    given = measured(OR, OR.sphere(D_MIN, half=True), relative=0.02)
    given = given.select(given.observed > 1e-6)
    given = replace(given, row=np.arange(given.count))
    prepared = prepare_reflections(given, Recipe(group=P1, amplitudes="root"))
    row = prepared.unique.row
    np.testing.assert_allclose(prepared.unique.observed, np.sqrt(given.observed[row]), rtol=1e-14)
    np.testing.assert_allclose(prepared.unique.sigma, given.sigma[row] / (2 * np.sqrt(given.observed[row])), rtol=1e-14)
    assert "amplitudes are the square roots of the intensities" in prepared.applied
    assert prepared.converted.negative == 0


def test_negative_intensities_by_each_rule():
    """Refused, left out and counted, or kept: no fourth way, and none is lost unmentioned."""
    given = noisy(floor=2.0)
    kept = prepare_reflections(given, recipe())
    merged = kept.merged.reflections
    negative = np.flatnonzero(merged.observed < 0)
    assert negative.size > 10
    assert kept.unique.count == merged.count
    assert kept.unique.observed.min() > 0
    assert kept.converted.negative == negative.size
    assert f"{negative.size} merged intensities are negative by noise." in kept.notes
    assert "amplitudes are the Bayesian estimate of French & Wilson (1978)" in kept.applied
    excluded = prepare_reflections(given, recipe(amplitudes="root_exclude"))
    assert excluded.unique.count == merged.count - negative.size
    assert set(excluded.unique.row) == set(merged.row) - set(merged.row[negative])
    assert f"{negative.size} merged intensities are negative by noise." in excluded.notes
    assert f"{negative.size} reflections without a root are left out." in excluded.notes
    with pytest.raises(InputError) as caught:
        prepare_reflections(given, recipe(amplitudes="root"))
    assert caught.value.path == ("observed",)
    assert caught.value.rows == tuple(merged.row[negative][:10])


def test_the_bayesian_estimate_nears_the_root_where_intensities_are_strong():
    """F ≈ √I (1 − σ²/8I²) of a strong intensity (French & Wilson 1978, the mean of √I to second order);
    of a weak one it is above the root, and so is every one of a negative intensity.
    """
    prepared = prepare_reflections(noisy(), recipe())
    merged, unique = prepared.merged.reflections, prepared.unique
    ratio = merged.observed / merged.sigma
    strong = ratio > 25
    assert strong.sum() > 100
    root = np.sqrt(merged.observed[strong])
    # The prior pulls by up to a few σ²/Σ: a few per mille of an intensity at ratio 25.
    np.testing.assert_allclose(unique.observed[strong], root, rtol=3e-3)
    np.testing.assert_allclose(unique.sigma[strong], merged.sigma[strong] / (2 * root), rtol=1e-2)
    weak = ratio < 0.3
    assert weak.sum() > 5
    assert np.all(unique.observed[weak] > np.sqrt(np.maximum(merged.observed[weak], 0)))


def test_the_prior_knows_axes_and_centric_zones():
    """⟨F⟩ over J^(ν−½) exp(−J/Σ′) exp(−(I − J)²/2σ²) by numerical integration, the whole of French & Wilson's
    posterior: ν = 1, Σ′ = ε⟨I/ε⟩, centric ν = ½, Σ′ = 2ε⟨I/ε⟩. A weak reflection of every kind.
    """
    prepared = prepare_reflections(noisy(floor=2.0), recipe())
    merged, unique = prepared.merged.reflections, prepared.unique
    epsilon, centric = plain_kinds(merged.indices)
    means = shell_means(merged, epsilon=epsilon, centric=centric)
    expected = epsilon * means.at(OR.lattice.sine_over_wavelength(merged.indices) ** 2)
    ratio = merged.observed / merged.sigma
    for kind in ((1, False), (1, True), (2, True)):
        chosen = np.flatnonzero((epsilon == kind[0]) & (centric == kind[1]))
        row = chosen[np.argmin(np.abs(ratio[chosen]))]
        measured_, sigma = merged.observed[row], merged.sigma[row]
        prior = expected[row] * (2 if centric[row] else 1)
        power = 0 if centric[row] else 1

        # In F = √J, which has no singularity: dJ = 2F dF.
        def weight(f, measured_=measured_, sigma=sigma, prior=prior, power=power):
            return f**power * math.exp(-(f**2) / prior - (measured_ - f**2) ** 2 / (2 * sigma**2))

        # The exponent is below −50 there.
        end = math.sqrt(max(measured_, 0) + 10 * sigma)
        norm = integrate.quad(weight, 0, end)[0]
        mean = integrate.quad(lambda f, weight=weight: f * weight(f), 0, end)[0] / norm
        assert unique.observed[row] == pytest.approx(mean, rel=1e-6)


def test_amplitudes_need_no_rule():
    given = measured(OR, OR.sphere(D_MIN), quantity="amplitude")
    made = [prepare_reflections(given, recipe(amplitudes=rule)) for rule in ("bayesian", "root", "root_exclude")]
    for one in made:
        assert one.converted is None
        np.testing.assert_array_equal(one.unique.observed, made[0].unique.observed)
        assert not any("amplitudes are" in words for words in one.applied)
        assert NO_CORRECTION not in one.notes


# The zero term


@pytest.mark.parametrize(("phase", "sign"), [(0.0, 1), (math.pi, -1), (None, 1)], ids=["0°", "180°", "no phase"])
def test_the_zero_term_of_its_row(phase, sign):
    given = with_row(measured(OR, OR.sphere(1.5), quantity="amplitude"), (0, 0, 0), 150.0, phase)
    prepared = prepare_reflections(given, recipe())
    assert prepared.zero_term == pytest.approx(sign * 150)
    assert prepared.given.count == given.count - 1
    assert f"zero term {sign * 150} of its own row" in prepared.applied
    made = prepared.coefficients()
    assert by_index(made)[0, 0, 0] == pytest.approx(sign * 150 / OR.lattice.volume)
    agrees_with_the_structure(made, OR)


def test_the_zero_term_is_scaled_with_the_others():
    given = with_row(measured(OR, OR.sphere(1.5), quantity="amplitude"), (0, 0, 0), 150.0, 0.0)
    prepared = prepare_reflections(given, recipe(scale="factor", factor=4.0, content=CONTENT, units=4))
    assert prepared.zero_term == pytest.approx(600)
    assert not any("of the content" in words for words in prepared.applied)


def test_the_zero_term_given_twice_alike():
    given = measured(OR, OR.sphere(1.5), quantity="amplitude")
    given = with_row(with_row(given, (0, 0, 0), 150.0, 0.0), (0, 0, 0), 150.0, 0.0)
    prepared = prepare_reflections(given, recipe())
    assert prepared.zero_term == pytest.approx(150)
    assert prepared.given.count == given.count - 2


def test_an_intensity_has_no_zero_term():
    given = with_row(exact(), (0, 0, 0), 1e4, 0.0)
    prepared = prepare_reflections(given, recipe(amplitudes="root"))
    assert prepared.zero_term is None
    assert prepared.given.count == given.count - 1
    assert "1 rows of the zero term hold an intensity, which has no sign, and are left out." in prepared.notes
    assert prepared.coefficients().tally.zero_term == "absent"


def test_a_zero_term_that_is_not_real_belongs_to_a_complex_density():
    given = with_row(measured(OR, OR.sphere(1.5), quantity="amplitude"), (0, 0, 0), 150.0, math.radians(30))
    with pytest.raises(InputError) as caught:
        prepare_reflections(given, recipe())
    assert caught.value.path == ("phase",)
    assert caught.value.rows == (given.count - 1,)
    prepared = prepare_reflections(given, recipe(friedel=False))
    expected = 150 * complex(math.sqrt(3) / 2, 0.5)
    assert prepared.zero_term == pytest.approx(expected)
    assert by_index(prepared.coefficients())[0, 0, 0] == pytest.approx(expected / OR.lattice.volume)


# Outliers


def spoilt(rows, factor=4.0):
    """Noisy strong measurements of which some are wrong by a factor."""
    given = noisy()
    observed = given.observed.copy()
    observed[rows] *= factor
    return replace(given, observed=observed)


def of_orbits(prepared_rows, size, count):
    """Rows of strong reflections, one from each of `count` orbits of `size` measurements."""
    clean = prepare_reflections(prepared_rows, recipe())
    merged = clean.merged
    strong = merged.reflections.observed > 30 * merged.reflections.sigma
    return merged.reflections.row[strong & (merged.redundancy == size)][:count]


def test_outliers_are_kept_or_left_out_and_counted():
    rows = of_orbits(noisy(), 8, 5)
    true = prepare_reflections(noisy(), recipe())
    kept = prepare_reflections(spoilt(rows), recipe())
    assert set(rows) <= set(kept.merged.outliers.row)
    assert kept.merged.overall.measurements == true.merged.overall.measurements
    listed = kept.merged.outliers.row.size
    assert f"{listed} measurements lie far from their equivalents and are kept." in kept.notes
    rejected = prepare_reflections(spoilt(rows), recipe(reject_outliers=True))
    assert set(rejected.merged.outliers.row) == set(rows)
    assert rejected.merged.overall.measurements == true.merged.overall.measurements - 5
    assert "5 measurements lie far from their equivalents and are left out." in rejected.notes
    assert rejected.merged.overall.r_merge < kept.merged.overall.r_merge
    assert not any("far from their equivalents" in note for note in true.notes)


def test_of_two_that_differ_none_is_left_out_and_the_note_says_so():
    """Of two measurements nobody can tell which is wrong, so both stay; 10 σ and more lie between them."""
    half = OR.sphere(D_MIN, half=True)
    # Mates of one general octant: orbits of two.
    octant = half[np.all(half > 0, axis=1)]
    given = measured(OR, np.concatenate([octant, -octant]), scale=0.02, relative=0.03, floor=0.3)
    strongest = int(np.argmax(given.observed))
    observed = given.observed.copy()
    observed[strongest] *= 3
    prepared = prepare_reflections(replace(given, observed=observed), recipe(reject_outliers=True))
    assert prepared.merged.overall.measurements == given.count
    listed = prepared.merged.outliers
    assert strongest in listed.row
    assert not listed.rejected.any()
    assert f"{listed.row.size} measurements lie far from their equivalents and are kept." in prepared.notes
    assert not any("left out" in note for note in prepared.notes)


# Phases absent


def test_without_phases_the_autocorrelation_can_be_summed():
    """P(u) = (1/V) Σ_h |F|² cos(2πi h·u) over all h (Patterson 1934), written out; the density is refused."""
    prepared = prepare_reflections(exact(phases=False), recipe(amplitudes="root"))
    made = prepared.coefficients()
    assert made.unphased == made.count == prepared.expansion.reflections.count
    places = np.random.default_rng(2).random((20, 3))
    found = evaluate(made, sampling.points(OR.lattice, places), Treatment(field="autocorrelation")).values
    indices = OR.sphere(D_MIN)
    squares = np.abs(OR.factors(indices)) ** 2 / OR.lattice.volume
    expected = np.cos(2 * np.pi * places @ indices.T) @ squares
    np.testing.assert_allclose(found, expected, rtol=0, atol=1e-9 * squares.sum())
    with pytest.raises(InputError) as caught:
        evaluate(made, sampling.points(OR.lattice, places))
    assert caught.value.path == ("phase_deg",)


def test_phases_of_some():
    """Unknown phases stay unknown, in all equivalents and nowhere else."""
    given = exact()
    kept = prepare_reflections(given, recipe(amplitudes="root"))
    # Of one octant alone, so that an orbit has its phase from a single row.
    octant = given.select(np.all(given.indices >= 0, axis=1) & (given.observed > 0))
    phase = octant.phase.copy()
    phase[::3] = np.nan
    prepared = prepare_reflections(replace(octant, phase=phase), recipe(amplitudes="root"))
    assert np.count_nonzero(np.isnan(prepared.unique.phase)) == phase[::3].size
    made, whole = prepared.coefficients(), by_index(kept.coefficients())
    assert 0 < made.unphased < made.count == len(whole)
    for m, value in by_index(made.phased()).items():
        assert value == pytest.approx(whole[m], abs=1e-9)


# Other dimensions


def test_a_layer_stack():
    """Fourteen orders of a centrosymmetric stack, whose F are written out."""
    period, orders = 50.0, np.arange(1, 15)
    factors = 9.0 * np.cos(2 * np.pi * orders * 11 / period) + 5.0 * (-1.0) ** orders
    line = Lattice.from_period(period)
    given = replace(
        measured(OR, OR.sphere(3.0)).select(np.arange(14)),
        lattice=line,
        indices=orders[:, None],
        observed=factors**2,
        phase=np.where(factors > 0, 0.0, np.pi),
    )
    prepared = prepare_reflections(given, Recipe(group=stack_group("-1"), amplitudes="root"))
    made = prepared.coefficients()
    assert made.indices[:, 0].tolist() == orders.tolist()
    np.testing.assert_allclose(made.values, factors / period, atol=1e-12)


def test_a_planar_lattice():
    """p4gm, whose F of one general site are real: the sum over its eight images is written out."""
    plane = Lattice.from_vectors([[6.0, 0.0], [0.0, 6.0]])
    group = plane_group("p4gm")
    site = np.array([0.13, 0.29])
    images = group.rotations @ site + group.translations
    indices = np.array([(h, k) for h in range(-6, 7) for k in range(-6, 7) if (h, k) != (0, 0)])
    factors = 3.0 * np.exp(2j * np.pi * (indices @ images.T)).sum(axis=1).real
    template = measured(OR, OR.sphere(2.0)).select(np.arange(len(indices)))
    given = replace(
        template,
        lattice=plane,
        indices=np.asfortranarray(indices),
        observed=factors**2,
        phase=np.where(factors > 0, 0.0, np.pi),
        row=np.arange(len(indices)),
    )
    prepared = prepare_reflections(given, Recipe(group=group, amplitudes="root"))
    made = prepared.coefficients()
    lookup = dict(zip(map(tuple, (-indices).tolist()), factors.tolist(), strict=True))
    for m, value in by_index(made).items():
        assert value == pytest.approx(lookup[m] / plane.volume, abs=1e-6)
    # International Tables A: h0 and 0k of odd index are absent, ±1, ±3 and ±5 of each here.
    assert prepared.merged.absences.count == 12


# Bookkeeping


@pytest.mark.parametrize("rule", ["bayesian", "root_exclude"])
@pytest.mark.parametrize("reject", [False, True])
def test_every_row_is_accounted_for(rule, reject):
    """Rows in = zero terms + absent + rejected + merged; merged = unique + without a root."""
    given = with_row(spoilt(of_orbits(noisy(), 8, 3)), (0, 0, 0), 5.0, 0.0, 1.0)
    prepared = prepare_reflections(given, recipe(amplitudes=rule, reject_outliers=reject))
    merged = prepared.merged
    rejected = np.count_nonzero(merged.outliers.rejected)
    assert rejected == (3 if reject else 0)
    assert prepared.given.count == given.count - 1
    assert prepared.given.count == merged.absences.count + rejected + merged.overall.measurements
    assert merged.overall.measurements == merged.redundancy.sum()
    assert prepared.unique.count == merged.reflections.count - prepared.converted.excluded_rows.size
    assert prepared.kinds.centric.size == merged.reflections.count


def test_all_steps_in_their_order():
    asked = recipe(
        wavelength=0.71,
        corrections=(Lorentz("rotation"),),
        scale="wilson",
        content=CONTENT,
        units=4,
        reject_outliers=True,
    )
    prepared = prepare_reflections(noisy(), asked)
    beginnings = ["corrected for", "", "put on the absolute scale", "amplitudes are", "expanded by", "zero term"]
    assert len(prepared.applied) == len(beginnings)
    for words, beginning in zip(prepared.applied, beginnings, strict=True):
        assert words.startswith(beginning)
    assert "measurements merged to" in prepared.applied[1]
    assert prepared.recipe is asked
    made = prepared.coefficients(unit="e/Å³")
    assert (made.unit, made.history) == ("e/Å³", prepared.applied)
    field = evaluate(made, sampling.points(OR.lattice, OR.sites))
    assert field.applied[: len(beginnings)] == prepared.applied


def flat(thing):
    """Every array and number of a dataclass, whatever lies within what."""
    if dataclasses.is_dataclass(thing):
        return [part for one in dataclasses.fields(thing) for part in flat(getattr(thing, one.name))]
    if isinstance(thing, tuple):
        return [part for one in thing for part in flat(one)]
    return [thing]


def test_the_same_data_give_the_same_figures():
    """To the last bit, the random halves of CC½ among them; and what was given is left as it was."""
    asked = recipe(scale="wilson", content=CONTENT, units=4)
    given, untouched = noisy(), noisy()
    np.random.seed(1)  # noqa: NPY002  (whatever the state of the global generator)
    one = prepare_reflections(given, asked)
    np.random.seed(2)  # noqa: NPY002
    two = prepare_reflections(given, asked)
    for first, second in zip(flat(one), flat(two), strict=True):
        np.testing.assert_array_equal(first, second)
    for first, second in zip(flat(given), flat(untouched), strict=True):
        if isinstance(first, np.ndarray):
            np.testing.assert_array_equal(first, second)
    assert one.merged.overall.cc_half > 0.9
