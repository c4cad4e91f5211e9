from __future__ import annotations

import json

import numpy as np
import pytest

from service.encoders.samples import HEADER, LONGEST_HEADER
from tests.service import bodies


def answered(client, product, body, form):
    response = client.post(f"/v1/{product}", params={"format": form}, json=body)
    assert response.status_code == 200, response.text
    told = json.loads(response.headers[HEADER])
    sent = np.frombuffer(response.content, dtype=told["dtype"]).reshape(told["shape"])
    return told, sent


SLICE = {"set": bodies.CRYSTAL, "plane": [1, 1, 1], "offset": 0.7, "width": 9, "height": 7, "spacing": 0.25}


@pytest.mark.parametrize(("form", "size"), [("f32", 4), ("u16", 2), ("u8", 1)])
@pytest.mark.parametrize(
    ("product", "body"),
    [("profile", bodies.PROFILE), ("slice", SLICE), ("grid", {"set": bodies.CRYSTAL, "shape": [9, 8, 7]})],
)
def test_samples_are_the_values(client, product, body, form, size):
    whole = client.post(f"/v1/{product}", json=body).json()
    values = np.array(whole["values"])
    told, sent = answered(client, product, body, form)
    assert sent.dtype.itemsize == size
    found = told["offset"] + told["scale"] * sent.astype(float)
    largest = np.abs(values).max()
    error = {"f32": 1e-7 * largest, "u16": np.ptp(values) / 65534, "u8": np.ptp(values) / 254}[form]
    assert np.abs(found - values).max() <= 0.5001 * error + 1e-7 * largest
    for name in ("shape", "unit", "field", "quantity", "axes", "origin"):
        assert told[name] == whole[name]
    for name in ("minimum", "maximum", "mean", "rms", "coefficients"):
        assert told["summary"][name] == whole["summary"][name]


@pytest.mark.parametrize(("form", "most"), [("u16", 65534), ("u8", 254)])
def test_the_scale_is_used_from_end_to_end(client, form, most):
    told, sent = answered(client, "slice", SLICE, form)
    assert (sent.min(), sent.max(), told["no_value"]) == (0, most, most + 1)


def test_a_constant_has_a_scale(client):
    body = {"set": {**bodies.FILM, "amplitude": [0, 0, 0, 0], "mean": 17.4}, "from": [0], "to": [1], "samples": 5}
    told, sent = answered(client, "profile", body, "u8")
    assert set(sent) == {0}
    assert (told["offset"], told["scale"]) == (pytest.approx(1.0), 1.0)


def test_values_that_do_not_exist_are_marked(client):
    measured = {**bodies.FILM, "sigma": [0, 0, 0, 0]}
    body = {"set": measured, "from": [0], "to": [1], "samples": 5, "quantity": "significance"}
    response = client.post("/v1/profile", params={"format": "u8"}, json=body)
    if response.status_code == 200:
        told = json.loads(response.headers[HEADER])
        assert set(response.content) == {told["no_value"]}
    else:
        assert response.status_code == 422


def test_complex_values_are_refused(client):
    body = {"set": bodies.ABSORBING, "from": [0, 0, 0], "to": [1, 0, 0], "samples": 5}
    response = client.post("/v1/profile", params={"format": "f32"}, json=body)
    assert response.status_code == 406
    assert "complex" in response.json()["detail"]


def test_uncertainties_need_another_form(client):
    body = {**bodies.PROFILE, "uncertainty": True}
    response = client.post("/v1/profile", params={"format": "u16"}, json=body)
    assert response.status_code == 406


def test_the_header_stays_short_and_counts_what_it_leaves_out(client):
    body = {**SLICE, "set": {**bodies.CRYSTAL, "unit": "é" * 40}}
    told, _ = answered(client, "slice", body, "f32")
    assert told["unit"] == "é" * 40
    assert len(json.dumps(told, separators=(",", ":"))) <= LONGEST_HEADER
