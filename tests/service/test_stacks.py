"""Series against the single products of their members."""

from __future__ import annotations

import json

import numpy as np
import pytest

from service import stacks
from service.problems import Problem
from service.settings import Settings
from tests.service.analyses.asked import CRYSTAL, FEW, FILM, request
from tests.service.bodies import changed, without
from tests.service.series_bodies import MEMBERS, SERIES, SLICES


def answer(client, product, body):
    given = client.post(f"/v1/{product}", json=body)
    assert given.status_code == 200, given.text
    return given.json()


def single(client, given, **options):
    return answer(client, "profile", {"set": given, **SERIES["profile"], **options})


def less(client, given, other, **members):
    """A difference as a single product."""
    combination = {"kind": "difference", "with": other, "scale": {"kind": "as_given"}, **members}
    return single(client, given, combination=combination)


def test_rows_are_the_single_profiles(client):
    told = answer(client, "series", {**SERIES, "uncertainty": True})
    for row, sigma, given in zip(told["values"], told["uncertainty"], MEMBERS, strict=True):
        alone = single(client, given, uncertainty=True)
        np.testing.assert_allclose(row, alone["values"], rtol=0, atol=1e-12)
        np.testing.assert_allclose(sigma, alone["uncertainty"], rtol=1e-6)
    assert told["variable"] == {"name": "temperature", "unit": "K", "values": [290, 310, 330]}
    assert [one["value"] for one in told["members"]] == [290, 310, 330]
    assert (told["reference"], told["difference"], told["shape"]) == (1, False, [3, 17])
    assert told["axes"][0]["label"] == "distance"


@pytest.mark.parametrize("reference", [1, 2, 3])
def test_differences_are_from_the_reference(client, reference):
    told = answer(client, "series", {**SERIES, "difference": True, "reference": reference, "uncertainty": True})
    for number, given in enumerate(MEMBERS, start=1):
        row, sigma = told["values"][number - 1], told["uncertainty"][number - 1]
        if number == reference:
            assert not np.any(row)
            assert not np.any(sigma)
        else:
            alone = less(client, given, MEMBERS[reference - 1])
            np.testing.assert_allclose(row, alone["values"], rtol=0, atol=1e-12)
            assert min(sigma) > 0
    assert told["reference"] == reference


def test_phases_of_the_reference(client):
    told = answer(client, "series", {**SERIES, "phases": "reference"})
    expected = single(client, {**MEMBERS[2], "phase_deg": FILM["phase_deg"]})["values"]
    np.testing.assert_allclose(told["values"][2], expected, rtol=0, atol=1e-12)


@pytest.mark.parametrize("common", ["intersection", "each"])
def test_terms_that_members_share(client, common):
    body = changed(SERIES, "members/1/set", {"l": [1, 2, 3, 5]})
    told = answer(client, "series", {**body, "common": common})
    shared = {name: FILM[name][:3] for name in ("l", "amplitude", "phase_deg", "sigma")}
    given = {**FILM, **shared} if common == "intersection" else FILM
    np.testing.assert_allclose(told["values"][0], single(client, given)["values"], rtol=0, atol=1e-12)
    given = {**FILM, **shared} if common == "intersection" else {**FILM, "l": [1, 2, 3, 5]}
    np.testing.assert_allclose(told["values"][1], single(client, given)["values"], rtol=0, atol=1e-12)


def test_fitted_scales_bring_members_together(client):
    """A member that is the reference on another scale becomes the reference."""
    doubled = {"amplitude": [2 * one for one in FILM["amplitude"]], "sigma": [2 * one for one in FILM["sigma"]]}
    body = {**SERIES, "members": [{"value": 1.0, "set": {}}, {"value": 2.0, "set": doubled}]}
    told = answer(client, "series", {**body, "scale": {"kind": "fitted"}})
    np.testing.assert_allclose(told["values"][1], told["values"][0], atol=1e-6)
    assert any("multiplied by 0.5 ± " in word for word in told["members"][1]["applied"])
    assert told["members"][0]["applied"] == ["no termination window"]


def test_slices_and_treatment(client):
    body = {**SLICES, "window": {"kind": "lanczos"}, "scale": {"kind": "as_given"}}
    told = answer(client, "series", body)
    alone = answer(client, "slice", {"set": FEW, **SLICES["slice"], "window": {"kind": "lanczos"}})
    np.testing.assert_allclose(told["values"][0], alone["values"], rtol=0, atol=1e-12)
    assert [axis["label"] for axis in told["axes"]] == [axis["label"] for axis in alone["axes"]]


def test_lateral_average_has_the_normal_of_the_profile(client):
    body = {**without(SLICES, "slice"), "profile": {"normal_to": [0, 0, 1], "samples": 9}, "average": "lateral"}
    told = answer(client, "series", body)
    alone = answer(client, "profile", {"set": FEW, "normal_to": [0, 0, 1], "samples": 9, "average": "lateral"})
    np.testing.assert_allclose(told["values"][0], alone["values"], rtol=0, atol=1e-12)


def refusal(body, form=None, **limits):
    with pytest.raises(Problem) as caught:
        stacks.stack(request("series", body), Settings(**limits), form, threads=1)
    return caught.value


def place(body, **limits):
    problem = refusal(body, **limits)
    assert problem.status == 422
    assert problem.detail.startswith(problem.places[0].pointer)
    return problem.places[0].pointer


def member(number, **members):
    return changed(SERIES, f"members/{number}/set", members)


REFUSED = [
    ({**SERIES, "slice": SLICES["slice"]}, "/profile"),
    (without(SERIES, "profile"), "/profile"),
    ({**SERIES, "combination": {"kind": "difference", "with": FILM, "scale": {"kind": "as_given"}}}, "/combination"),
    ({**SERIES, "reference": 4}, "/reference"),
    ({**SERIES, "reference": 0}, "/reference"),
    ({**SERIES, "members": []}, "/members"),
    ({**SERIES, "members": [3]}, "/members/0"),
    ({**SERIES, "variable": ""}, "/variable"),
    (changed(SERIES, "members/1/value", "warm"), "/members/1/value"),
    (without(SERIES, "scale"), "/scale"),
    (member(1, amplitude=[1, 2, 3]), "/members/1/set/amplitude"),
    (member(2, amplitude=[1, 2, -3, 4]), "/members/2/set/amplitude/2"),
    (member(1, widow=1), "/members/1/set/widow"),
    (member(1, l=None), "/members/1/set/l"),
    (member(1, l=[1, 2, 2, 4]), "/members/1/set"),
    (member(2, cell={"period": 20.0}), "/members/2/set"),
    (member(0, cell={"period": 20.0}), "/members/1/set"),
    ({**member(0, cell={"period": 20.0}), "reference": 2}, "/members/0/set"),
    (member(1, **CRYSTAL), "/members/1/set"),
    (member(1, density="complex"), "/members/1/set"),
    (member(1, real=[1, 2, 3, 4], imag=[0, 0, 0, 0]), "/members/1/set/amplitude"),
    (member(1, unit="other"), "/scale"),
    (member(1, phase_deg=[None] * 4, mean=None), "/members/1/set/phase_deg"),
    ({**member(1, l=[5, 6, 7, 8]), "scale": {"kind": "fitted"}}, "/members/1/set"),
    ({**member(1, l=[5, 6, 7, 8], mean=None), "set": {**FILM, "mean": None}}, "/members"),
    ({**member(1, sigma=None), "uncertainty": True}, "/members/1/set/sigma"),
    ({**SERIES, "set": [1]}, "/set"),
    ({**SERIES, "scale": {"kind": "given"}}, "/scale/k"),
    ({**SERIES, "scale": {"kind": "given", "k": 1.0, "b": -1e7}}, "/scale/b"),
    (changed(SERIES, "profile", {"from": [0], "samples": 4}), "/profile/to"),
    (changed(SERIES, "profile", {"from": [0], "to": [0], "samples": 4}), "/profile/to"),
    (changed(SERIES, "profile", {"samples": 4}), "/profile/from"),
    (changed(SERIES, "profile/samples", 1), "/profile/samples"),
    (changed(SERIES, "profile/length", 1.0), "/profile/length"),
    ({**without(SERIES, "profile"), "slice": SLICES["slice"]}, "/slice/plane"),
    (changed(SLICES, "slice", {"plane": [0, 0, 1], "width": 1.0}), "/slice/height"),
    (changed(SLICES, "slice/plane", [0, 0, 0]), "/slice/plane"),
    ({**SERIES, "apply_merit": True}, "/apply_merit"),
    ({**SERIES, "field": "response", "difference": True}, "/difference"),
    ({**SERIES, "field": "response", "uncertainty": True}, "/uncertainty"),
    ({**SERIES, "quantity": "sigma"}, "/quantity"),
    ({**SERIES, "average": {"kind": "slab"}}, "/average/thickness"),
]


@pytest.mark.parametrize(("body", "pointer"), REFUSED)
def test_refusals(body, pointer):
    assert place(body) == pointer


def test_members_of_one_value_are_told_apart():
    body = changed(changed(SERIES, "members/1/value", 290.0), "members/2/value", 290.0)
    body = changed(body, "members/2/set", {"cell": {"period": 20.0}})
    assert place(body) == "/members/2/set"


@pytest.mark.parametrize(
    ("limits", "pointer"),
    [({"max_samples": 50}, "/members"), ({"max_coefficients": 3}, "/members/0/set/l")],
)
def test_limits(limits, pointer):
    problem = refusal(SERIES, **limits)
    assert (problem.kind, problem.places[0].pointer) == ("too-costly", pointer)


def test_memory_is_refused_before_it_is_taken(monkeypatch):
    monkeypatch.setattr("engine.combination.stack.perform", lambda *_, **__: pytest.fail("the work began"))
    body = changed(SERIES, "profile/samples", 100_000)
    problem = refusal(body, max_memory_bytes=2**20)
    assert (problem.kind, problem.places[0].pointer) == ("too-costly", "/profile")


@pytest.mark.parametrize(
    ("body", "form", "kind"),
    [
        (SERIES, "json", "too-costly"),
        (SERIES, "csv", "too-costly"),
        ({**SERIES, "uncertainty": True}, "npy", "not-acceptable"),
        (SLICES, "csv", "not-acceptable"),
    ],
)
def test_forms_are_refused_before_the_work(monkeypatch, body, form, kind):
    monkeypatch.setattr(stacks, "aligned", lambda *_, **__: pytest.fail("the work began"))
    assert refusal(body, form, max_json_values=50).kind == kind


def test_progress_and_its_end():
    told = []
    stacks.stack(
        request("series", SERIES), Settings(), threads=1, progress=lambda done, total: told.append((done, total))
    )
    assert told == [(1, 3), (2, 3), (3, 3)]


def test_a_request_of_a_set_that_only_members_complete(client):
    """What all share stands in the set of the request, and need not be a set by itself."""
    given = {name: FILM[name] for name in ("cell", "values", "l", "phase_deg", "mean", "unit")}
    members = [{"value": float(n), "set": {"amplitude": one["amplitude"]}} for n, one in enumerate(MEMBERS)]
    told = answer(client, "series", {**SERIES, "set": given, "members": members})
    np.testing.assert_allclose(told["values"][0], single(client, FILM)["values"], rtol=0, atol=1e-12)
    assert json.dumps(told["members"][0]["uncertainty"]) == "null"
