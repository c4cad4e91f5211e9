"""The summary of a prepared set: its numbers by plain counting, its warnings where they belong and only there."""

from __future__ import annotations

import math
from dataclasses import fields, replace

import numpy as np
import pytest

from engine import Lattice
from engine.preparation import Recipe, prepare_reflections, summarize_set
from engine.scattering import composition
from engine.symmetry import plane_group, space_group, stack_group
from tests.engine.preparation.crystal import FORMULA, B, crystal, measured, with_row

OR = crystal()
D_MIN = 1.0
CONTENT = composition(FORMULA)


def recipe(**more):
    return Recipe(**({"group": OR.group} | more))


def noisy(**more):
    return measured(OR, OR.sphere(D_MIN), **({"scale": 0.02, "relative": 0.03, "floor": 0.05} | more))


def summary(reflections, **more):
    return summarize_set(prepare_reflections(reflections, recipe(**more)))


def warned(made, words):
    return [warning for warning in made.warnings if words in warning]


def octant(h):
    """P2₁2₁2₁ has the Laue symmetry mmm: |h|, |k|, |l| name the orbit with Friedel's law."""
    return tuple(abs(x) for x in h)


def handed(h):
    """Of P2₁2₁2₁ without Friedel's law: its axes turn two signs at a time, so that the product of the signs stays."""
    return octant(h), int(np.sign(np.prod(h)))


def forbidden(h):
    """Screw axes along all three (International Tables A, No. 19): h00, 0k0, 00l of odd index."""
    return np.count_nonzero(h) == 1 and sum(h) % 2 != 0


def possible_orbits(d_min, d_max):
    """The orbits within the range, one by one, and their spacings."""
    found = {}
    for h in OR.sphere(d_min * (1 - 1e-9)).tolist():
        d = 1 / math.sqrt(sum((x / a) ** 2 for x, a in zip(h, OR.lattice.lengths.tolist(), strict=True)))
        if not forbidden(h) and d <= d_max * (1 + 1e-9):
            found[octant(h)] = d
    return found


# Numbers


def test_numbers_by_plain_counting():
    """Six rows of ten at random: each number by a loop over the rows."""
    rng = np.random.default_rng(6)
    given = noisy()
    given = given.select(rng.random(given.count) < 0.6)
    made = summary(given)
    rows = list(zip(given.indices.tolist(), given.observed.tolist(), given.sigma.tolist(), strict=True))
    allowed = [row for row in rows if not forbidden(row[0])]
    absent = [row for row in rows if forbidden(row[0])]
    gathered = {}
    for h, observed, sigma in allowed:
        gathered.setdefault(octant(h), []).append((observed, sigma))
    members = {tuple(h) for h in OR.sphere(D_MIN, half=True).tolist()}

    assert made.rows == len(rows)
    assert made.unique == len(gathered)
    assert made.expanded == sum(octant(h) in gathered and not forbidden(h) for h in members)
    assert made.group == "P 21 21 21"
    assert made.cell_volume == pytest.approx(7.1 * 8.9 * 10.4)
    assert made.absences == len(absent)
    assert made.absence_signal == pytest.approx(np.mean([observed / sigma for _, observed, sigma in absent]))
    assert made.other_signal == pytest.approx(np.mean([observed / sigma for _, observed, sigma in allowed]))
    # Centric: an index of zero (three twofold axes turn hk0 and the like into their mates).
    assert made.centric_share == pytest.approx(np.mean([0 in h for h in gathered]))
    assert made.phased == made.unique
    assert made.scale == "arbitrary"
    weighted = {h: sum(i / s**2 for i, s in of) / sum(1 / s**2 for _, s in of) for h, of in gathered.items()}
    assert made.negative == sum(mean < 0 for mean in weighted.values())

    deviation = deviation_meas = strength = 0.0
    for of in gathered.values():
        n = len(of)
        if n > 1:
            mean = sum(i for i, _ in of) / n
            off = sum(abs(i - mean) for i, _ in of)
            deviation += off
            deviation_meas += math.sqrt(n / (n - 1)) * off
            strength += sum(i for i, _ in of)
    assert made.agreement.r_merge == pytest.approx(deviation / strength)
    assert made.agreement.r_meas == pytest.approx(deviation_meas / strength)
    assert made.agreement.measurements == len(allowed)
    assert sum(shell.measurements for shell in made.agreement_shells) == len(allowed)


def test_completeness_by_plain_counting():
    """A corner of reciprocal space cut out: of the whole and of every shell."""
    given = noisy()
    given = given.select(~np.all(np.abs(given.indices) >= 2, axis=1) | (given.indices.sum(axis=1) % 2 == 0))
    made = summary(given)
    seen = {octant(h) for h in given.indices.tolist() if not forbidden(h)}
    spacing = possible_orbits(D_MIN, np.inf)
    ds = [spacing[h] for h in seen]
    assert (made.d_max, made.d_min) == (pytest.approx(max(ds)), pytest.approx(min(ds)))
    possible = {h: d for h, d in spacing.items() if min(ds) * (1 - 1e-9) <= d <= max(ds) * (1 + 1e-9)}
    assert 0.5 < made.completeness < 0.95
    assert made.completeness == pytest.approx(len(seen) / len(possible))
    assert 5 <= len(made.completeness_shells) <= 10
    for shell in made.completeness_shells:
        within = {h for h, d in possible.items() if shell.d_min * (1 - 1e-9) <= d <= shell.d_max * (1 + 1e-9)}
        assert (shell.possible, shell.observed) == (len(within), len(within & seen))
        assert shell.completeness == len(within & seen) / len(within)
    assert sum(shell.possible for shell in made.completeness_shells) == len(possible)


def test_completeness_is_that_of_the_range_measured():
    """What lies above 1.2 Å of a set that begins there is not missing from it, and makes no shells."""
    given = noisy()
    given = given.select(OR.lattice.spacings(given.indices) < 1.2)
    made = summary(given)
    possible = possible_orbits(made.d_min, made.d_max)
    assert made.d_max < 1.2
    assert made.completeness == 1.0
    assert len(made.completeness_shells) == min(10, len(possible) // 20)
    few = given.select(OR.lattice.spacings(given.indices) > 1.15)
    assert len(summary(few).completeness_shells) == len(possible_orbits(1.15, 1.2)) // 20 < 5


def test_mates_that_lack_are_missed_in_a_complex_density():
    """One octant: all there is of a real density, and one hand of every general reflection of a complex one."""
    given = measured(OR, OR.sphere(1.2), relative=0.02, floor=0.1, phases=False)
    octants = given.select(np.all(given.indices >= 0, axis=1))
    made = summary(octants, friedel=False)
    possible = {handed(h) for h in given.indices.tolist() if not forbidden(h)}
    seen = {handed(h) for h in octants.indices.tolist() if not forbidden(h)}
    assert made.completeness == pytest.approx(len(seen) / len(possible))
    assert 0.5 < made.completeness < 0.7
    assert summary(octants).completeness == 1.0


def test_a_plot_and_what_is_without_one():
    given = noisy()
    made = summary(given, scale="wilson", content=CONTENT, units=4)
    plot = prepare_reflections(given, recipe(scale="wilson", content=CONTENT, units=4)).plot
    assert (made.wilson_b, made.wilson_b_sigma) == (plot.b, plot.b_sigma)
    assert (made.wilson_scale, made.wilson_scale_sigma) == (plot.scale, plot.scale_sigma)
    assert abs(made.wilson_b - B) < 4 * made.wilson_b_sigma
    assert made.scale == "absolute"
    bare = summary(given)
    assert (bare.wilson_b, bare.wilson_b_sigma, bare.wilson_scale, bare.wilson_scale_sigma) == (None,) * 4
    assert bare.scale == "arbitrary"


def test_amplitudes_have_no_negative_ones():
    assert summary(measured(OR, OR.sphere(1.5), quantity="amplitude")).negative is None


@pytest.mark.parametrize(
    ("symbol", "cell", "verdict"),
    [
        ("P 21 21 21", {}, "acentric"),
        ("C 1 2/c 1", {"lengths": (14.1, 8.3, 11.2), "angles": (90.0, 101.0, 90.0)}, "centric"),
    ],
)
def test_statistics_tell_a_centre(symbol, cell, verdict):
    """⟨|E²−1|⟩ of atoms at random (Wilson, Acta Cryst. 2 (1949) 318).

    In P2₁2₁2₁ of the general reflections alone: those with an index of zero are centric, a third here.
    """
    one = crystal(symbol, seed=5, **cell)
    given = measured(one, one.sphere(0.9, half=True), relative=0.02, floor=0.1)
    prepared = prepare_reflections(given, Recipe(group=one.group))
    made = summarize_set(prepared)
    general = np.all(prepared.unique.indices != 0, axis=1) | (verdict == "centric")
    assert f"of {general.sum()} reflections: {verdict};" in made.statistics


def test_statistics_are_silent_where_they_would_say_nothing():
    assert summary(measured(OR, OR.sphere(2.5), relative=0.03, floor=0.3)).statistics is None


def test_statistics_without_signal_say_so():
    """A third of the reflections, the outer ones, hold noise whose mean is below zero."""
    given = noisy()
    spacing = OR.lattice.spacings(given.indices)
    observed = np.where(spacing < np.quantile(spacing, 0.4), -0.2, given.observed)
    made = summary(replace(given, observed=observed), amplitudes="root_exclude")
    assert made.statistics.startswith("no statistics: have a mean intensity not above zero")


def test_outliers_and_excluded_are_counted():
    given = noisy(floor=1.0)
    observed = given.observed.copy()
    strong = int(np.argmax(observed))
    observed[strong] *= 5
    prepared = prepare_reflections(replace(given, observed=observed), recipe(amplitudes="root_exclude"))
    made = summarize_set(prepared)
    assert made.outliers == prepared.merged.outliers.row.size >= 1
    assert sorted(made.outlier_rows) == sorted(prepared.merged.outliers.row.tolist())
    assert made.negative == np.count_nonzero(prepared.merged.reflections.observed < 0) > 0
    assert made.unique == prepared.merged.reflections.count - made.negative


@pytest.mark.parametrize("friedel", [True, False])
def test_complex_densities_count_mates_apart(friedel):
    given = measured(OR, OR.sphere(1.5), relative=0.02, floor=0.1, phases=False)
    made = summary(given, friedel=friedel)
    allowed = [tuple(h) for h in OR.sphere(1.5).tolist() if not forbidden(h)]
    names = {octant(h) if friedel else handed(h) for h in allowed}
    assert made.unique == len(names)
    assert made.expanded == (len(allowed) // 2 if friedel else len(allowed))
    assert made.completeness == 1.0


def test_other_dimensions():
    template = measured(OR, OR.sphere(3.0), relative=0.02, floor=0.1)
    stack = replace(template.select(np.arange(9)), lattice=Lattice.from_period(40.0), indices=np.arange(1, 10)[:, None])
    made = summarize_set(prepare_reflections(replace(stack, phase=None), Recipe(group=stack_group("-1"))))
    assert (made.unique, made.expanded, made.completeness) == (9, 9, 1.0)
    assert (made.d_max, made.d_min) == (pytest.approx(40), pytest.approx(40 / 9))
    assert (made.cell_volume, made.centric_share, made.statistics) == (pytest.approx(40), 1.0, None)
    indices = np.array([[1, 0], [0, 1], [1, 1], [-1, 1], [2, 0]])
    plane = replace(
        template.select(np.arange(5)), lattice=Lattice.from_vectors([[5.0, 0], [0, 5.0]]), indices=indices, phase=None
    )
    made = summarize_set(prepare_reflections(plane, Recipe(group=plane_group("p4"))))
    # Orbits 10, 11, 20; all that d ≥ 2.5 Å holds.
    assert (made.unique, made.expanded, made.completeness) == (3, 6, 1.0)


# Warnings


def test_a_good_set_has_no_warnings():
    """Complete, phased, in good agreement, absolute, with uncertainties: nothing to say."""
    given = measured(OR, OR.sphere(1.2), quantity="amplitude", relative=0.01, floor=0.01)
    given = given.select(~np.isnan(given.phase))
    made = summary(given, scale="factor", factor=1.0)
    assert made.warnings == ()
    assert made.applied == prepare_reflections(given, recipe(scale="factor", factor=1.0)).applied


def test_notes_of_the_chain_come_first():
    given = noisy()
    prepared = prepare_reflections(given, recipe())
    assert len(prepared.notes) >= 3
    assert summarize_set(prepared).warnings[: len(prepared.notes)] == prepared.notes


@pytest.mark.parametrize(("share", "warns"), [(0.85, True), (0.95, False)])
def test_incomplete(share, warns):
    """Every reflection of one orbit in some is left out; the outermost stay, and so the range."""
    given = noisy()
    names = [octant(h) for h in given.indices.tolist()]
    orbits = sorted(set(names), key=lambda h: OR.lattice.spacings(np.array([h]))[0])
    rng = np.random.default_rng(1)
    taken = {orbits[0], orbits[-1]} | {h for h in orbits if rng.random() < share}
    made = summary(given.select(np.array([name in taken for name in names])))
    found = warned(made, "of the reflections possible")
    assert abs(made.completeness - share) < 0.04
    if warns:
        percent = f"{100 * (1 - made.completeness):.0f} %"
        assert found == [
            f"{percent} of the reflections possible from {made.d_max:.3g} to {made.d_min:.3g} Å are missing: "
            "the density lacks what they carry."
        ]
    else:
        assert found == []


def test_phases_missing():
    given = noisy()
    assert warned(summary(given), "phase") == []
    none = summary(replace(given, phase=None))
    assert none.phased == 0
    assert warned(none, "phase") == ["No reflection has a phase: only the autocorrelation can be summed."]
    unknown = summary(replace(given, phase=np.full(given.count, np.nan)))
    assert (unknown.phased, warned(unknown, "phase")) == (0, warned(none, "phase"))
    lost = replace(given, phase=np.where(given.indices[:, 0] == 0, np.nan, given.phase))
    some = summary(lost)
    without = {octant(h) for h in given.indices.tolist() if h[0] == 0 and not forbidden(h)}
    assert some.phased == some.unique - len(without)
    assert warned(some, "phase") == [
        f"{len(without)} of {some.unique} unique reflections have no phase and are not summed."
    ]


def test_poor_agreement():
    """Cell edges a = b make a tetragonal group possible, and the atoms of P2₁2₁2₁ make it wrong."""
    one = crystal(lengths=(8.0, 8.0, 10.4))
    given = measured(one, one.sphere(1.2), relative=0.02, floor=0.02, phases=False)
    right = summarize_set(prepare_reflections(given, Recipe(group=one.group)))
    wrong = summarize_set(prepare_reflections(given, Recipe(group=space_group("P 4 2 2"))))
    assert right.agreement.r_meas < 0.05
    assert warned(right, "agree poorly") == []
    assert wrong.agreement.r_meas > 0.3
    assert warned(wrong, "agree poorly") == [
        f"Equivalents agree poorly (R_meas {wrong.agreement.r_meas:.2f}): check the symmetry and the measurement."
    ]


@pytest.mark.parametrize(("floor", "warns"), [(0.02, False), (30.0, True)])
def test_a_noisy_outer_shell(floor, warns):
    made = summary(noisy(floor=floor))
    last = made.agreement_shells[-1]
    assert (last.mean_signal < 1) == warns
    expected = [
        f"From {last.d_max:.3g} to {last.d_min:.3g} Å the mean of value over σ is {last.mean_signal:.2g}: mostly noise."
    ]
    assert warned(made, "mostly noise") == (expected if warns else [])


def test_absences_that_are_seen():
    """Screw axes that the intensities deny."""
    given = noisy()
    assert abs(summary(given).absence_signal) < 1
    assert warned(summary(given), "forbids") == []
    odd = np.array([forbidden(h) for h in given.indices.tolist()])
    seen = summary(replace(given, observed=np.where(odd, 20 * given.sigma, given.observed)))
    assert seen.absence_signal == pytest.approx(20)
    assert warned(seen, "forbids") == [
        "Reflections that P 21 21 21 forbids are seen with a mean I/σ of 20.0: the group may be wrong."
    ]


def test_no_uncertainties():
    made = summary(replace(noisy(), sigma=None), amplitudes="root_exclude")
    assert warned(made, "uncertainties") == ["No standard uncertainties were given."]
    assert made.absence_signal is None
    assert made.other_signal is None
    assert warned(made, "mostly noise") == []
    assert warned(summary(noisy()), "uncertainties") == []


def test_the_same_data_give_the_same_summary():
    given = with_row(noisy(), (0, 0, 0), 1.0, 0.0, 1.0)
    one, two = (summary(given, scale="wilson", content=CONTENT, units=4) for _ in range(2))
    assert one == two
    assert all(getattr(one, field.name) is not None for field in fields(one) if not field.name.startswith("model"))
    assert one.rows == given.count - 1
