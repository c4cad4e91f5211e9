"""A film from its scan to its report, of an invented stack whose scan and series are written out here.

Scans carry the exact positions of the orders and |F|² times Lorentz factor and polarisation.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from engine.amplitudes.corrections import Lorentz, Polarisation
from engine.features.integrals import integrals, slab
from engine.features.layer_distances import layer_distances
from engine.features.layers import layers
from engine.fields import Treatment
from engine.films.analysis import analyse_film, number_lines
from engine.films.facts import KnownDensity, KnownFactor, KnownMean
from engine.films.orders import FilmOrders
from engine.films.scale import scale_by_facts
from engine.films.scans import Scan
from engine.films.signs import Criteria, Flat, LeastStructure, NonNegative
from engine.films.spacing import fit_spacing
from engine.films.task import Content, FilmTask, Region
from engine.resolution.envelope import Envelope
from engine.sampling import lattice_line
from engine.scattering import composition
from engine.windows import Window
from tests.strategies import refusal_of

PERIOD = 26.4
WAVELENGTH = 1.5406
WATER = 0.334
COUNT = 9
ORDER = np.arange(1, COUNT + 1)
Q = 2 * np.pi * ORDER / PERIOD
SHEETS = [(4.5, 0.0, 1.1), (2.8, 5.2, 1.2), (2.8, -5.2, 1.2)]
"""Excess over water, e/Å², place and Gaussian σ in Å."""
SLAB = (0.18, 6.5, 0.9)
"""Excess of a slab, e/Å³, its half-width and its roughness in Å."""
MEAN = WATER + (sum(one[0] for one in SHEETS) + 2 * SLAB[0] * SLAB[1]) / PERIOD
K = 0.0213
"""Absolute per measured amplitude."""
CORRECTIONS = (Lorentz("film_part_of_arc"), Polarisation())
CRITERIA = Criteria(
    non_negative=NonNegative(floor=0.2),
    flat=(Flat(start=10.5, stop=13.2, sigma=0.02),),
    least_structure=LeastStructure(weight=0.5),
)
FACTS = (
    KnownMean(mean=MEAN, sigma=0.004),
    KnownDensity(start=10.5, end=15.9, density=WATER, sigma=0.008, name="water"),
)


def true_factors(q=Q):
    sheets = sum(e * np.cos(q * z) * np.exp(-(q**2) * w**2 / 2) for e, z, w in SHEETS)
    excess, half, rough = SLAB
    return sheets + 2 * excess * np.sin(q * half) / q * np.exp(-(q**2) * rough**2 / 2)


F = true_factors()
KNOWN = {int(order): int(np.sign(f)) for order, f in zip(ORDER[:5], F[:5], strict=True)}
PHASES = {int(order): 180.0 if f < 0 else 0.0 for order, f in zip(ORDER, F, strict=True)}


def series(z, factors, mean, period=PERIOD):
    return mean + 2 / period * np.cos(2 * np.pi * np.outer(z, ORDER) / period) @ factors


def geometry(q):
    theta = np.arcsin(q * WAVELENGTH / (4 * np.pi))
    return (1 + np.cos(2 * theta) ** 2) / 2 / (np.sin(theta) * np.sin(2 * theta))


def scanned(*, seed=None, noise=0.01, blur=0.003, kind="two_theta", square=0.0, **more):
    """The scan of the stack; `square` is q_c²."""
    outer = np.sqrt(Q**2 + square)
    factors = geometry(outer)
    intensity = (F / K) ** 2 * factors
    sigma = noise * intensity + 0.02 * (noise * factors / K**2)
    two_theta = np.degrees(2 * np.arcsin(outer * WAVELENGTH / (4 * np.pi)))
    position = two_theta if kind == "two_theta" else outer
    if kind == "q":
        blur = 1e-4
    if seed is not None:
        generator = np.random.default_rng(seed)
        intensity = intensity + sigma * generator.normal(size=COUNT)
        position = position + blur * generator.normal(size=COUNT)
    named = {"two_theta_deg" if kind == "two_theta" else "q": position}
    return Scan.of(
        **named,
        position_sigma=np.full(COUNT, blur),
        intensity=intensity,
        intensity_sigma=sigma,
        wavelength=WAVELENGTH,
        **more,
    )


def task(scan=None, **more):
    options = {
        "scan": scanned() if scan is None else scan,
        "corrections": CORRECTIONS,
        "phases_deg": PHASES,
        "facts": FACTS,
        "unit": "e/Å³",
        **more,
    }
    return FilmTask(**options)


@pytest.fixture(scope="module")
def noisy():
    return analyse_film(task(scanned(seed=5)))


def test_exact_measurements_give_the_stack_back():
    """No noise, roots, the true factor: all that is left is rounding."""
    facts = (KnownFactor(factor=K), KnownMean(mean=MEAN))
    found = analyse_film(task(rule="root", facts=facts))
    assert found.spacing.period == pytest.approx(PERIOD, rel=1e-9)
    assert found.table.order.tolist() == ORDER.tolist()
    assert np.allclose(found.orders.amplitude, np.abs(F), rtol=1e-7)
    z = np.linspace(0, PERIOD, 513)
    assert np.abs(found.profile.values - series(z, F, MEAN)).max() < 1e-6
    assert found.orders.unit == found.profile.unit == "e/Å³"
    assert found.scale.mean == pytest.approx(MEAN)


def test_period_and_amplitudes_lie_within_their_errors(noisy):
    assert abs(noisy.spacing.period - PERIOD) < 3 * noisy.spacing.period_sigma
    assert 0 < noisy.spacing.period_sigma < 0.01
    off = (noisy.orders.amplitude - np.abs(F)) / np.hypot(
        noisy.orders.sigma, noisy.orders.scale_sigma * noisy.orders.amplitude
    )
    assert np.abs(off).max() < 4


def test_profile_is_the_independent_sum_of_what_was_found(noisy):
    z = np.linspace(0, noisy.spacing.period, 513)
    signs = np.where(F < 0, -1, 1)
    expected = series(z, signs * noisy.orders.amplitude, noisy.scale.mean, noisy.spacing.period)
    assert noisy.profile.values.shape == (513,)
    assert np.abs(noisy.profile.values - expected).max() < 1e-10


def test_profile_sigma_holds_the_spread_of_whole_repeats():
    """Amplitudes drawn anew and scaled anew by facts drawn anew: σ is their scatter, scale and all."""
    base = analyse_film(task(scanned(), rule="root"))
    generator = np.random.default_rng(8)
    raw = base.table.film()
    phases = np.array([PHASES[int(order)] for order in raw.order])
    z = base.profile.axes[0].coordinates()[::32]
    rows = []
    for _ in range(600):
        moved = FilmOrders.of(raw.period, raw.order, np.abs(raw.amplitude + raw.sigma * generator.normal(size=COUNT)))
        drawn = (
            replace(FACTS[0], mean=MEAN + FACTS[0].sigma * generator.normal()),
            replace(FACTS[1], density=WATER + FACTS[1].sigma * generator.normal()),
        )
        scale = scale_by_facts(moved, phases, drawn, unit="e/Å³")
        rows.append(series(z, np.where(phases > 0, -1, 1) * moved.amplitude * scale.factor, scale.mean))
    spread = np.std(rows, axis=0)
    assert np.abs(base.profile.sigma.values[::32] / spread - 1).max() < 0.12
    assert any(one.startswith("the scale and the mean") for one in base.profile.sigma.contains)


def test_found_signs_are_those_of_the_stack():
    found = analyse_film(task(scanned(seed=2), phases_deg=None, criteria=CRITERIA))
    assert found.ranked is not None
    assert found.ranked.signs[0].tolist() == np.where(F < 0, -1, 1).tolist()
    assert [PHASES[order] for order in ORDER] == found.phase_deg.tolist()
    given = analyse_film(task(scanned(seed=2)))
    assert np.abs(found.profile.values - given.profile.values).max() < 1e-12
    assert found.ranked.verdict in found.notes


def test_rank_chooses_among_the_sign_sets():
    asked = task(phases_deg=None, criteria=CRITERIA, fixed=KNOWN)
    second = analyse_film(replace(asked, rank=1))
    signs = second.ranked.signs[1]
    assert signs.tolist() != second.ranked.signs[0].tolist()
    assert second.phase_deg.tolist() == np.where(signs < 0, 180.0, 0.0).tolist()
    z = np.linspace(0, second.spacing.period, 513)
    expected = series(z, signs * second.orders.amplitude, second.scale.mean, second.spacing.period)
    assert np.abs(second.profile.values - expected).max() < 1e-10


def test_known_signs_reach_the_search():
    wrong = -int(np.sign(F[4]))
    found = analyse_film(task(phases_deg=None, criteria=CRITERIA, fixed={5: wrong, 1: 1, 2: 1, 3: 1}))
    assert (found.ranked.signs[:, 4] == wrong).all()


def test_signs_without_facts_are_judged_on_the_scale_as_measured():
    criteria = Criteria(flat=(Flat(start=10.5, stop=13.2),), least_structure=LeastStructure())
    found = analyse_film(task(phases_deg=None, criteria=criteria, facts=(), unit="arbitrary"))
    assert found.scale is None
    assert found.orders.scale == "arbitrary"
    assert found.orders.amplitude == pytest.approx(np.abs(F) / K, rel=0.02)


@pytest.mark.parametrize("rank", [10, -1])
def test_a_rank_that_is_not_listed_is_refused(rank):
    assert refusal_of(lambda: analyse_film(task(phases_deg=None, criteria=CRITERIA, fixed=KNOWN, rank=rank))).path == (
        "rank",
    )


def test_neither_phases_nor_criteria_is_refused():
    assert refusal_of(lambda: analyse_film(task(phases_deg=None))).path == ("phases_deg",)


def test_phases_of_no_order_measured_are_refused_and_of_one_noted():
    assert refusal_of(lambda: analyse_film(task(phases_deg={40: 0.0}))).path == ("phases_deg",)
    found = analyse_film(task(phases_deg={**PHASES, 40: 0.0}))
    assert any("without an amplitude" in note and "40" in note for note in found.notes)
    assert not any("without an amplitude" in note for note in analyse_film(task()).notes)


def test_an_order_without_a_phase_is_left_out():
    facts = (KnownFactor(factor=K), KnownMean(mean=MEAN))
    found = analyse_film(task(rule="root", facts=facts, phases_deg={k: v for k, v in PHASES.items() if k != 3}))
    assert np.isnan(found.phase_deg[2])
    z = np.linspace(0, PERIOD, 513)
    assert np.abs(found.profile.values - series(z, np.where(ORDER == 3, 0, F), MEAN)).max() < 1e-6


@pytest.mark.parametrize(
    "facts",
    [
        FACTS,
        (FACTS[1], KnownDensity(start=-1.0, end=1.0, density=0.0, sigma=0.03, name="sheet")),
        (KnownFactor(factor=K, sigma=0.01 * K), FACTS[0]),
        (KnownFactor(factor=K, sigma=0.01 * K), FACTS[1]),
    ],
    ids=["mean and density", "two densities", "factor and mean", "factor and density"],
)
def test_scale_by_facts(facts):
    """Two facts are two equations in the factor and the mean: solved here by the integrals of cosines."""

    def integral(start, end):
        waves = 2 * np.pi * ORDER / PERIOD
        return 2 / PERIOD * (F / waves * (np.sin(waves * end) - np.sin(waves * start))).sum()

    if facts[1].name == "sheet":
        facts = (facts[0], replace(facts[1], density=MEAN + integral(-1, 1) / 2))
    rows, right = [], []
    for fact in facts:
        if isinstance(fact, KnownMean):
            rows.append((0.0, 1.0))
            right.append(fact.mean)
        elif isinstance(fact, KnownFactor):
            rows.append((1.0, 0.0))
            right.append(fact.factor)
        else:
            rows.append((integral(fact.start, fact.end) / K / (fact.end - fact.start), 1.0))
            right.append(fact.density)
    factor, mean = np.linalg.solve(rows, right)
    found = analyse_film(task(rule="root", facts=facts))
    assert found.scale.factor == pytest.approx(factor, rel=1e-6)
    assert found.scale.mean == pytest.approx(mean, rel=1e-6)
    # The regions are cut at the last order, the truth is not.
    assert found.scale.factor == pytest.approx(K, rel=0.03)
    assert found.orders.scale_sigma == pytest.approx(found.scale.factor_sigma / found.scale.factor)


def test_content_gives_the_mean_of_the_period_found():
    content = Content(content=composition("Al2Si2O9H4"), area=20.0, area_sigma=0.1, units=1.5)
    found = analyse_film(task(facts=(KnownFactor(factor=K),), content=content, rule="root"))
    electrons = 2 * 13 + 2 * 14 + 9 * 8 + 4
    assert found.scale.mean == pytest.approx(1.5 * electrons / (20.0 * PERIOD), rel=1e-6)
    relative = np.hypot(0.1 / 20.0, found.spacing.period_sigma / PERIOD)
    assert found.scale.mean_sigma == pytest.approx(found.scale.mean * relative, rel=1e-5)


def test_content_alone_fixes_no_scale():
    content = Content(content=composition("H2O"), area=20.0)
    assert refusal_of(lambda: analyse_film(task(facts=(), content=content))).path == ("facts",)


def test_layers_lie_where_the_sheets_are(noisy):
    """Three sheets, the middle one on the mirror; to termination the outer ones owe less than 0.25 Å."""
    strong = noisy.layers.height > 0.5
    place = noisy.layers.position[strong]
    assert place.size == 3
    middle = np.minimum(place, noisy.spacing.period - place)
    assert sorted(middle) == pytest.approx([0.0, 5.2, 5.2], abs=0.25)
    z = np.linspace(3.5, 7, 70001)
    signs = np.where(F < 0, -1, 1)
    fine = series(z, signs * noisy.orders.amplitude, noisy.scale.mean, noisy.spacing.period)
    assert place[np.argmin(np.abs(place - 5.2))] == pytest.approx(z[np.argmax(fine)], abs=1e-3)
    assert noisy.spacings.distance.sum() == pytest.approx(noisy.spacing.period)


def test_regions_are_integrated_by_their_primitives():
    regions = (Region(name="sheets", start=-8.0, end=8.0), Region(name="off centre", start=1.0, end=6.5))
    found = analyse_film(task(scanned(seed=5), regions=regions))
    waves = 2 * np.pi * ORDER / found.spacing.period
    factors = np.where(F < 0, -1, 1) * found.orders.amplitude
    for region, value in zip(regions, found.integrals.values, strict=True):
        ripples = 2 / found.spacing.period * factors / waves
        waved = (ripples * (np.sin(waves * region.end) - np.sin(waves * region.start))).sum()
        assert value == pytest.approx(found.scale.mean * (region.end - region.start) + waved, rel=1e-10)
    assert (found.integrals.sigma > 0).all()


@pytest.mark.parametrize("bad", [Region(name="b", start=5.0, end=2.0), Region(name="b", start=np.nan, end=2.0)])
def test_a_bad_region_is_pointed_at(bad):
    regions = (Region(name="good", start=0.0, end=2.0), bad)
    path = refusal_of(lambda: analyse_film(task(regions=regions))).path
    assert path[:2] == ("regions", 1)
    assert path[2] in ("start", "end")


def test_a_window_weights_the_orders():
    facts = (KnownFactor(factor=K), KnownMean(mean=MEAN))
    found = analyse_film(task(rule="root", facts=facts, window=Window("gaussian", 30.0)))
    z = np.linspace(0, PERIOD, 513)
    s = Q / (4 * np.pi)
    assert np.abs(found.profile.values - series(z, F * np.exp(-30.0 * s**2), MEAN)).max() < 1e-6
    assert not any(one.startswith("the scale and the mean") for one in found.profile.sigma.contains)


def test_unmeasured_orders_are_summed_with_phases_at_random():
    amplitude, b = 0.05, 40.0
    found = analyse_film(task(envelope=Envelope.from_bound(amplitude, b)))
    beyond = np.arange(COUNT + 1, 400)
    strength = amplitude * np.exp(-b * (beyond / found.spacing.period / 2) ** 2)
    # Each term and its Friedel mate: 2|n| cos(φ) with φ at random has the variance 2|n|².
    assert found.change.rms == pytest.approx(np.sqrt(2 * (strength**2).sum()), rel=1e-3)
    assert analyse_film(task()).change is None


def test_widths_are_compared_where_there_are_any():
    width = np.degrees(0.9 * WAVELENGTH / (300.0 * np.cos(np.arcsin(Q * WAVELENGTH / (4 * np.pi)))))
    scan = scanned(width=width, width_sigma=np.full(COUNT, 0.003))
    found = analyse_film(task(scan))
    assert found.widths is not None
    assert found.widths.preferred == "size"
    assert analyse_film(task()).widths is None
    assert analyse_film(task(scanned(width=width))).widths is None


def test_widths_in_q_say_the_same_as_those_in_angle():
    cosine = np.cos(np.arcsin(Q * WAVELENGTH / (4 * np.pi)))
    flat = np.full(COUNT, 0.02)
    in_q = analyse_film(task(scanned(kind="q", width=flat, width_sigma=flat / 20)))
    degrees = np.degrees(flat * WAVELENGTH / (2 * np.pi * cosine))
    in_angle = analyse_film(task(scanned(width=degrees, width_sigma=degrees / 20)))
    assert in_q.widths.preferred == in_angle.widths.preferred == "size"
    for one, other in zip(in_q.widths.fits, in_angle.widths.fits, strict=True):
        assert one.chi_squared == pytest.approx(other.chi_squared, rel=1e-3, abs=1e-4)


def test_a_scan_in_q_gives_the_same_film():
    one, other = analyse_film(task(scanned(kind="q"))), analyse_film(task())
    assert one.spacing.period == pytest.approx(other.spacing.period, rel=1e-9)
    assert np.abs(one.profile.values - other.profile.values).max() < 1e-8


def test_neutrons_take_the_mean_from_scattering_lengths():
    content = Content(content=composition("D2O"), area=10.0, units=8.0)
    scan = scanned(kind="q", radiation="neutron")
    found = analyse_film(task(scan, facts=(KnownFactor(factor=K),), content=content, unit="10⁻⁶ Å⁻²"))
    length = 2 * 6.671 + 5.803
    assert found.scale.mean == pytest.approx(8 * length / (10.0 * PERIOD) * 10, rel=1e-3)
    assert found.profile.unit == "10⁻⁶ Å⁻²"


def test_refraction_is_taken_out_of_the_period():
    square = 0.0018
    scan = scanned(square=square)
    found = analyse_film(task(scan, critical_q=np.sqrt(square), rule="root", facts=(KnownFactor(factor=K), FACTS[0])))
    assert found.spacing.period == pytest.approx(PERIOD, rel=1e-9)
    assert np.allclose(found.orders.amplitude, np.abs(F), rtol=1e-7)
    left_out = analyse_film(task(scan))
    assert abs(left_out.spacing.period - PERIOD) > 1e-3
    density = square / (16 * np.pi * 2.8179403262e-5)
    by_density = analyse_film(task(scan, refraction_density=density))
    assert by_density.spacing.period == pytest.approx(PERIOD, rel=1e-8)


def test_zero_shift_is_fitted():
    scan = scanned()
    moved = replace(scan, position=scan.position + 0.05)
    found = analyse_film(task(moved, zero_shift=True))
    assert found.spacing.zero_shift_deg == pytest.approx(0.05, abs=1e-6)
    assert found.spacing.period == pytest.approx(PERIOD, rel=1e-6)


def test_scatter_beyond_the_errors_given_widens_that_of_the_period():
    scan = scanned(seed=6, blur=0.003, order=ORDER)
    sure = replace(scan, position_sigma=scan.position_sigma / 10)
    other = analyse_film(task(sure)).spacing
    assert other.sigma_source == "given, scaled"
    scatter = np.sqrt((other.residual**2).sum() / other.degrees)
    alone = fit_spacing(scan, ORDER).period_sigma
    assert other.period_sigma == pytest.approx(alone * scatter / 0.003, rel=1e-3)


def test_lines_that_carry_orders_are_not_numbered_anew():
    order, ways = number_lines(scanned(order=2 * ORDER))
    assert order.tolist() == (2 * ORDER).tolist()
    assert ways == ()
    order, ways = number_lines(scanned())
    assert order.tolist() == ORDER.tolist()
    assert ways[0].period == pytest.approx(PERIOD, rel=1e-3)


def test_a_stray_line_is_left_out():
    scan = scanned()
    position = np.append(scan.position, 0.37 * scan.position[3] + 0.63 * scan.position[4])
    more = Scan.of(
        two_theta_deg=position,
        position_sigma=np.full(COUNT + 1, 0.003),
        intensity=np.append(scan.intensity, scan.intensity.mean()),
        intensity_sigma=np.append(scan.intensity_sigma, 1.0),
        wavelength=WAVELENGTH,
    )
    found = analyse_film(task(more, period_range=(22.0, 30.0)))
    assert found.table.order.tolist() == [*ORDER.tolist(), 0]
    assert found.spacing.period == pytest.approx(PERIOD, rel=1e-6)
    assert found.orders.count == COUNT


def test_given_signs_and_found_ones_are_estimated_with_the_same_prior():
    """Phases of 0 and 180° are those of a stack with a mirror, whose F are real; others are not."""
    mirrored = analyse_film(task(scanned(seed=4)))
    assert any("centric prior, of a mirror" in one for one in mirrored.applied)
    tilted = analyse_film(task(scanned(seed=4), phases_deg={**PHASES, 4: 30.0}))
    assert any("acentric prior" in one for one in tilted.applied)


def test_no_errors_given_give_no_sigma():
    scan = replace(scanned(), intensity_sigma=None)
    found = analyse_film(task(scan, rule="root", facts=()))
    assert found.profile.sigma is None
    assert found.layers.position_sigma is None


def test_samples_are_counted():
    assert analyse_film(task(samples=64)).profile.values.shape == (64,)
    assert refusal_of(lambda: analyse_film(task(samples=1))).path == ("samples",)


REPEATS = 400


def share_within(rows, sigmas, truth):
    return float((np.abs(np.array(rows) - truth) < np.array(sigmas)).mean())


def test_a_period_lies_within_one_sigma_two_times_in_three():
    exact = scanned()
    generator = np.random.default_rng(21)
    found = []
    for _ in range(REPEATS):
        moved = replace(exact, position=exact.position + 0.003 * generator.normal(size=COUNT))
        found.append(fit_spacing(moved, ORDER))
    share = share_within([one.period for one in found], [one.period_sigma for one in found], PERIOD)
    assert 0.63 < share < 0.73


def test_distances_and_areas_lie_within_one_sigma_two_times_in_three():
    """By the chain's pieces: amplitudes with noise, given phases, the factor known; the truth is of the cut series.

    Ripples in the water come and go with the noise, and with them bounds of layers. The chain merges what stands out
    by less than three σ; without that the σ's of areas would hold for only half of the repeats.
    """
    generator = np.random.default_rng(22)
    phases = np.array([PHASES[int(order)] for order in ORDER])
    error = 0.01 * np.abs(F) + 0.01
    treatment = Treatment()

    def features(amplitude, sigma):
        orders = FilmOrders.of(PERIOD, ORDER, amplitude / K, sigma / K)
        held = scale_by_facts(orders, phases, (KnownFactor(factor=K), KnownMean(mean=MEAN)), unit="e/Å³").apply(orders)
        set_of = held.coefficients(phases, MEAN)
        found = layers(set_of, lattice_line(set_of.lattice, [1], 129), treatment, least_significance=3.0)
        place = found.position
        # The sheets on the mirror and beside it, whichever other ripples there are.
        near = [int(np.argmin(np.abs((place - z + PERIOD / 2) % PERIOD - PERIOD / 2))) for z in (0.0, 5.2)]
        distance = layer_distances(found, [near])
        area = integrals(set_of, [slab(set_of.lattice, [1], 2.5, 8.5)], treatment)
        gap = (distance.distance[0] + PERIOD / 2) % PERIOD - PERIOD / 2
        return (
            (gap, *found.area[near], area.values[0]),
            (distance.sigma[0], *found.area_sigma[near], area.sigma[0]),
        )

    truth, _ = features(np.abs(F), error)
    rows = [features(np.abs(np.abs(F) + error * generator.normal(size=COUNT)), error) for _ in range(REPEATS)]
    for place, true in enumerate(truth):
        share = share_within([one[0][place] for one in rows], [one[1][place] for one in rows], true)
        assert 0.63 < share < 0.73, (place, share)


def test_many_strays_are_doubted_aloud():
    """Positions whose σ's are ten times too small: orders are taken for strays, and the answer says what to check."""
    rng = np.random.default_rng(5)
    order = np.arange(1, 10)
    q = 2 * np.pi * order / 40.0 + 3e-4 * rng.normal(size=9)
    intensity = 1e4 / order**2
    scan = Scan.of(q=q, position_sigma=np.full(9, 1e-7), intensity=intensity, intensity_sigma=0.02 * intensity)
    phases = {int(one): 0.0 for one in order}
    _, ways = number_lines(scan)
    made = analyse_film(FilmTask(scan=scan, phases_deg=phases))
    assert any("check them" in note for note in made.notes) == (ways[0].stray > 2)
    good = replace(scan, position_sigma=np.full(9, 3e-4))
    assert not any("check them" in note for note in analyse_film(FilmTask(scan=good, phases_deg=phases)).notes)
