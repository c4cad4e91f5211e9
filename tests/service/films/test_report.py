"""A film's report: the numbers of the engine asked directly, and of sums made here; every table."""

from __future__ import annotations

import json

import numpy as np
import pytest

from engine.amplitudes.corrections import Lorentz, Polarisation
from engine.films.analysis import analyse_film
from engine.films.facts import KnownDensity, KnownMean
from engine.films.scans import Scan
from engine.films.signs import Criteria, Flat, LeastStructure, NonNegative
from engine.films.task import FilmTask, Region
from engine.resolution.envelope import Envelope
from service.films.report import CITATIONS, film_report
from tests.service.analyses.asked import numbers, table
from tests.service.films.asked import FILM, GIVEN, PERIOD, SIMPLE, amplitudes, answered, changed, mean


@pytest.fixture(scope="module")
def analysed():
    """The same film, asked of the engine by hand."""
    columns = FILM["scan"]
    return analyse_film(
        FilmTask(
            scan=Scan.of(**columns),
            corrections=(Lorentz("film_part_of_arc"), Polarisation()),
            criteria=Criteria(
                non_negative=NonNegative(floor=0.1),
                flat=(Flat(start=-4, stop=4, sigma=0.05),),
                least_structure=LeastStructure(weight=0.5),
            ),
            decisive=12.0,
            facts=(
                KnownMean(mean=round(mean(PERIOD), 4), sigma=0.01),
                KnownDensity(start=-3, end=3, density=0.334, sigma=0.01),
            ),
            unit="e/Å³",
            samples=97,
            regions=(Region(name="sheet", start=5, end=14.2), Region(name="gallery", start=-4.5, end=4.5)),
            area=24.0,
            envelope=Envelope.from_bound(0.3, 5),
            instrument_width=0.1,
        )
    )


@pytest.fixture(scope="module")
def document():
    return answered("film", FILM)


def column(records, name):
    return [one[name] for one in records]


def test_numbers_are_the_engine_s(document, analysed):
    def same(told, expected):
        np.testing.assert_allclose(np.asarray(told, float), expected, rtol=1e-9, atol=1e-12)

    profile = document["profile"]
    same(profile["distance_angstrom"], analysed.profile.axes[0].coordinates())
    same(profile["value"], analysed.profile.values)
    same(profile["uncertainty"], analysed.profile.sigma.values)
    same(profile["unmeasured"], analysed.change.values)
    same(column(document["orders"], "amplitude"), analysed.orders.amplitude)
    same(column(document["orders"], "amplitude_sigma"), analysed.orders.sigma)
    same(column(document["orders"], "phase_deg"), analysed.phase_deg)
    same(column(document["orders"], "intensity"), FILM["scan"]["intensity"])
    for name, value in (("period", analysed.spacing.period), ("period_sigma", analysed.spacing.period_sigma)):
        assert document["spacing"][name] == pytest.approx(value, rel=1e-9)
    same(column(document["layers"], "position"), analysed.layers.position)
    same(column(document["regions"], "integral"), analysed.integrals.values)
    same(column(document["regions"], "sigma"), analysed.integrals.sigma)
    same(column(document["signs"]["sets"], "score"), analysed.ranked.scores)
    assert column(document["signs"]["sets"], "signs") == analysed.ranked.signs.tolist()
    assert document["signs"]["verdict"] == analysed.ranked.verdict
    assert document["scale"]["factor"] == pytest.approx(analysed.scale.factor, rel=1e-9)
    assert document["widths"]["words"] == analysed.widths.words
    same([one["thickness"] for one in document["widths"]["models"]], [one.thickness for one in analysed.widths.fits])
    assert document["unmeasured"]["rms"] == pytest.approx(analysed.change.rms, rel=1e-9)


def test_numbers_are_those_of_the_sum(document):
    """F_0/d + (2/d) Σ F_l cos(2πlz/d), and its integrals, by the truth the scan was made from."""
    order, f = np.arange(1, 6), amplitudes(PERIOD)
    amplitude = np.array(column(document["orders"], "amplitude"))
    phase = np.radians(column(document["orders"], "phase_deg"))
    np.testing.assert_allclose(amplitude * np.cos(phase), f, rtol=0.02)
    period, level = document["spacing"]["period"], document["scale"]["mean"]
    assert period == pytest.approx(PERIOD, abs=1e-3)
    z = np.array(document["profile"]["distance_angstrom"])
    signed = amplitude * np.cos(phase)
    expected = level + 2 / period * (signed @ np.cos(2 * np.pi * order[:, None] * z / period))
    np.testing.assert_allclose(document["profile"]["value"], expected, rtol=1e-9)
    for region in document["regions"]:
        ends = np.array([region["from"], region["to"]])
        waves = np.sin(2 * np.pi * order[:, None] * ends / period) * period / (2 * np.pi * order[:, None])
        whole = level * np.ptp(ends) + 2 / period * signed @ np.diff(waves, axis=1)[:, 0]
        assert region["integral"] == pytest.approx(whole, rel=1e-9)
        assert region["mean"] == pytest.approx(whole / np.ptp(ends), rel=1e-9)
        assert region["per_repeat_unit"] == pytest.approx(24 * whole, rel=1e-9)
        assert region["per_repeat_unit_sigma"] == pytest.approx(24 * region["sigma"], rel=1e-9)


def test_what_is_not_there_is_null():
    made = answered("film", GIVEN)
    assert (made["scale"], made["signs"], made["unmeasured"], made["regions"]) == (None, None, None, [])
    assert column(made["orders"], "phase_deg") == list(GIVEN["phases"]["phase_deg"].values())
    assert answered("film", changed(GIVEN, phases={"phase_deg": {"1": 180}}))["orders"][1]["phase_deg"] is None


def test_sources_are_those_of_what_was_done(document):
    assert set(document["sources"]) == {"amplitudes", "signs", "position uncertainties", "widths"}
    bare = changed(GIVEN, amplitudes="root", scan__intensity_sigma=..., scan__width=..., scan__width_sigma=...)
    assert set(answered("film", bare)["sources"]) == set()
    assert set(answered("film", changed(bare, spacing__critical_q=0.02))["sources"]) == {"refraction"}
    assert all(CITATIONS[name] == words for name, words in document["sources"].items())


TABLES = {
    "layers": ("layers", {"position": "position", "area": "area", "height_sigma": "height_sigma"}),
    "orders": ("orders", {"order": "order", "q": "q", "amplitude": "amplitude", "residual": "residual"}),
    "signs": (("signs", "sets"), {"rank": "rank", "score": "score", "support": "support"}),
}


@pytest.mark.parametrize("name", TABLES)
def test_tables_of_records(name, document):
    place, columns = TABLES[name]
    records = document[place] if isinstance(place, str) else document[place[0]][place[1]]
    _, found = table(answered("film", changed(FILM, table=name), "csv"))
    for told, member in columns.items():
        np.testing.assert_allclose(numbers(found[told]), column(records, member), rtol=1e-12)
    if name == "signs":
        letters = {1: "+", -1: "−", 0: "0"}
        expected = ["".join(letters[sign] for sign in one["signs"]) for one in records]
        assert found["signs"] == expected
        parts = np.transpose([numbers(found[criterion]) for criterion in document["signs"]["criteria"]])
        np.testing.assert_allclose(parts, column(records, "parts"), rtol=1e-12)
        np.testing.assert_allclose(parts.sum(axis=1), column(records, "score"), rtol=1e-9)


def test_the_profile_as_a_table(document):
    _, found = table(answered("film", changed(FILM, table="profile"), "csv"))
    for name in ("distance_angstrom", "value", "uncertainty", "unmeasured"):
        np.testing.assert_allclose(numbers(found[name]), document["profile"][name], rtol=1e-12)
    bare = answered("film", changed(FILM, table="profile", unmeasured=...), "csv")
    assert "unmeasured" not in table(bare)[1]


def test_above_a_table_stands_what_to_know(document):
    head, _ = table(answered("film", FILM, "csv"))
    assert head[0] == "film; unit: e/Å³"
    assert head[1].startswith("period 19.2 ± ")
    assert len(head) == len(set(head))
    for words in (*document["notes"], document["signs"]["verdict"], "uncertainty contains"):
        assert any(line.startswith(words) for line in head), words
    assert any(line.startswith("sheet: 11.07 ± 0.18 e/Å²") for line in head)


def test_text_of_a_user_cannot_leave_its_line():
    head, found = table(answered("film", changed(SIMPLE, unit="e\n1,2,3\n#"), "csv"))
    assert len({len(one) for one in found.values()}) == 1
    assert "position" in found
    assert not any(line.startswith("1,2,3") for line in head)


def test_the_terminal_has_the_other_tables_too(analysed):
    made = film_report(analysed, "profile")
    assert [name for name, _ in made.further] == ["orders", "layers", "signs"]
    assert [name for name, _ in film_report(analysed, "layers").further] == ["orders", "signs"]
    for one in (made.table, *(one for _, one in made.further)):
        assert len({len(values) for _, values in one}) == 1


def test_the_document_is_json(document):
    assert "NaN" not in json.dumps(document)
