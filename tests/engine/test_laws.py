"""Laws that hold for any set on any lattice, whatever method sums it.

The bound is relative to Σ|v|, which no value can exceed: a drawn set may well cancel at all the
samples there are, and then its largest value says nothing.
"""

from __future__ import annotations

import numpy as np
from hypothesis import assume, given
from hypothesis import strategies as st

from engine import Columns, Demand, InputError, Lattice, Treatment, assemble, averages, evaluate
from engine.sampling import full_cell, line, plane, points
from tests.strategies import Listing, coordinate, listings, positions, unimodular

EXACT = 1e-12
"""Of a dozen terms with phases of some ten turns: 10·2π·1e-16 each, with room."""

FINE = {1: (13,), 2: (11, 14), 3: (11, 12, 13)}
"""Finer than twice the indices that are drawn, 5; unequal, odd and even."""


def field(wanted, sampling, treatment=None, method=None, **demand):
    return evaluate(wanted.coefficients(), sampling, treatment, Demand(**demand), method=method).values


def at(wanted, x, treatment=None):
    """Values at points, by the direct sum."""
    return field(wanted, points(wanted.lattice, x), treatment, method="direct")


def assert_close(found, expected, wanted, bound=EXACT):
    assert np.shape(found) == np.shape(expected)
    assert np.abs(found - expected).max() < bound * wanted.weight


def drawn(data, **options):
    """A list, and positions for it."""
    wanted = data.draw(listings(**options))
    return wanted, data.draw(positions(wanted.lattice.dimension))


@given(st.data(), st.floats(-3, 3, width=32), st.floats(-3, 3, width=32), st.integers(0, 2**32 - 1))
def test_linearity(data, alpha, beta, seed):
    first, x = drawn(data)
    rng = np.random.default_rng(seed)
    # Another set on the same indices: the first one shifted, which keeps it real.
    shifted = first.values * np.exp(2j * np.pi * first.indices @ rng.random(first.lattice.dimension))
    second = Listing(first.lattice, first.indices, shifted, first.real)
    both = Listing(first.lattice, first.indices, alpha * first.values + beta * second.values, first.real)
    assume(both.weight > 1e-3)
    expected = alpha * at(first, x) + beta * at(second, x)
    assert np.abs(at(both, x) - expected).max() < EXACT * 6 * first.weight


@given(st.data())
def test_a_shift_of_the_density_is_a_ramp_of_the_phases(data):
    wanted, x = drawn(data)
    shift = np.array([data.draw(coordinate) for _ in range(wanted.lattice.dimension)])
    moved = Listing(
        wanted.lattice, wanted.indices, wanted.values * np.exp(-2j * np.pi * wanted.indices @ shift), wanted.real
    )
    assert_close(at(moved, x), at(wanted, x - shift), wanted)


@given(st.data())
def test_a_shift_by_a_lattice_vector_changes_nothing(data):
    wanted, x = drawn(data)
    cells = np.array([data.draw(st.integers(-3, 3)) for _ in range(wanted.lattice.dimension)])
    assert_close(at(wanted, x + cells), at(wanted, x), wanted)


@given(st.data())
def test_a_real_density_is_a_complex_one_without_an_imaginary_part(data):
    wanted, x = drawn(data, real=True)
    same = Listing(wanted.lattice, wanted.indices, wanted.values, False)
    for sampling in (points(wanted.lattice, x), full_cell(wanted.lattice, FINE[wanted.lattice.dimension])):
        made, written_out = field(wanted, sampling, tolerance=1e-12), field(same, sampling, tolerance=1e-12)
        assert made.dtype == np.float64
        assert written_out.dtype == np.complex128
        assert_close(written_out.imag, np.zeros(made.shape), wanted)
        assert_close(made, written_out.real, wanted, 2 * EXACT)


@given(st.data())
def test_conjugate_coefficients_are_the_inverted_density(data):
    wanted, x = drawn(data, real=True)
    inverted = Listing(wanted.lattice, wanted.indices, wanted.values.conj(), True)
    assert_close(at(inverted, x), at(wanted, -x), wanted)


@given(listings())
def test_parseval(wanted):
    """The mean of |n|² over the cell is Σ|v|²; a grid finer than twice the indices has it exactly."""
    values = field(wanted, full_cell(wanted.lattice, FINE[wanted.lattice.dimension]), method="cascade")
    power = (np.abs(wanted.values) ** 2).sum()
    assert abs((np.abs(values) ** 2).mean() - power) < EXACT * power


@given(listings())
def test_the_integral_over_the_cell_is_the_mean_times_the_volume(wanted):
    values = field(wanted, full_cell(wanted.lattice, FINE[wanted.lattice.dimension]))
    zero = wanted.values[~wanted.indices.any(axis=1)].sum()
    volume = abs(np.linalg.det(wanted.lattice.vectors))
    assert abs(values.mean() * volume - zero * volume) < 1e-9 * wanted.weight * volume


@given(st.data())
def test_another_setting_of_the_cell_is_the_same_density(data):
    """Axes U A with the indices U m, at the same Cartesian points, given as structure factors. A sheared
    cell may be flat to one part in a thousand, which costs three digits of the fractional coordinates."""
    wanted, x = drawn(data)
    change = data.draw(unimodular(wanted.lattice.dimension))
    try:
        other = Lattice.from_vectors(change @ wanted.lattice.vectors)
    except InputError:
        assume(False)
    moved = Listing(other, wanted.indices @ change.T, wanted.values, wanted.real)
    cartesian = x @ wanted.lattice.vectors
    np.testing.assert_allclose(
        other.magnitudes(moved.indices), wanted.lattice.magnitudes(wanted.indices), rtol=1e-9, atol=1e-12
    )
    found = evaluate(
        assemble(
            other,
            # F(−m) = n_m V, and the volume is the same.
            Columns(
                indices=tuple(-moved.indices.T),
                real=moved.values.real * wanted.lattice.volume,
                imag=moved.values.imag * wanted.lattice.volume,
            ),
            values="structure_factor",
            density="real" if wanted.real else "complex",
        ),
        points(other, cartesian, coordinates="cartesian"),
        method="direct",
    )
    assert_close(found.values, at(wanted, x), wanted, 1e-9)


@given(listings(dimension=3), st.integers(1, 2))
def test_exchanging_the_axes_in_a_circle_transposes_the_grid(wanted, turns):
    order = np.roll(np.arange(3), turns)
    lattice = Lattice.from_vectors(wanted.lattice.vectors[order])
    turned = Listing(lattice, wanted.indices[:, order], wanted.values, wanted.real)
    shape = np.array(FINE[3])
    found = field(turned, full_cell(lattice, tuple(int(n) for n in shape[order])), method="cascade")
    expected = field(wanted, full_cell(wanted.lattice, FINE[3]), method="cascade")
    assert_close(found, expected.transpose(order), wanted)


@given(st.data())
def test_a_slice_is_the_plane_of_the_grid_and_a_profile_the_line_of_the_slice(data):
    wanted = data.draw(listings(dimension=3))
    shape = data.draw(st.tuples(*(st.integers(2, 9) for _ in range(3))))
    i, j, k = (data.draw(st.integers(0, n - 1)) for n in shape)
    lattice = wanted.lattice
    grid = field(wanted, full_cell(lattice, shape), method="cascade")
    for method in ("cascade", "direct"):
        across_c = field(wanted, plane(lattice, [0, 0, k / shape[2]], [1, 0, 0], [0, 1, 0], shape[:2]), method=method)
        assert_close(across_c, grid[:, :, k], wanted)
        across_a = field(wanted, plane(lattice, [i / shape[0], 0, 0], [0, 1, 0], [0, 0, 1], shape[1:]), method=method)
        assert_close(across_a, grid[i], wanted)
        start = np.array([0, j / shape[1], k / shape[2]])
        along_a = line(lattice, start, start + np.eye(3)[0], shape[0], include_end=False)
        assert_close(field(wanted, along_a, method=method), across_c[:, j], wanted)
        start = np.array([i / shape[0], j / shape[1], 0])
        along_c = line(lattice, start, start + np.eye(3)[2], shape[2], include_end=False)
        assert_close(field(wanted, along_c, method=method), across_a[j], wanted)


@given(st.data())
def test_a_profile_of_a_planar_lattice_is_the_line_of_its_grid(data):
    wanted = data.draw(listings(dimension=2))
    shape = data.draw(st.tuples(st.integers(2, 9), st.integers(2, 9)))
    i = data.draw(st.integers(0, shape[0] - 1))
    grid = field(wanted, full_cell(wanted.lattice, shape), method="cascade")
    along_b = line(wanted.lattice, [i / shape[0], 0], [i / shape[0], 1], shape[1], include_end=False)
    assert_close(field(wanted, along_b, method="direct"), grid[i], wanted)


@given(listings(dimension=3), st.sampled_from((0, 1, 2)))
def test_a_lateral_average_is_the_mean_over_the_plane(wanted, axis):
    lattice, normal = wanted.lattice, np.eye(3, dtype=int)[axis]
    grid = field(wanted, full_cell(lattice, FINE[3]), method="cascade")
    others = tuple(j for j in range(3) if j != axis)
    profile = line(lattice, np.zeros(3), normal, FINE[3][axis], include_end=False)
    treatment = Treatment(average=averages.lateral(lattice, normal))
    assert_close(field(wanted, profile, treatment, method="direct"), grid.mean(axis=others), wanted)


@given(st.data())
def test_points_can_be_split(data):
    wanted, x = drawn(data)
    more = data.draw(positions(wanted.lattice.dimension))
    for method in ("direct", "nonuniform"):
        lattice = wanted.lattice
        whole = field(wanted, points(lattice, np.concatenate([x, more])), method=method)
        parts = [field(wanted, points(lattice, one), method=method) for one in (x, more)]
        assert_close(whole, np.concatenate(parts), wanted, EXACT if method == "direct" else 2e-9)


@given(listings(), st.sampled_from((1, 2)))
def test_all_methods_agree(wanted, threads):
    shape = {1: (7,), 2: (8, 9), 3: (6, 7, 10)}[wanted.lattice.dimension]
    sampling = full_cell(wanted.lattice, shape)
    values = {
        method: field(wanted, sampling, method=method, threads=threads)
        for method in ("direct", "cascade", "nonuniform")
    }
    free = at(wanted, sampling.positions().reshape(-1, len(shape))).reshape(shape)
    assert_close(values["cascade"], values["direct"], wanted)
    assert_close(free, values["direct"], wanted)
    # The tolerance that is demanded by default.
    assert_close(values["nonuniform"], values["direct"], wanted, 1e-9)


@given(listings(), st.sampled_from(("double", "single")))
def test_precision_is_kept(wanted, precision):
    sampling = full_cell(wanted.lattice, FINE[wanted.lattice.dimension])
    expected = wanted.at(sampling.positions())
    for method, bound in (("direct", EXACT), ("cascade", EXACT), ("nonuniform", 1e-9)):
        found = field(wanted, sampling, method=method, precision=precision)
        assert_close(found, expected, wanted, bound if precision == "double" else 1e-5)


@given(st.data())
def test_the_laplacian_is_the_divergence_of_the_gradient(data):
    """Each component of the gradient is a density again, whose own gradient has that component."""
    wanted, x = drawn(data)
    g = wanted.lattice.wavevectors(wanted.indices)
    total = 0.0
    for j in range(wanted.lattice.dimension):
        component = Listing(wanted.lattice, wanted.indices, 1j * g[:, j] * wanted.values, wanted.real)
        total = total + at(component, x, Treatment(field="gradient"))[..., j]
    bound = EXACT * (wanted.weight * (g**2).sum(axis=1).max() + 1e-30)
    assert np.abs(total - at(wanted, x, Treatment(field="laplacian"))).max() <= bound


@given(listings())
def test_no_value_of_an_autocorrelation_exceeds_that_at_its_origin(wanted):
    d = wanted.lattice.dimension
    values = field(wanted, full_cell(wanted.lattice, FINE[d]), Treatment(field="autocorrelation"), method="direct")
    power = (np.abs(wanted.values) ** 2).sum() * wanted.lattice.volume
    origin = values[(0,) * d]
    assert abs(origin - power) < EXACT * power
    assert np.abs(values).max() <= abs(origin) * (1 + EXACT)
