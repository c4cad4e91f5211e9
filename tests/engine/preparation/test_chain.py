"""The chain of preparation: each step alone, steps together, what it counts, what it says and what it refuses."""

from __future__ import annotations

import dataclasses
import math
from dataclasses import replace

import numpy as np
import pytest
import xraydb
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import integrate

from engine import InputError, Lattice, Treatment, evaluate, sampling
from engine.amplitudes.corrections import Lorentz, Polarisation
from engine.amplitudes.shells import shell_means
from engine.amplitudes.wilson import wilson_plot
from engine.preparation import Recipe, prepare_reflections
from engine.scattering import composition
from engine.symmetry import plane_group, space_group, stack_group
from tests.engine.preparation.crystal import ATOMS, ELECTRONS, FORMULA, B, crystal, measured, with_row

OR = crystal()
"""P2₁2₁2₁, 7.1 × 8.9 × 10.4 Å."""
CONTENT = composition(FORMULA)
D_MIN = 1.1
P1 = space_group(1)
NO_CORRECTION = "No correction was asked for: intensities are taken to be proportional to |F|²."
NO_SCALE = "The scale is arbitrary: nothing was said that would make it absolute."
ROUNDING = 1e-10
"""Of sums of some thousand terms of some hundred electrons, relative to the largest."""


def recipe(**more):
    return Recipe(**({"group": OR.group} | more))


def exact(**more):
    """|F|² of every reflection of OR, without noise and without σ."""
    return measured(OR, OR.sphere(D_MIN), **more)


def noisy(**more):
    return measured(OR, OR.sphere(D_MIN), **({"scale": 0.02, "relative": 0.03, "floor": 0.3} | more))


def by_index(made):
    """m -> n_m of a coefficient set."""
    return dict(zip(map(tuple, made.indices.tolist()), made.values.tolist(), strict=True))


def agrees_with_the_structure(made, one, *, factor=1.0, bound=ROUNDING):
    """n_m = F(−m)/V for every coefficient, and none is missing of those the group allows (conventions, section 2)."""
    factors = one.factors(-made.indices) * factor / one.lattice.volume
    others = made.indices.any(axis=1)
    worst = np.abs(made.values - factors)[others].max()
    assert worst <= bound * np.abs(factors).max()
    spacing = 2 * np.pi / np.linalg.norm(made.indices[others] @ one.lattice.reciprocal, axis=1)
    all_of = one.sphere(spacing.min() * (1 - 1e-9), half=True)
    allowed = np.abs(one.factors(all_of)) > 1e-9
    assert np.count_nonzero(others) == np.count_nonzero(allowed)


# Nothing asked


def test_amplitudes_in_p1_pass_through():
    """Nothing is asked, so nothing is done and nothing is said of steps that were not taken."""
    given_ = measured(OR, OR.sphere(D_MIN, half=True), quantity="amplitude")
    given_ = given_.select(given_.observed > 0)
    prepared = prepare_reflections(given_, Recipe(group=P1))
    agrees_with_the_structure(prepared.coefficients(), OR)
    assert prepared.converted is None
    assert prepared.plot is None
    assert prepared.zero_term is None
    assert prepared.notes == (NO_SCALE,)
    n = given_.count
    assert prepared.applied == (
        f"{n} measurements merged to {n} unique in {P1.name}, Friedel mates joined",
        f"expanded by {P1.name} from {n} unique to {n} reflections",
    )


def test_an_absolute_scale_that_was_given_stays():
    given_ = replace(measured(OR, OR.sphere(2.0), quantity="amplitude"), scale="absolute")
    prepared = prepare_reflections(given_, recipe())
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
    given_ = replace(
        measured(OR, indices), observed=np.abs(factors) ** 2, phase=np.where(allowed, np.angle(factors), np.nan)
    )
    prepared = prepare_reflections(given_, recipe(friedel=False, amplitudes="root"))
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
    joined = prepare_reflections(replace(given_, phase=None), recipe(amplitudes="root"))
    assert joined.unique.count < prepared.unique.count
    assert joined.merged.overall.r_merge > 0.01
    assert prepared.merged.overall.r_merge < 1e-12


def test_absences_are_left_out_and_counted():
    """P2₁2₁2₁ forbids h00, 0k0 and 00l of odd index (International Tables A, No. 19)."""
    given_ = noisy()
    odd = (np.count_nonzero(given_.indices, axis=1) == 1) & (given_.indices.sum(axis=1) % 2 != 0)
    prepared = prepare_reflections(given_, recipe())
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
    given_ = measured(OR, OR.sphere(D_MIN, half=True), relative=0.02)
    given_ = given_.select(given_.observed > 1e-6)
    given_ = replace(given_, row=np.arange(given_.count))
    prepared = prepare_reflections(given_, Recipe(group=P1, amplitudes="root"))
    row = prepared.unique.row
    np.testing.assert_allclose(prepared.unique.observed, np.sqrt(given_.observed[row]), rtol=1e-14)
    np.testing.assert_allclose(
        prepared.unique.sigma, given_.sigma[row] / (2 * np.sqrt(given_.observed[row])), rtol=1e-14
    )
    assert "amplitudes are the square roots of the intensities" in prepared.applied
    assert prepared.converted.negative == 0


def test_negative_intensities_by_each_rule():
    """Refused, left out and counted, or kept: no fourth way, and none is lost unmentioned."""
    given_ = noisy(floor=2.0)
    kept = prepare_reflections(given_, recipe())
    merged = kept.merged.reflections
    negative = np.flatnonzero(merged.observed < 0)
    assert negative.size > 10
    assert kept.unique.count == merged.count
    assert kept.unique.observed.min() > 0
    assert kept.converted.negative == negative.size
    assert f"{negative.size} merged intensities are negative by noise." in kept.notes
    assert "amplitudes are the Bayesian estimate of French & Wilson (1978)" in kept.applied
    excluded = prepare_reflections(given_, recipe(amplitudes="root_exclude"))
    assert excluded.unique.count == merged.count - negative.size
    assert set(excluded.unique.row) == set(merged.row) - set(merged.row[negative])
    assert f"{negative.size} merged intensities are negative by noise." in excluded.notes
    assert f"{negative.size} reflections without a root are left out." in excluded.notes
    with pytest.raises(InputError) as caught:
        prepare_reflections(given_, recipe(amplitudes="root"))
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


def plain_kinds(indices):
    """ε and centric of P2₁2₁2₁ by what its twofold axes do: 2 on an axis, centric where an index is zero."""
    return np.where(np.count_nonzero(indices, axis=1) == 1, 2, 1), np.any(indices == 0, axis=1)


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
    given_ = measured(OR, OR.sphere(D_MIN), quantity="amplitude")
    made = [prepare_reflections(given_, recipe(amplitudes=rule)) for rule in ("bayesian", "root", "root_exclude")]
    for one in made:
        assert one.converted is None
        np.testing.assert_array_equal(one.unique.observed, made[0].unique.observed)
        assert not any("amplitudes are" in words for words in one.applied)
        assert NO_CORRECTION not in one.notes


# The zero term


@pytest.mark.parametrize(("phase", "sign"), [(0.0, 1), (math.pi, -1), (None, 1)], ids=["0°", "180°", "no phase"])
def test_the_zero_term_of_its_row(phase, sign):
    given_ = with_row(measured(OR, OR.sphere(1.5), quantity="amplitude"), (0, 0, 0), 150.0, phase)
    prepared = prepare_reflections(given_, recipe())
    assert prepared.zero_term == pytest.approx(sign * 150)
    assert prepared.given.count == given_.count - 1
    assert f"zero term {sign * 150} of its own row" in prepared.applied
    made = prepared.coefficients()
    assert by_index(made)[0, 0, 0] == pytest.approx(sign * 150 / OR.lattice.volume)
    agrees_with_the_structure(made, OR)


def test_the_zero_term_is_scaled_with_the_others():
    given_ = with_row(measured(OR, OR.sphere(1.5), quantity="amplitude"), (0, 0, 0), 150.0, 0.0)
    prepared = prepare_reflections(given_, recipe(scale="factor", factor=4.0, content=CONTENT, units=4))
    assert prepared.zero_term == pytest.approx(600)
    assert not any("of the content" in words for words in prepared.applied)


def test_the_zero_term_given_twice_alike():
    given_ = measured(OR, OR.sphere(1.5), quantity="amplitude")
    given_ = with_row(with_row(given_, (0, 0, 0), 150.0, 0.0), (0, 0, 0), 150.0, 0.0)
    prepared = prepare_reflections(given_, recipe())
    assert prepared.zero_term == pytest.approx(150)
    assert prepared.given.count == given_.count - 2


def test_an_intensity_has_no_zero_term():
    given_ = with_row(exact(), (0, 0, 0), 1e4, 0.0)
    prepared = prepare_reflections(given_, recipe(amplitudes="root"))
    assert prepared.zero_term is None
    assert prepared.given.count == given_.count - 1
    assert "1 rows of the zero term hold an intensity, which has no sign, and are left out." in prepared.notes
    assert prepared.coefficients().tally.zero_term == "absent"


def test_a_zero_term_that_is_not_real_belongs_to_a_complex_density():
    given_ = with_row(measured(OR, OR.sphere(1.5), quantity="amplitude"), (0, 0, 0), 150.0, math.radians(30))
    with pytest.raises(InputError) as caught:
        prepare_reflections(given_, recipe())
    assert caught.value.path == ("phase",)
    assert caught.value.rows == (given_.count - 1,)
    prepared = prepare_reflections(given_, recipe(friedel=False))
    expected = 150 * complex(math.sqrt(3) / 2, 0.5)
    assert prepared.zero_term == pytest.approx(expected)
    assert by_index(prepared.coefficients())[0, 0, 0] == pytest.approx(expected / OR.lattice.volume)


# The scale


def test_the_zero_term_of_the_content_where_the_scale_is_absolute():
    asked = {"amplitudes": "root", "content": CONTENT, "units": 4.0}
    prepared = prepare_reflections(exact(scale=0.04), recipe(scale="factor", factor=5.0, **asked))
    assert prepared.zero_term == 4 * ELECTRONS
    assert f"zero term {4 * ELECTRONS} of the content, {FORMULA} × 4" in prepared.applied
    assert by_index(prepared.coefficients())[0, 0, 0] == pytest.approx(4 * ELECTRONS / OR.lattice.volume)
    assert prepare_reflections(exact(), recipe(**asked)).zero_term is None


def test_a_factor_multiplies_amplitudes():
    """Of amplitudes made from intensities too: on k|F|² it is k^−½."""
    prepared = prepare_reflections(exact(scale=0.04), recipe(amplitudes="root", scale="factor", factor=0.04**-0.5))
    agrees_with_the_structure(prepared.coefficients(), OR)
    assert prepared.unique.scale == "absolute"
    assert prepared.plot is None
    assert "amplitudes multiplied by 5" in prepared.applied
    assert NO_SCALE not in prepared.notes
    noise = prepare_reflections(noisy(), recipe())
    scaled = prepare_reflections(noisy(), recipe(scale="factor", factor=3.0))
    np.testing.assert_allclose(scaled.unique.observed, 3 * noise.unique.observed, rtol=1e-14)
    np.testing.assert_allclose(scaled.unique.sigma, 3 * noise.unique.sigma, rtol=1e-14)


CENTRED = {
    "P 21 21 21": {},
    "C 1 2 1": {"lengths": (14.1, 7.3, 9.2), "angles": (90.0, 101.0, 90.0)},
    "C 1 2/c 1": {"lengths": (14.1, 8.3, 11.2), "angles": (90.0, 101.0, 90.0)},
    "F 2 2 2": {"lengths": (13.1, 15.2, 17.3)},
}


@pytest.mark.parametrize("symbol", CENTRED)
def test_wilsons_plot_recovers_scale_and_b_in_every_centring(symbol):
    """ln k and B of four structures at random: their mean within 4 of its own uncertainties, some 6 % of k.

    A centring left out of the sum of squares would be a factor 2 or 4 in k, ten such uncertainties or more.
    """
    scale = 0.02
    deviations, variances = [], []
    for seed in range(4):
        one = crystal(symbol, seed=seed, **CENTRED[symbol])
        given_ = measured(one, one.sphere(0.9, half=True), scale=scale, relative=0.02, floor=0.05, seed=seed)
        asked = Recipe(group=one.group, scale="wilson", content=CONTENT, units=one.units)
        prepared = prepare_reflections(given_, asked)
        plot = prepared.plot
        deviations.append((math.log(plot.scale / scale), plot.b - B))
        variances.append(((plot.scale_sigma / plot.scale) ** 2, plot.b_sigma**2))
        assert prepared.unique.scale == "absolute"
        assert prepared.zero_term == one.units * ELECTRONS
        assert any("put on the absolute scale by Wilson's plot" in words for words in prepared.applied)
        # What is divided by k as an intensity is divided by √k as an amplitude.
        bare = prepare_reflections(given_, replace(asked, scale="none"))
        np.testing.assert_allclose(prepared.unique.observed, bare.unique.observed / math.sqrt(plot.scale), rtol=1e-13)
    bound = 4 * np.sqrt(np.sum(variances, axis=0)) / 4
    assert np.all(np.abs(np.mean(deviations, axis=0)) < bound)
    assert bound[0] < math.log(2) / 2


def test_wilsons_plot_is_that_of_the_merged_reflections():
    """With Σf² by xraydb, ε and centric by plain counting. The libraries' tables agree to 1e-6 of an atom."""
    prepared = prepare_reflections(noisy(), recipe(scale="wilson", content=CONTENT, units=4))
    merged = prepared.merged.reflections
    s = OR.lattice.sine_over_wavelength(merged.indices)
    squares = 4 * sum(xraydb.f0(name, s) ** 2 for name in ATOMS)
    epsilon, centric = plain_kinds(merged.indices)
    plain = wilson_plot(merged, squares, epsilon=epsilon, centric=centric)
    assert prepared.plot.scale == pytest.approx(plain.scale, rel=1e-5)
    assert prepared.plot.scale_sigma == pytest.approx(plain.scale_sigma, rel=1e-5)
    assert prepared.plot.b == pytest.approx(plain.b, abs=1e-5)
    without = wilson_plot(merged, squares, centric=centric)
    assert without.scale != pytest.approx(plain.scale, rel=1e-3)


@settings(max_examples=10)
@given(exponent=st.integers(-20, 20))
def test_wilsons_scale_follows_the_scale_of_the_data(exponent):
    """Law: intensities times c give the same absolute amplitudes; c is a power of two, but logarithms round."""
    asked = recipe(scale="wilson", content=CONTENT, units=4)
    factor = 2.0**exponent
    one, other = prepare_reflections(noisy(), asked), prepare_reflections(noisy().scaled(factor), asked)
    assert other.plot.scale == pytest.approx(factor * one.plot.scale, rel=1e-9)
    np.testing.assert_allclose(other.unique.observed, one.unique.observed, rtol=1e-9)
    np.testing.assert_allclose(other.unique.sigma, one.unique.sigma, rtol=1e-9)


def test_wilson_against_scattering_lengths():
    """Atoms at random with the b of carbon, which no angle weakens: k|F|² is back on fm²."""
    length = 6.646  # fm, Sears, Neutron News 3 (1992) 26, memory
    sites = np.random.default_rng(5).random((60, 3))
    indices = OR.sphere(0.9, half=True)
    factors = length * np.exp(2j * np.pi * (indices @ sites.T)).sum(axis=1)
    given_ = replace(measured(OR, indices), observed=7.0 * np.abs(factors) ** 2, phase=np.angle(factors))
    asked = Recipe(group=P1, scale="wilson", content=composition("C"), units=60, probe="neutron", amplitudes="root")
    prepared = prepare_reflections(given_, asked)
    assert prepared.plot.scale == pytest.approx(7.0, abs=4 * prepared.plot.scale_sigma)
    assert prepared.plot.scale_sigma < 1
    assert abs(prepared.plot.b) < 4 * prepared.plot.b_sigma
    assert prepared.zero_term == pytest.approx(60 * length, rel=1e-3)


# Outliers


def spoilt(rows, factor=4.0):
    """Noisy strong measurements of which some are wrong by a factor."""
    given_ = noisy()
    observed = given_.observed.copy()
    observed[rows] *= factor
    return replace(given_, observed=observed)


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
    given_ = measured(OR, np.concatenate([octant, -octant]), scale=0.02, relative=0.03, floor=0.3)
    strongest = int(np.argmax(given_.observed))
    observed = given_.observed.copy()
    observed[strongest] *= 3
    prepared = prepare_reflections(replace(given_, observed=observed), recipe(reject_outliers=True))
    assert prepared.merged.overall.measurements == given_.count
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
    given_ = exact()
    kept = prepare_reflections(given_, recipe(amplitudes="root"))
    # Of one octant alone, so that an orbit has its phase from a single row.
    octant = given_.select(np.all(given_.indices >= 0, axis=1) & (given_.observed > 0))
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
    given_ = replace(
        measured(OR, OR.sphere(3.0)).select(np.arange(14)),
        lattice=line,
        indices=orders[:, None],
        observed=factors**2,
        phase=np.where(factors > 0, 0.0, np.pi),
    )
    prepared = prepare_reflections(given_, Recipe(group=stack_group("-1"), amplitudes="root"))
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
    given_ = replace(
        template,
        lattice=plane,
        indices=np.asfortranarray(indices),
        observed=factors**2,
        phase=np.where(factors > 0, 0.0, np.pi),
        row=np.arange(len(indices)),
    )
    prepared = prepare_reflections(given_, Recipe(group=group, amplitudes="root"))
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
    given_ = with_row(spoilt(of_orbits(noisy(), 8, 3)), (0, 0, 0), 5.0, 0.0, 1.0)
    prepared = prepare_reflections(given_, recipe(amplitudes=rule, reject_outliers=reject))
    merged = prepared.merged
    rejected = np.count_nonzero(merged.outliers.rejected)
    assert rejected == (3 if reject else 0)
    assert prepared.given.count == given_.count - 1
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
    given_, untouched = noisy(), noisy()
    np.random.seed(1)  # noqa: NPY002  (whatever the state of the global generator)
    one = prepare_reflections(given_, asked)
    np.random.seed(2)  # noqa: NPY002
    two = prepare_reflections(given_, asked)
    for first, second in zip(flat(one), flat(two), strict=True):
        np.testing.assert_array_equal(first, second)
    for first, second in zip(flat(given_), flat(untouched), strict=True):
        if isinstance(first, np.ndarray):
            np.testing.assert_array_equal(first, second)
    assert one.merged.overall.cc_half > 0.9


# Refusals


def without_sigma():
    return replace(noisy(), sigma=None)


def zero_alone():
    return with_row(measured(OR, OR.sphere(3.0), quantity="amplitude"), (0, 0, 0), 1.0).select(np.array([-1]))


def two_zero_terms():
    given_ = measured(OR, OR.sphere(3.0), quantity="amplitude")
    return with_row(with_row(given_, (0, 0, 0), 150.0), (0, 0, 0), 151.0)


def wrong_phase():
    """One row of a general orbit turned by 40°."""
    given_ = exact()
    row = np.flatnonzero(np.all(given_.indices > 0, axis=1))[0]
    phase = given_.phase.copy()
    phase[row] += math.radians(40)
    return replace(given_, phase=phase)


def only_absent():
    return measured(OR, np.array([[1, 0, 0], [0, 3, 0]]), floor=1.0)


def few():
    return noisy().select(np.arange(0, 60, 4))


def amplitudes_given():
    return measured(OR, OR.sphere(3.0), quantity="amplitude")


WILSON = {"scale": "wilson", "content": CONTENT, "units": 4}


@pytest.mark.parametrize(
    ("make", "asked", "path"),
    [
        (noisy, {"corrections": (Polarisation(),)}, "wavelength"),
        (noisy, {"corrections": (Polarisation(),), "wavelength": 2.5}, "wavelength"),
        (noisy, {"corrections": (Polarisation(),), "wavelength": -1.0}, "wavelength"),
        (amplitudes_given, {"corrections": (Polarisation(),), "wavelength": 0.7}, "corrections"),
        (noisy, {"amplitudes": "guess"}, "amplitudes"),
        (amplitudes_given, {"amplitudes": "guess"}, "amplitudes"),
        (noisy, {"scale": "guess"}, "scale"),
        (noisy, {"scale": "wilson"}, "content"),
        (noisy, {**WILSON, "probe": "electron"}, "probe"),
        (noisy, {**WILSON, "units": 0.0}, "units"),
        (few, WILSON, "reflections"),
        (noisy, {"scale": "factor"}, "factor"),
        (noisy, {"scale": "factor", "factor": 0.0}, "factor"),
        (noisy, {"scale": "factor", "factor": -2.0}, "factor"),
        (noisy, {"scale": "factor", "factor": math.nan}, "factor"),
        (noisy, {"factor": 2.0}, "factor"),
        (noisy, {**WILSON, "factor": 2.0}, "factor"),
        (without_sigma, {}, "sigma"),
        (zero_alone, {}, "indices"),
        (two_zero_terms, {}, "indices"),
        (only_absent, {}, "indices"),
        (wrong_phase, {"amplitudes": "root"}, "phase"),
        (noisy, {"group": space_group("P 4 2 2")}, "lattice"),
        (noisy, {"group": plane_group("p2")}, "group"),
    ],
)
def test_refusals_name_their_place(make, asked, path):
    with pytest.raises(InputError) as caught:
        prepare_reflections(make(), recipe(**asked))
    assert caught.value.path == (path,)
    assert caught.value.reason
    assert caught.value.cure


def test_rows_are_those_of_the_source():
    """Whatever was left out before: rows 1000, 1001, … here."""
    given_ = two_zero_terms()
    with pytest.raises(InputError) as caught:
        prepare_reflections(replace(given_, row=given_.row + 1000), recipe())
    assert caught.value.rows == (1000 + given_.count - 2, 1000 + given_.count - 1)
