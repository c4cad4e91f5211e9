"""From columns to a set: conventions, Friedel mates, repeats, the zero term, counts."""

from __future__ import annotations

import math

import numpy as np
import pytest

from engine import Columns, assemble, evaluate
from engine.assembly import MATE_AGREEMENT
from engine.sampling import points
from tests.strategies import CRYSTAL, LATTICES, PLANAR, STACK, forward, listing, oracle, refusal_of

ROUNDING = 1e-12
"""Of a sum over some hundred terms, relative to its largest value."""

ATOMS = np.array([[0.11, 0.23, 0.31], [0.42, 0.17, 0.68], [0.75, 0.59, 0.08], [0.27, 0.84, 0.47]])
"""Four sites that form a screw; no inversion, mirror or rotation relates them."""
STRENGTHS = np.array([6.0, 7.0, 8.0, 16.0])


def structure_factors(dimension, strengths=STRENGTHS):
    """F(h) = Σ f_j exp(−2 s²) exp(2πi h·x_j) of the four sites, over all h out to a limit, with h = 0."""
    lattice = LATTICES[dimension]
    reach = {1: (30,), 2: (8, 9), 3: (4, 6, 8)}[dimension]
    ranges = np.meshgrid(*(np.arange(-n, n + 1) for n in reach), indexing="ij")
    h = np.stack(ranges, axis=-1).reshape(-1, dimension)
    s = lattice.sine_over_wavelength(h)
    damping = np.exp(-2 * s**2)
    factors = damping * (np.exp(2j * np.pi * h @ ATOMS[:, :dimension].T) @ strengths)
    return lattice, h, factors


def set_of(lattice=STACK, indices=((1, 2, 3),), *, values="density_coefficient", options=None, **columns):
    """A set from columns that have a default strength."""
    if not {"amplitude", "real", "imag"} & columns.keys():
        columns["amplitude"] = np.arange(1.0, len(indices[0]) + 1)
        columns.setdefault("phase_deg", np.full(len(indices[0]), 30.0))
    return assemble(lattice, Columns(indices=indices, **columns), values=values, **(options or {}))


# Conventions.


@pytest.mark.parametrize("density", ["real", "complex"])
@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_structure_factors_of_a_chiral_structure_give_its_density(dimension, density):
    """ρ = (1/V) Σ F exp(−2πi h·x) term by term, with the sign of the exponent written out here."""
    strengths = STRENGTHS if density == "real" else STRENGTHS * np.array([1, 1 + 0.3j, 1 - 0.2j, 1 + 0.1j])
    lattice, h, factors = structure_factors(dimension, strengths)
    made = assemble(
        lattice,
        Columns(indices=tuple(h.T), real=factors.real, imag=factors.imag),
        values="structure_factor",
        density=density,
    )
    x = np.concatenate([ATOMS[:, :dimension], np.random.default_rng(2).random((30, dimension))])
    expected = np.exp(-2j * np.pi * x @ h.T) @ factors / lattice.volume
    inverted = np.exp(2j * np.pi * x @ h.T) @ factors / lattice.volume
    values = evaluate(made, points(lattice, x), method="direct").values
    largest = np.abs(expected).max()
    assert np.abs(values - expected).max() < ROUNDING * largest
    # The other sign is another structure: the test could not pass by accident.
    assert np.abs(values - inverted).max() > 0.2 * largest
    if density == "real":
        # The heaviest site is the highest point of the map.
        assert values.argmax() == 3


@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_coefficients_are_the_factors_of_the_opposite_index_over_the_volume(dimension):
    lattice, h, factors = structure_factors(dimension, STRENGTHS * (1 + 0.1j))
    made = assemble(
        lattice,
        Columns(indices=tuple(h.T), real=factors.real, imag=factors.imag),
        values="structure_factor",
        density="complex",
    )
    table = {tuple(row): value for row, value in zip(h.tolist(), factors, strict=True)}
    expected = [table[tuple(-row)] / lattice.volume for row in made.indices]
    np.testing.assert_allclose(made.values, expected, rtol=1e-14)


def test_density_coefficients_are_taken_as_they_are():
    wanted = listing(PLANAR, real=False, seed=4)
    made = wanted.coefficients()
    table = {tuple(row): value for row, value in zip(wanted.indices.tolist(), wanted.values, strict=True)}
    assert made.count == len(table)
    np.testing.assert_array_equal(made.values, [table[tuple(row)] for row in made.indices.tolist()])


def test_amplitude_and_phase_are_the_polar_form():
    polar = set_of(indices=((1, 2, 3),), amplitude=[2.0, 3.0, 5.0], phase_deg=[40.0, -75.0, 400.0])
    radians = np.deg2rad([40, -75, 40])
    np.testing.assert_allclose(polar.values, [2, 3, 5] * np.exp(1j * radians), rtol=1e-14)


@pytest.mark.parametrize(("degrees", "value"), [(0, 1), (90, 1j), (180, -1), (270, -1j), (-90, -1j), (540, -1)])
def test_phases_of_centric_sets_are_exact(degrees, value):
    assert set_of(indices=((1,),), amplitude=[3.0], phase_deg=[float(degrees)]).values[0] == 3 * value


def test_uncertainties_are_divided_by_the_volume_with_the_factors():
    made = set_of(values="structure_factor", sigma=[0.5, 1.0, 2.0], phase_sigma_deg=[10.0, 20.0, 30.0])
    np.testing.assert_allclose(made.sigma, np.array([0.5, 1.0, 2.0]) / STACK.volume, rtol=1e-15)
    np.testing.assert_allclose(made.phase_sigma, np.deg2rad([10, 20, 30]), rtol=1e-15)


def test_the_columns_are_not_modified():
    columns = {
        "amplitude": np.array([1.0, 2.0, 2.0]),
        "phase_deg": np.array([10.0, np.nan, -20.0]),
        "sigma": np.array([0.1, 0.2, 0.3]),
        "phase_sigma_deg": np.array([1.0, 2.0, 3.0]),
        "merit": np.array([1.0, 0.5, 0.2]),
    }
    indices = np.array([3.0, -2.0, 5.0])
    before = {name: column.copy() for name, column in columns.items()}
    made = set_of(indices=(indices,), values="structure_factor", options={"mean": 3.0}, **columns)
    for name, column in columns.items():
        np.testing.assert_array_equal(column, before[name])
        assert not np.may_share_memory(column, getattr(made, name.removesuffix("_deg"), np.zeros(1)))
    np.testing.assert_array_equal(indices, [3, -2, 5])


# Friedel mates.


@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_half_of_the_pairs_gives_what_all_of_them_give(dimension):
    whole = listing(LATTICES[dimension], seed=6)
    # A random one of each pair, so that both halves of reciprocal space are met.
    rng = np.random.default_rng(1)
    half = forward(whole.indices)
    turned = np.where(rng.random(half.sum()) < 0.5, -1, 1)
    indices = whole.indices[half] * turned[:, None]
    values = np.where(turned < 0, whole.values[half].conj(), whole.values[half])
    made = assemble(
        whole.lattice,
        Columns(indices=tuple(indices.T), real=values.real, imag=values.imag),
        values="density_coefficient",
    )
    both = whole.coefficients()
    np.testing.assert_array_equal(made.indices, both.indices)
    np.testing.assert_allclose(made.values, both.values, rtol=1e-15)
    assert made.tally.mates_joined == 0
    assert both.tally.mates_joined == (len(whole.values) - 1) // 2


@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_a_real_set_holds_one_of_each_pair_in_lexical_order(dimension):
    made = listing(LATTICES[dimension], seed=6).coefficients()
    assert made.real
    assert forward(made.indices).all()
    rows = [tuple(row) for row in made.indices.tolist()]
    assert rows == sorted(set(rows))


def test_a_complex_density_keeps_every_coefficient():
    indices = ((1, -1, 2, -2, 0),)
    made = set_of(
        indices=indices,
        real=[1.0, 5.0, 2.0, 7.0, 3.0],
        imag=[1.0, 4.0, 0.0, 0.0, 9.0],
        options={"density": "complex"},
    )
    assert not made.real
    np.testing.assert_array_equal(made.indices[:, 0], [-2, -1, 0, 1, 2])
    np.testing.assert_array_equal(made.values, [7, 5 + 4j, 3 + 9j, 1 + 1j, 2])
    assert made.tally.mates_joined == 0


def test_mates_that_agree_are_averaged_by_their_weights():
    first, second, s_1, s_2 = 10 + 2j, 10.3 + 2.1j, 0.1, 0.2
    made = set_of(indices=((4, -4),), real=[first.real, second.real], imag=[first.imag, -second.imag], sigma=[s_1, s_2])
    w_1, w_2 = 1 / s_1**2, 1 / s_2**2
    np.testing.assert_allclose(made.values, [(w_1 * first + w_2 * second) / (w_1 + w_2)], rtol=1e-14)
    np.testing.assert_allclose(made.sigma, [1 / math.sqrt(w_1 + w_2)], rtol=1e-14)
    assert (made.count, made.tally.mates_joined, made.tally.rows) == (1, 1, 2)


def test_structure_factor_mates_are_averaged_too():
    made = set_of(
        values="structure_factor", indices=((4, -4),), amplitude=[10.0, 10.2], phase_deg=[50.0, -50.0], sigma=[0.1, 0.1]
    )
    expected = 10.1 * np.exp(-1j * np.deg2rad(50)) / STACK.volume
    np.testing.assert_allclose(made.values, [expected], rtol=1e-14)


def test_merits_of_mates_are_averaged_and_phase_sigmas_combined():
    made = set_of(
        indices=((4, -4),),
        amplitude=[10.0, 10.0],
        phase_deg=[50.0, -50.0],
        merit=[0.6, 0.8],
        phase_sigma_deg=[3.0, 4.0],
    )
    np.testing.assert_allclose(made.merit, [0.7], rtol=1e-14)
    expected = np.deg2rad(1 / math.sqrt(1 / 9 + 1 / 16))
    np.testing.assert_allclose(made.phase_sigma, [expected], rtol=1e-14)


def test_without_uncertainties_mates_must_agree_to_the_rounding_of_print():
    made = set_of(indices=((4, -4),), real=[10.0, 10.000001], imag=[0.0, 0.0])
    np.testing.assert_allclose(made.values, [10.0000005], rtol=1e-15)
    refusal = refusal_of(lambda: set_of(indices=((4, -4),), real=[10.0, 10.001], imag=[0.0, 0.0]))
    assert refusal.rows == (0, 1)


@pytest.mark.parametrize(("gap", "agrees"), [(0.99, True), (1.01, False)])
def test_the_limit_of_agreement(gap, agrees):
    apart = gap * MATE_AGREEMENT * math.hypot(0.3, 0.4)
    columns = {"real": [50.0, 50.0 + apart], "imag": [0.0, 0.0], "sigma": [0.3, 0.4]}
    if agrees:
        assert set_of(indices=((4, -4),), **columns).tally.mates_joined == 1
    else:
        assert refusal_of(lambda: set_of(indices=((4, -4),), **columns)).rows == (0, 1)


def test_errors_of_the_phases_count_in_the_agreement():
    columns = {"amplitude": [10.0, 10.0], "phase_deg": [30.0, -36.0], "sigma": [0.1, 0.1]}
    refusal_of(lambda: set_of(indices=((4, -4),), **columns))
    assert set_of(indices=((4, -4),), phase_sigma_deg=[3.0, 3.0], **columns).tally.mates_joined == 1


def test_mates_with_the_same_phase_are_not_mates():
    """Both of a pair with +50°: the reader's table is of another convention, or not of a real density."""
    refusal = refusal_of(lambda: set_of(indices=((4, -4),), amplitude=[10.0, 10.0], phase_deg=[50.0, 50.0]))
    assert refusal.rows == (0, 1)
    assert "Friedel" in refusal.reason


def test_the_worst_pairs_are_named_first():
    orders = np.arange(1, 16)
    real = np.full(15, 10.0)
    other = real + 0.1 * np.array([1, 9, 2, 8, 3, 7, 4, 6, 5, 0, 0, 0, 10, 11, 12])
    refusal = refusal_of(
        lambda: set_of(
            indices=(np.concatenate([orders, -orders]),),
            real=np.concatenate([real, other]),
            imag=np.zeros(30),
            sigma=np.full(30, 0.001),
        )
    )
    assert "12 Friedel pairs" in refusal.reason
    # Orders 15, 14, 13, 2, 4 disagree most; a row and its mate are neighbours in the list.
    assert refusal.rows == (14, 29, 13, 28, 12, 27, 1, 16, 3, 18)


def test_a_mate_lends_its_phase():
    made = set_of(indices=((4, -4),), amplitude=[10.0, 10.2], phase_deg=[np.nan, -50.0], sigma=[0.1, 0.1])
    np.testing.assert_allclose(made.values, [10.1 * np.exp(1j * np.deg2rad(50))], rtol=1e-14)
    assert made.phase_known.all()
    refusal_of(lambda: set_of(indices=((4, -4),), amplitude=[10.0, 12.0], phase_deg=[np.nan, -50.0], sigma=[0.1, 0.1]))


def test_two_mates_without_a_phase_stay_without():
    made = set_of(indices=((-4, 4),), amplitude=[10.0, 10.2], phase_deg=[np.nan, np.nan], sigma=[0.1, 0.1])
    assert not made.phase_known.any()
    np.testing.assert_allclose(made.values, [10.1], rtol=1e-14)


# Repeats.


def test_rows_that_repeat_each_other_are_joined():
    made = set_of(
        indices=((4, 2, 4, 4),),
        amplitude=[3.0, 5.0, 3.0, 3.0],
        phase_deg=[20.0, 0.0, 20.0, 380.0],
        sigma=[0.1, 0.2, 0.1, 0.1],
    )
    assert made.count == 2
    assert made.tally.repeats_joined == 2
    np.testing.assert_allclose(made.values, [5, 3 * np.exp(1j * np.deg2rad(20))], rtol=1e-14)
    np.testing.assert_array_equal(made.sigma, [0.2, 0.1])


@pytest.mark.parametrize(
    "differing",
    [
        {"amplitude": [3.0, 5.0, 3.1]},
        {"phase_deg": [20.0, 0.0, 21.0]},
        {"phase_deg": [0.0, 0.0, np.nan]},
        {"sigma": [0.1, 0.2, 0.3]},
        {"phase_sigma_deg": [1.0, 1.0, 2.0]},
        {"merit": [0.5, 0.5, 0.6]},
    ],
    ids=["amplitude", "phase", "phase missing", "sigma", "phase sigma", "merit"],
)
@pytest.mark.parametrize("density", ["real", "complex"])
def test_rows_that_repeat_with_other_values_are_refused(differing, density):
    columns = {"amplitude": [3.0, 5.0, 3.0], "phase_deg": [20.0, 0.0, 20.0], **differing}
    refusal = refusal_of(lambda: set_of(indices=((4, 2, 4),), options={"density": density}, **columns))
    assert refusal.rows == (0, 2)


def test_repeats_on_both_sides_of_a_pair_are_joined_before_the_mates():
    made = set_of(
        indices=((4, -4, 4, -4),),
        amplitude=[3.0, 3.2, 3.0, 3.2],
        phase_deg=[20.0, -20.0, 20.0, -20.0],
        sigma=[0.1, 0.1, 0.1, 0.1],
    )
    assert (made.count, made.tally.repeats_joined, made.tally.mates_joined) == (1, 2, 1)
    np.testing.assert_allclose(np.abs(made.values), [3.1], rtol=1e-14)


# Missing phases.


def test_unknown_phases_are_kept_and_marked():
    made = set_of(indices=((1, 2, 3),), amplitude=[2.0, 3.0, 5.0], phase_deg=[40.0, np.nan, 0.0])
    np.testing.assert_array_equal(made.phase_known, [True, False, True])
    assert made.unphased == 1
    assert made.values[1] == 3.0


def test_without_a_column_of_phases_none_is_known():
    assert set_of(indices=((1, 2),), amplitude=[2.0, 3.0]).unphased == 2


def test_unknown_phases_can_be_refused():
    refusal = refusal_of(
        lambda: set_of(
            indices=((1, 2, 3),),
            amplitude=[2.0, 3.0, 5.0],
            phase_deg=[40.0, np.nan, np.nan],
            options={"missing_phase": "refuse"},
        )
    )
    assert refusal.path == ("phase_deg",)
    assert refusal.rows == (1, 2)


# The zero term.


@pytest.mark.parametrize(
    ("values", "expected"), [("density_coefficient", 3.5), ("structure_factor", 3.5 / STACK.volume)]
)
def test_the_mean_becomes_the_zero_term(values, expected):
    made = set_of(values=values, options={"mean": 3.5}, sigma=[0.1, 0.1, 0.1], merit=[0.5, 0.5, 0.5])
    place = np.flatnonzero(~made.indices.any(axis=1))
    assert made.values[place] == pytest.approx(expected, rel=1e-15)
    assert made.sigma[place] == 0
    assert made.merit[place] == 1
    assert made.phase_known[place]
    assert made.tally.zero_term == "given"
    assert made.tally.rows == 3


@pytest.mark.parametrize("density", ["real", "complex"])
@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_the_zero_term_takes_its_place_in_the_order(dimension, density):
    whole = listing(LATTICES[dimension], real=density == "real", seed=9, zero=False)
    made = whole.coefficients(mean=2.0)
    rows = [tuple(row) for row in made.indices.tolist()]
    assert rows == sorted(rows)
    assert made.values[rows.index((0,) * dimension)] == 2.0
    assert made.count == whole.coefficients().count + 1


def test_a_complex_density_has_a_complex_mean():
    made = set_of(options={"density": "complex", "mean": 2 - 1j})
    assert made.values[0] == 2 - 1j


def test_a_measured_zero_term():
    made = set_of(indices=((0, 1),), amplitude=[4.0, 1.0], phase_deg=[180.0, 0.0])
    assert made.values[0] == -4.0
    assert made.tally.zero_term == "measured"
    assert set_of().tally.zero_term == "absent"


def test_the_zero_term_twice_is_refused():
    refusal = refusal_of(
        lambda: set_of(indices=((1, 0),), amplitude=[1.0, 4.0], phase_deg=[0.0, 0.0], options={"mean": 4.0})
    )
    assert refusal.path == ("mean",)
    assert "row 1" in refusal.reason
    refusal = refusal_of(lambda: set_of(indices=((0, 0),), amplitude=[1.0, 4.0], phase_deg=[0.0, 0.0]))
    assert refusal.rows == (0, 1)
    assert set_of(indices=((0, 0),), amplitude=[4.0, 4.0], phase_deg=[0.0, 0.0]).tally.repeats_joined == 1


def test_the_zero_term_of_a_real_density_is_real():
    refusal = refusal_of(lambda: set_of(indices=((1, 0),), amplitude=[1.0, 4.0], phase_deg=[0.0, 20.0]))
    assert refusal.rows == (1,)
    assert refusal_of(lambda: set_of(options={"mean": 1 + 1j})).path == ("mean",)
    nearly = set_of(indices=((0,),), real=[4.0], imag=[1e-8])
    assert nearly.values[0] == 4.0


@pytest.mark.parametrize("mean", [np.nan, np.inf, complex(0, np.inf)])
def test_a_mean_that_is_not_finite_is_refused(mean):
    assert refusal_of(lambda: set_of(options={"density": "complex", "mean": mean})).path == ("mean",)


# Counts.


def test_the_tally_counts_every_row():
    rows = (0, 1, -1, 1, 2, -2, 3, 3, 3)
    made = set_of(indices=(rows,), amplitude=[abs(m) + 1.0 for m in rows], phase_deg=[0.0] * 9)
    tally = made.tally
    assert (tally.rows, tally.repeats_joined, tally.mates_joined) == (9, 3, 2)
    assert tally.beyond_resolution == 0
    assert made.count == tally.rows - tally.repeats_joined - tally.mates_joined


def test_unit_is_carried_along():
    assert set_of(options={"unit": "e/Å³"}).unit == "e/Å³"
    assert set_of().unit == "arbitrary"


def test_a_set_is_the_same_whatever_the_order_of_its_rows():
    whole = listing(CRYSTAL, seed=3)
    order = np.random.default_rng(8).permutation(len(whole.values))
    first, second = (
        assemble(
            whole.lattice,
            Columns(indices=tuple(whole.indices[rows].T), real=whole.values[rows].real, imag=whole.values[rows].imag),
            values="density_coefficient",
        )
        for rows in (slice(None), order)
    )
    np.testing.assert_array_equal(first.indices, second.indices)
    # Averaging two mates commutes but for the last digit.
    np.testing.assert_allclose(first.values, second.values, rtol=1e-15)


def test_the_set_is_what_the_oracle_sums():
    whole = listing(CRYSTAL, seed=12)
    made = whole.coefficients()
    x = np.random.default_rng(0).random((20, 3))
    complete = made.series().complete()
    np.testing.assert_allclose(oracle(complete.indices, complete.values, x), whole.at(x), atol=1e-12 * whole.weight)
