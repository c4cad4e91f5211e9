"""From a set to a field: cost, values, description."""

from __future__ import annotations

import tracemalloc

import numpy as np
import pytest

from engine import (
    Columns,
    Demand,
    InputError,
    TooLargeError,
    Treatment,
    Window,
    assemble,
    averages,
    evaluate,
    iterate,
    perform,
    prepare,
)
from engine.fields import PHASES_DECIDE
from engine.sampling import full_cell, line, plane, points
from tests.strategies import CRYSTAL, LATTICES, STACK, listing, positions_of, refusal_of

CELL = full_cell(CRYSTAL, (6, 7, 10))
SET = listing(CRYSTAL, seed=91).coefficients(unit="e/Å³")
KINDS = ("density", "gradient", "gradient_magnitude", "laplacian", "autocorrelation", "response")


# Values.


@pytest.mark.parametrize("real", [True, False], ids=["real", "complex"])
@pytest.mark.parametrize("dimension", [1, 2, 3])
def test_the_density_by_default(dimension, real):
    wanted = listing(LATTICES[dimension], real=real, seed=92)
    sampling = full_cell(LATTICES[dimension], (7, 9, 10)[:dimension])
    field = evaluate(wanted.coefficients(), sampling)
    expected = wanted.at(positions_of(sampling))
    # Whatever method was taken, its own accuracy is the bound.
    assert np.abs(field.values - expected).max() < field.accuracy * np.abs(expected).max()
    assert field.values.dtype == (np.float64 if real else np.complex128)
    assert field.sampling is sampling


@pytest.mark.parametrize("method", ["direct", "cascade", "nonuniform"])
def test_the_method_can_be_chosen(method):
    assert evaluate(SET, CELL, method=method).methods == (method,)


@pytest.mark.parametrize("precision", ["double", "single"])
@pytest.mark.parametrize("kind", KINDS)
def test_shapes_and_types(kind, precision):
    field = evaluate(SET, CELL, Treatment(field=kind), Demand(precision=precision))
    assert field.values.shape == ((6, 7, 10, 3) if kind == "gradient" else (6, 7, 10))
    assert field.values.dtype == (np.float64 if precision == "double" else np.float32)
    assert field.components == (("x", "y", "z") if kind == "gradient" else ())
    assert np.isfinite(field.values).all()


@pytest.mark.parametrize("real", [True, False], ids=["real", "complex"])
@pytest.mark.parametrize("method", ["direct", "cascade", "nonuniform"])
def test_the_length_of_the_gradient_is_that_of_its_components(method, real):
    made = listing(CRYSTAL, real=real, seed=93).coefficients()
    vector = evaluate(made, CELL, Treatment(field="gradient"), method=method).values
    length = evaluate(made, CELL, Treatment(field="gradient_magnitude"), method=method).values
    assert length.dtype == np.float64
    np.testing.assert_allclose(length, np.linalg.norm(vector, axis=-1), rtol=1e-10)


def test_statistics_are_those_of_the_values():
    for kind in KINDS:
        field = evaluate(SET, CELL, Treatment(field=kind))
        stats, values = field.statistics, field.values
        assert stats.minimum == values.min()
        assert stats.maximum == values.max()
        assert stats.mean == pytest.approx(values.mean(), abs=1e-12 * np.abs(values).max())
        assert stats.rms == pytest.approx(np.sqrt((values**2).mean()), rel=1e-12)


def test_threads_change_nothing_but_the_last_digit():
    one, two = (evaluate(SET, CELL, demand=Demand(threads=threads)).values for threads in (1, 2))
    np.testing.assert_allclose(one, two, rtol=0, atol=1e-14 * np.abs(one).max())


def test_the_set_is_not_modified():
    before = [np.array(array) for array in (SET.indices, SET.values, SET.phase_known)]
    for kind in KINDS:
        evaluate(SET, CELL, Treatment(field=kind, window=Window("lanczos"), sharpen=1.0))
    for array, copy in zip((SET.indices, SET.values, SET.phase_known), before, strict=True):
        np.testing.assert_array_equal(array, copy)


# Output.


def test_values_go_where_they_are_told():
    work = prepare(SET, CELL)
    out = np.full(work.shape, np.nan, dtype=work.dtype)
    field = perform(work, out=out)
    assert field.values is out
    np.testing.assert_array_equal(out, evaluate(SET, CELL).values)


@pytest.mark.parametrize(
    "out",
    [
        np.empty((6, 7, 9)),
        np.empty((6, 7, 10), dtype=np.float32),
        np.empty((6, 7, 10), dtype=complex),
        np.empty((6, 7, 20))[..., ::2],
        np.empty((10, 7, 6)).T,
    ],
    ids=["shape", "single", "complex", "strided", "order"],
)
def test_an_output_that_does_not_fit_is_refused(out):
    assert refusal_of(lambda: perform(prepare(SET, CELL), out=out)).path == ("out",)


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("threads", [1, 2])
def test_progress_runs_to_the_end_over_all_components(kind, threads):
    seen = []
    work = prepare(SET, CELL, Treatment(field=kind), Demand(threads=threads), method="cascade")
    perform(work, progress=lambda done, total: seen.append((done, total)))
    count = 3 if kind.startswith("gradient") else 1
    assert seen[-1] == (6 * count, 6 * count)
    assert [done for done, _ in seen] == sorted(done for done, _ in seen)


@pytest.mark.parametrize("method", ["direct", "cascade", "nonuniform"])
@pytest.mark.parametrize("threads", [1, 2])
def test_iterate_yields_the_field_in_blocks(method, threads):
    work = prepare(SET, CELL, Treatment(window=Window("lanczos")), Demand(threads=threads), method=method)
    blocks = list(iterate(work))
    assert all(block.shape[1:] == (7, 10) for block in blocks)
    whole = perform(work).values
    np.testing.assert_allclose(np.concatenate(blocks), whole, rtol=0, atol=1e-12 * np.abs(whole).max())


@pytest.mark.parametrize("kind", ["gradient", "gradient_magnitude"])
def test_a_vector_is_not_iterated_over(kind):
    work = prepare(SET, CELL, Treatment(field=kind))
    assert refusal_of(lambda: next(iterate(work))).path == ("field",)


# Cost.


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("real", [True, False], ids=["real", "complex"])
@pytest.mark.parametrize("method", ["cascade", "direct", "nonuniform"])
def test_the_bytes_of_a_work_are_a_bound_of_the_peak(method, real, kind):
    made = listing(CRYSTAL, real=real, seed=94, share=0.3).coefficients()
    sampling = full_cell(CRYSTAL, (48, 50, 54))
    work = prepare(made, sampling, Treatment(field=kind), method=method)
    perform(prepare(made, CELL, Treatment(field=kind), method=method))
    tracemalloc.start()
    try:
        field = perform(work)
        peak = tracemalloc.get_traced_memory()[1]
    finally:
        tracemalloc.stop()
    assert work.bytes_output == field.values.nbytes
    # A description is made beside the values, some kilobytes.
    assert peak <= work.bytes + (1 << 16)
    assert work.seconds > 0


@pytest.mark.parametrize("kind", KINDS)
def test_too_large_is_refused_before_anything_is_allocated(kind):
    sampling = full_cell(CRYSTAL, (10**5, 10**5, 10**5))
    tracemalloc.start()
    try:
        with pytest.raises(TooLargeError):
            prepare(SET, sampling, Treatment(field=kind), max_bytes=1 << 40)
        assert tracemalloc.get_traced_memory()[1] < 1 << 20
    finally:
        tracemalloc.stop()


@pytest.mark.parametrize("kind", KINDS)
def test_a_limit_that_suffices_is_kept(kind):
    sampling = full_cell(CRYSTAL, (20, 24, 30))
    work = prepare(SET, sampling, Treatment(field=kind))
    for limit in (work.bytes, work.bytes + 1, 2 * work.bytes):
        assert prepare(SET, sampling, Treatment(field=kind), max_bytes=limit).bytes <= limit
    least = min(
        prepare(SET, sampling, Treatment(field=kind), method=method).bytes
        for method in ("direct", "cascade", "nonuniform")
    )
    with pytest.raises(TooLargeError):
        prepare(SET, sampling, Treatment(field=kind), max_bytes=least - 1)


def test_faults_of_the_plan_come_through():
    with pytest.raises(InputError, match="tolerance"):
        prepare(SET, CELL, demand=Demand(tolerance=1.0))


# Description.


def test_axes_are_those_of_the_grid():
    sampling = plane(CRYSTAL, [0, 0, 0], [1, 0, 0], [0, 1, 0], (8, 9))
    first, second = evaluate(SET, sampling).axes
    assert (first.count, second.count) == (8, 9)
    np.testing.assert_allclose([first.step * 8, second.step * 9], [7.3, 11.9], rtol=1e-13)
    assert evaluate(SET, points(CRYSTAL, [[0, 0, 0]])).axes == ()


def test_what_was_summed_is_counted_with_both_of_each_pair():
    whole = listing(CRYSTAL, seed=91)
    assert evaluate(whole.coefficients(), CELL).summed == len(whole.values)
    other = listing(CRYSTAL, real=False, seed=91)
    assert evaluate(other.coefficients(), CELL).summed == len(other.values)
    lateral = evaluate(whole.coefficients(), CELL, Treatment(average=averages.lateral(CRYSTAL, [0, 0, 1])))
    assert lateral.summed == (~whole.indices[:, :2].any(axis=1)).sum()


def test_the_resolution_is_that_of_what_was_summed():
    assert evaluate(SET, CELL).resolution == pytest.approx(SET.resolution())
    lateral = evaluate(SET, CELL, Treatment(average=averages.lateral(CRYSTAL, [0, 0, 1])))
    orders = np.abs(SET.indices[~SET.indices[:, :2].any(axis=1), 2])
    longest = CRYSTAL.spacings(np.array([[0, 0, 1]]))[0]
    assert lateral.resolution == pytest.approx((longest / orders.max(), longest / orders[orders > 0].min()))
    mean = assemble(STACK, Columns(indices=((0,),), amplitude=[1.0], phase_deg=[0.0]), values="density_coefficient")
    assert evaluate(mean, full_cell(STACK, (4,))).resolution is None


def test_units_and_steps_are_carried_along():
    field = evaluate(SET, CELL, Treatment(field="laplacian", window=Window("lanczos")))
    assert field.unit == "e/Å³/Å²"
    assert "lanczos" in field.applied[0]


def test_the_accuracy_is_that_of_the_method():
    assert evaluate(SET, CELL, method="cascade").accuracy == 1e-12
    assert evaluate(SET, CELL, demand=Demand(tolerance=1e-6), method="nonuniform").accuracy == 1e-6
    assert evaluate(SET, CELL, demand=Demand(precision="single"), method="cascade").accuracy == 1e-5


def notes_of(columns, treatment=None, options=None, limits=None):
    made = assemble(STACK, columns, values="density_coefficient", **(options or {})).within(**(limits or {}))
    return " / ".join(evaluate(made, line(STACK, [0], [1], 9), treatment).notes)


def test_notes_say_what_a_reader_must_know():
    orders = (0, 1, 2, 3)
    phases = [0.0, 30.0, 60.0, 90.0]
    plain = notes_of(Columns(indices=(orders,), amplitude=[1.0] * 4, phase_deg=phases))
    assert PHASES_DECIDE in plain
    assert "termination" in plain
    for word in ("zero term", "no phase", "resolution limits", "Friedel", "repeat"):
        assert word not in plain
    absent = Columns(indices=(orders[1:],), amplitude=[1.0] * 3, phase_deg=phases[1:])
    assert "relative to the mean" in notes_of(absent)
    assert "relative to the mean" not in notes_of(absent, options={"mean": 2.0})
    assert "relative to the mean" not in notes_of(absent, Treatment(field="gradient"))
    missing = Columns(indices=(orders,), amplitude=[1.0] * 4, phase_deg=[0.0, np.nan, 60.0, np.nan])
    assert "2 of 4 coefficients have no phase" in notes_of(missing)
    assert "zero term" not in notes_of(missing)
    unphased = Columns(indices=(orders,), amplitude=[1.0] * 4, phase_deg=[np.nan, 30.0, 60.0, 90.0])
    assert "zero term has no phase and is left out: values are relative to the mean" in notes_of(unphased)
    autocorrelation = notes_of(missing, Treatment(field="autocorrelation"))
    assert "no phase" not in autocorrelation
    assert PHASES_DECIDE not in autocorrelation
    assert "1 coefficients lie outside" in notes_of(
        Columns(indices=(orders,), amplitude=[1.0] * 4, phase_deg=phases), limits={"d_min": 25.0}
    )
    pairs = Columns(indices=((1, -1, 2, 2),), amplitude=[1.0] * 4, phase_deg=[30.0, -30.0, 60.0, 60.0])
    assert "1 Friedel pairs were given on both sides" in notes_of(pairs)
    assert "1 rows repeat others exactly" in notes_of(pairs)
