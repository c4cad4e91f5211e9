"""Differences and averages of two sets, by hand in numpy."""

from __future__ import annotations

import io
import json

import numpy as np
import pytest

from engine.errors import InputError
from service.interpret_combination import coefficient_set, other_set, scale_choice
from service.problems import Problem
from service.schemas.combination import RelativeScaleIn
from tests.service import bodies
from tests.service.analyses.asked import CRYSTAL, FILM, LATER, request

PERIOD = bodies.PERIOD
Z = np.linspace(0, 1, 17)
ACENTRIC = {**FILM, "phase_deg": [20.0, 150.0, -40.0, 65.0]}
TURNED = {**LATER, "phase_deg": [35.0, 170.0, -60.0, 50.0]}
MERIT = [0.9, 0.5, 0.7, 1.0]


def film(given):
    """Its structure factors."""
    return np.array(given["amplitude"]) * np.exp(1j * np.deg2rad(given["phase_deg"]))


def profile(factors, mean, orders=(1, 2, 3, 4)):
    """ρ(z) = (1/P) Σ F exp(−2πi l z)."""
    waves = np.exp(-2j * np.pi * np.outer(Z, orders))
    return (mean + 2 * (waves @ factors).real) / PERIOD


def body(first=ACENTRIC, second=TURNED, **members):
    combination = {"kind": "difference", "with": second, "scale": {"kind": "as_given"}, **members}
    return {"set": first, "combination": combination, "from": [0], "to": [1], "samples": 17}


def answer(client, asked, **options):
    given = client.post("/v1/profile", json={**asked, **options})
    assert given.status_code == 200, given.text
    return given.json()


ONE, TWO = film(ACENTRIC), film(TURNED)
SAME, OTHER = np.exp(1j * np.angle(ONE)), np.exp(1j * np.angle(TWO))
APART = np.abs(ONE) - np.abs(TWO)
THIRD = {**FILM, "phase_deg": [10.0, -100.0, 75.0, 5.0]}
S_SQUARED = (np.arange(1, 5) / (2 * PERIOD)) ** 2
DIFFERENCES = [
    ("own", {}, ONE - TWO),
    ("first", {"phases": "first"}, APART * SAME),
    ("second", {"phases": "second"}, APART * OTHER),
    ("third", {"phases": "third", "third": THIRD}, APART * np.exp(1j * np.deg2rad(THIRD["phase_deg"]))),
    ("given k", {"scale": {"kind": "given", "k": 1.25}}, ONE - 1.25 * TWO),
    ("given k and b", {"scale": {"kind": "given", "k": 0.8, "b": 30.0}}, ONE - 0.8 * np.exp(-30 * S_SQUARED) * TWO),
]


@pytest.mark.parametrize(("members", "expected"), [pytest.param(*one[1:], id=one[0]) for one in DIFFERENCES])
def test_differences_by_hand(client, members, expected):
    """Means that were given in a unit of their own are no measurements: no scale moves them."""
    told = answer(client, body(**members))
    np.testing.assert_allclose(told["values"], profile(expected, 0.0), rtol=0, atol=1e-11)
    assert "1 × first − 1 × second" in told["applied"]
    assert any(word.startswith("second: ") for word in told["applied"])


def test_means_without_a_unit_are_scaled(client):
    first, second = ({**one, "unit": "arbitrary"} for one in (ACENTRIC, TURNED))
    told = answer(client, body(first, second, scale={"kind": "given", "k": 1.25}))
    np.testing.assert_allclose(told["values"], profile(ONE - 1.25 * TWO, 30 - 1.25 * 30), rtol=0, atol=1e-11)


def test_fitted_scale_is_the_weighted_least_squares_one(client):
    told = answer(client, body(scale={"kind": "fitted"}))
    (words,) = (word for word in told["applied"] if word.startswith("second: multiplied by"))
    k = float(words.split()[3])
    one, two, sigma = np.abs(ONE), np.abs(TWO), np.array(FILM["sigma"])
    # Both carry errors: the weights depend on k, whose fixed point is sought.
    found = 1.0
    for _ in range(200):
        weights = 1 / (sigma**2 + (found * sigma) ** 2)
        found = (weights * one * two).sum() / (weights * two**2).sum()
    assert k == pytest.approx(found, rel=0.02)
    assert "fitted on 4 independent amplitudes" in words
    np.testing.assert_allclose(told["values"], profile(ONE - k * TWO, 0.0), rtol=0, atol=1e-4)


def test_merit_is_applied_to_each_set_and_once(client):
    first, second = {**ACENTRIC, "merit": MERIT}, {**TURNED, "merit": MERIT[::-1]}
    told = answer(client, body(first, second), apply_merit=True)
    expected = np.array(MERIT) * ONE - np.array(MERIT[::-1]) * TWO
    np.testing.assert_allclose(told["values"], profile(expected, 0.0), rtol=0, atol=1e-11)


def test_averages_by_hand(client):
    second = {**TURNED, "sigma": [0.8, 0.25, 0.3, 0.1]}
    told = answer(client, body(second=second, kind="average"))
    weights = np.array([np.array(FILM["sigma"]) ** -2.0, np.array(second["sigma"]) ** -2.0])
    weights /= weights.sum(axis=0)
    np.testing.assert_allclose(told["values"], profile(weights[0] * ONE + weights[1] * TWO, 30.0), rtol=0, atol=1e-11)
    assert any("inverse variances" in word for word in told["applied"])
    assert any("chi squared" in word for word in told["applied"])
    told = answer(client, body(second=second, kind="average", weights="equal"))
    np.testing.assert_allclose(told["values"], profile((ONE + TWO) / 2, 30.0), rtol=0, atol=1e-11)
    told = answer(client, body(second=second, kind="average", weights="equal", phases="first"))
    means = (np.abs(ONE) + np.abs(TWO)) / 2
    np.testing.assert_allclose(told["values"], profile(means * SAME, 30.0), rtol=0, atol=1e-11)


def test_agreement_is_not_known_without_uncertainties(client):
    first, second = (bodies.without({"a": one}, "a/sigma")["a"] for one in (ACENTRIC, TURNED))
    told = answer(client, body(first, second, kind="average", weights="equal"))
    assert "agreement of the sets: not known without uncertainties" in told["applied"]


@pytest.mark.parametrize(
    ("missing", "orders"),
    [("omit", [2, 3]), ("zero_second", [1, 2, 3]), ("zero_first", [2, 3, 4]), ("zero_both", [1, 2, 3, 4])],
)
def test_terms_that_one_set_lacks(client, missing, orders):
    def part(given, rows):
        columns = {name: [given[name][row] for row in rows] for name in ("l", "amplitude", "phase_deg", "sigma")}
        return {**given, **columns}

    told = answer(client, body(part(ACENTRIC, [0, 1, 2]), part(TURNED, [1, 2, 3]), missing=missing))
    first, second = np.where(np.arange(4) < 3, ONE, 0), np.where(np.arange(4) > 0, TWO, 0)
    kept = np.isin(np.arange(1, 5), orders)
    np.testing.assert_allclose(told["values"], profile(np.where(kept, first - second, 0), 0.0), rtol=0, atol=1e-11)
    assert told["summary"]["coefficients"]["summed"] == 2 * len(orders)


def test_uncertainty_of_a_difference_by_hand(client):
    """σ² of a sum of amplitudes along fixed phases; both sets contribute."""
    told = answer(client, body(), uncertainty=True)
    slopes = 2 / PERIOD * np.exp(-2j * np.pi * np.outer(Z, [1, 2, 3, 4]))
    sigma = np.array(FILM["sigma"])
    variance = (((slopes * SAME).real * sigma) ** 2 + ((slopes * OTHER).real * sigma) ** 2).sum(axis=1)
    np.testing.assert_allclose(told["uncertainty"], np.sqrt(variance), rtol=1e-6)
    certain = answer(client, body(second=bodies.without({"a": TURNED}, "a/sigma")["a"]), uncertainty=True)
    assert np.all(np.array(certain["uncertainty"]) < told["uncertainty"])
    assert any("second" in word and "exact" in word for word in certain["summary"]["uncertainty"]["omits"])


@pytest.mark.parametrize(("media_type", "packed"), [("text/csv", bodies.as_csv), ("application/x-npz", bodies.as_npz)])
def test_columns_of_the_second_set_in_a_part(client, media_type, packed):
    asked = body()
    bare = bodies.changed(asked, "combination/with", bodies.bare({"set": TURNED})["set"])
    sent = bodies.form(
        ("request", "application/json", json.dumps(bare).encode()),
        ("with_columns", media_type, packed(bodies.table_of(TURNED))),
    )
    given = client.post("/v1/profile", content=sent, headers={"Content-Type": bodies.FORM})
    assert given.status_code == 200, given.text
    np.testing.assert_array_equal(given.json()["values"], answer(client, asked)["values"])


def test_second_set_of_a_file_of_reflections(client):
    """The same amplitudes as columns and as a file: less its half, the set is its half."""
    given = {name: bodies.AMPLITUDES_SET[name] for name in ("cell", "values")}
    combination = {"kind": "difference", "with": given, "scale": {"kind": "given", "k": 0.5}}
    plain = {"set": bodies.AMPLITUDES_SET, "positions": [[0.1, 0.2, 0.3]]}
    asked = {**plain, "combination": combination}
    sent = bodies.form(
        ("request", "application/json", json.dumps(asked).encode()),
        ("with_reflections", "text/csv", bodies.AMPLITUDES_FILE),
    )
    told = client.post("/v1/points", content=sent, headers={"Content-Type": bodies.FORM})
    assert told.status_code == 200, told.text
    (whole,) = client.post("/v1/points", json=plain).json()["values"]
    assert told.json()["values"] == pytest.approx([whole / 2])


def test_archives_hold_the_combined_values(client):
    given = client.post("/v1/profile", params={"format": "npz"}, json={**body(), "uncertainty": True})
    with np.load(io.BytesIO(given.content), allow_pickle=False) as archive:
        np.testing.assert_allclose(archive["values"], profile(ONE - TWO, 0.0), rtol=0, atol=1e-11)
        assert "1 × first − 1 × second" in json.loads(str(archive["metadata"]))["applied"]


def place(asked, product="profile", **limits):
    with pytest.raises(Problem) as caught:
        coefficient_set(request(product, asked), max_coefficients=limits.get("max_coefficients", 100))
    problem = caught.value
    assert problem.status == 422
    assert problem.detail.startswith(problem.places[0].pointer)
    return problem.places[0].pointer


WITH = "/combination/with"
REFUSED = [
    (bodies.without(body(), "combination/with"), WITH),
    (bodies.without(body(), "combination/scale"), "/combination/scale"),
    (bodies.changed(body(), "combination/scale", "fitted"), "/combination/scale"),
    (body(kind="ratio"), "/combination/kind"),
    (body(widow=1), "/combination/widow"),
    (body(second={**TURNED, "cell": {"period": 20.0}}), WITH),
    (body(second=CRYSTAL), WITH),
    (body(second={**TURNED, "density": "complex"}), WITH),
    (body(second={**TURNED, "cell": {"a": 3.0}}), WITH + "/cell"),
    (body(second={**TURNED, "amplitude": [1, 2, -3, 4]}), WITH + "/amplitude/2"),
    (body(second={**TURNED, "l": None}), WITH + "/l"),
    (body(second={**TURNED, "l": [1, 2, 2, 4]}), WITH),
    (body(second={**TURNED, "symmetry": {"space_group": 2}}), WITH + "/symmetry/space_group"),
    (body(second={**TURNED, "preparation": {}}), WITH + "/preparation"),
    (body(second={**TURNED, "unit": "other"}), "/combination/scale"),
    (body(second={**TURNED, "l": [5, 6, 7, 8]}, scale={"kind": "fitted"}), WITH),
    (body({**ACENTRIC, "mean": None}, {**TURNED, "l": [5, 6, 7, 8], "mean": None}), WITH),
    (body(second={**TURNED, "l": [5, 6, 7, 8]}, scale={"kind": "fitted"}, kind="average"), WITH),
    (body(second={**TURNED, "cell": {"period": 20.0}}, kind="average"), WITH),
    (body(phases="third"), "/combination/third"),
    (body(third=THIRD), "/combination/third"),
    (body(phases="third", third={**THIRD, "cell": {"period": 20.0}}), "/combination/third"),
    (body(phases="third", third=CRYSTAL), "/combination/third"),
    (body(phases="third", third={**THIRD, "phase_deg": [1, 2]}), "/combination/third/phase_deg"),
    (body(kind="average", phases="second"), "/combination/phases"),
    (body(kind="average", phases="third", third=THIRD), "/combination/phases"),
    (body(kind="average", missing="zero_first"), "/combination/missing"),
    (body(kind="average", second=bodies.without({"a": TURNED}, "a/sigma")["a"]), "/combination/weights"),
    (body(weights="equal"), "/combination/weights"),
    (body(scale={"kind": "given"}), "/combination/scale/k"),
    (body(scale={"kind": "given", "k": -1.0}), "/combination/scale/k"),
    (body(scale={"kind": "given", "k": 1.0, "robust": True}), "/combination/scale/robust"),
    (body(scale={"kind": "given", "k": 1.0, "b": -1e6}), "/combination/scale/b"),
    (body(scale={"kind": "fitted", "k": 1.0}), "/combination/scale/k"),
    (body(scale={"kind": "as_given", "displacement": True}), "/combination/scale/displacement"),
    ({**body(), "apply_merit": True}, "/apply_merit"),
    ({**body(phases="first"), "apply_merit": True}, "/apply_merit"),
    ({**body(second={**TURNED, "phase_deg": [0, None, 0, 0]}), "missing_phase": "refuse"}, WITH + "/phase_deg/1"),
    (bodies.changed(body(), "set/amplitude", [1]), "/set/amplitude"),
]


@pytest.mark.parametrize(("asked", "pointer"), REFUSED)
def test_refusals(asked, pointer):
    assert place(asked) == pointer


@pytest.mark.parametrize(("member", "pointer"), [("with", WITH + "/l"), ("third", "/combination/third/l")])
def test_rows_of_every_set_are_limited(member, pointer):
    longer = {
        **TURNED,
        "l": [1, 2, 3, 4, 5],
        **{name: [*TURNED[name], 1.0] for name in ("amplitude", "phase_deg", "sigma")},
    }
    asked = body(phases="third", third=THIRD)
    asked["combination"][member] = longer
    assert place(asked, max_coefficients=4) == pointer


def test_without_a_combination_the_set_is_that_of_the_request():
    made = coefficient_set(request("profile", bodies.without(body(), "combination")), max_coefficients=10)
    np.testing.assert_array_equal(made.values, bodies.coefficients(ACENTRIC).values)


def test_other_sets_have_the_limits_of_the_request():
    asked = request("profile", {**body(), "resolution": {"d_min": 5.0}})
    made = other_set(asked, asked.combination.other, ("elsewhere",), max_coefficients=10)
    assert made.tally.beyond_resolution == 1


def test_scales_say_what_they_need():
    sets = (bodies.coefficients(FILM), bodies.coefficients(LATER))
    made = scale_choice(RelativeScaleIn(kind="given", k=2.0, k_sigma=0.1, b=-3.0), sets)
    assert (made.kind, made.k, made.k_sigma, made.b) == ("given", 2.0, 0.1, -3.0)
    made = scale_choice(RelativeScaleIn(kind="fitted", displacement=True), sets)
    assert (made.kind, made.displacement, made.robust) == ("fitted", True, False)
    with pytest.raises(InputError, match="absent"):
        scale_choice(RelativeScaleIn(kind="given", b=1.0), sets)
