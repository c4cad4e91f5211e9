from __future__ import annotations

import numpy as np
import pytest

from engine import Lattice
from service import interpret
from service.intake import check
from service.problems import Problem
from tests.service import bodies
from tests.service.bodies import changed, without

LATTICE = bodies.coefficients(bodies.CRYSTAL).lattice
FILM_LATTICE = Lattice.from_period(bodies.PERIOD)


def request(product, body):
    return check(product, body, {}, max_body_bytes=2**20)[1]


def samples(product, body, lattice=LATTICE):
    return interpret.samples(request(product, body), lattice)


def place(function, *arguments, **options):
    with pytest.raises(Problem) as caught:
        function(*arguments, **options)
    assert caught.value.kind == "invalid-request"
    return caught.value.places[0].pointer


def test_self_term_is_in_the_square_of_what_the_columns_carry():
    body = {**bodies.PROFILE, "field": "autocorrelation", "self_term": 5.0}
    assert interpret.treatment(request("profile", body), FILM_LATTICE).self_term == 5.0 / bodies.PERIOD**2
    body = changed(body, "set/values", "density_coefficient")
    assert interpret.treatment(request("profile", body), FILM_LATTICE).self_term == 5.0


@pytest.mark.parametrize(
    ("product", "body", "normal"),
    [
        ("profile", {**bodies.PROFILE, "average": "lateral"}, [1]),
        ("profile", {"set": bodies.CRYSTAL, "samples": 3, "normal_to": [1, 2, 0], "average": "lateral"}, [1, 2, 0]),
        ("slice", {**bodies.PLANE, "average": "lateral"}, [1, 1, 0]),
        ("slice", {**bodies.PLANE, "average": {"kind": "lateral", "normal": [0, 0, 1]}}, [0, 0, 1]),
    ],
)
def test_normal_of_an_average(product, body, normal):
    lattice = FILM_LATTICE if len(normal) == 1 else LATTICE
    average = interpret.treatment(request(product, body), lattice).average
    np.testing.assert_array_equal(average.normal, normal)


@pytest.mark.parametrize(
    ("average", "pointer"),
    [
        ({"kind": "slab"}, "/average/thickness"),
        ({"kind": "box"}, "/average/edges"),
        ({"kind": "ball"}, "/average/radius"),
        ({"kind": "lateral", "thickness": 1.0}, "/average/thickness"),
        ({"kind": "slab", "thickness": 1.0, "radius": 1.0}, "/average/radius"),
        ({"kind": "box", "edges": [[0.1, 0, 0]], "normal": [1, 0, 0]}, "/average/normal"),
        ({"kind": "ball", "radius": 1.0, "edges": [[1]]}, "/average/edges"),
        ({"kind": "slab", "thickness": 1.0}, "/average/normal"),
        ({"kind": "slab", "thickness": 1.0, "normal": [0, 0, 0]}, "/average/normal"),
        ({"kind": "box", "edges": [[1, 0, 0]] * 3 + []}, None),
    ],
)
def test_members_of_an_average(average, pointer):
    asked = request("grid", {**bodies.GRID, "average": average})
    if pointer is None:
        assert interpret.treatment(asked, LATTICE).average is not None
    else:
        assert place(interpret.treatment, asked, LATTICE) == pointer


def test_axes_and_places():
    line = samples("profile", bodies.PROFILE, FILM_LATTICE)
    assert (line.shape, line.labels) == ((17,), ("distance",))
    np.testing.assert_allclose(line.positions()[[0, -1], 0], [0, 1])
    box = samples("grid", bodies.BOX)
    assert box.labels == ("edge_1", "edge_2", "edge_3")
    np.testing.assert_allclose(box.positions()[0, 0, 0], [0.1, 0.2, 0.3])
    np.testing.assert_allclose(box.positions()[1, 0, 0] - box.positions()[0, 0, 0], [0.31 / 3, 0, 0])
    ends = samples("grid", {**bodies.BOX, "include_end": True})
    np.testing.assert_allclose(ends.positions()[-1, 0, 0], [0.41, 0.2, 0.3])
    cartesian = samples("points", {**bodies.POINTS, "coordinates": "cartesian"})
    np.testing.assert_allclose(LATTICE.to_cartesian(cartesian.positions()), bodies.POINTS["positions"], atol=1e-12)


@pytest.mark.parametrize(
    ("product", "body", "pointer"),
    [
        ("profile", {"set": bodies.FILM, "samples": 5}, "/from"),
        ("profile", without(bodies.PROFILE, "from"), "/from"),
        ("profile", {**bodies.PROFILE, "along": [1]}, "/along"),
        ("profile", {**bodies.PROFILE, "origin": [0]}, "/origin"),
        ("profile", {"set": bodies.FILM, "samples": 5, "along": [1], "length": 2.0}, "/length"),
        ("profile", {"set": bodies.FILM, "samples": 5, "along": [0]}, "/along"),
        ("profile", {"set": bodies.FILM, "samples": 5, "normal_to": [1], "origin": [0, 0]}, "/origin"),
        ("slice", without(bodies.SLICE, "origin"), "/origin"),
        ("slice", without(bodies.SLICE, "shape"), "/shape"),
        ("slice", {**bodies.SLICE, "offset": 1.0}, "/offset"),
        ("slice", {**bodies.PLANE, "include_end": True}, "/include_end"),
        ("slice", {**bodies.PLANE, "centre": [0, 0]}, "/centre"),
        ("grid", {"set": bodies.CRYSTAL}, "/shape"),
        ("grid", {**bodies.GRID, "shape": [4, 5]}, "/shape"),
        ("grid", {**bodies.GRID, "origin": [0, 0, 0]}, "/origin"),
        ("grid", {**bodies.GRID, "include_end": False}, "/include_end"),
        ("grid", without(bodies.BOX, "shape"), "/shape"),
        ("grid", {**bodies.BOX, "spacing": 1.0}, "/spacing"),
        ("grid", {**bodies.BOX, "include_end": True, "shape": [3, 1, 5]}, "/shape/1"),
        ("grid", changed(bodies.BOX, "edges/1", [0, 0, 0]), "/edges/1"),
        ("grid", changed(bodies.BOX, "edges/2", [0, 0]), "/edges/2"),
    ],
)
def test_forms_of_places(product, body, pointer):
    lattice = FILM_LATTICE if body["set"] is bodies.FILM or len(body["set"]["cell"]) == 1 else LATTICE
    assert place(samples, product, body, lattice) == pointer
