"""Scales and multiplicities of a request: from the form's members to the density."""

from __future__ import annotations

import json

import numpy as np
import pytest

from service import intake, pipeline
from service.parts import Part
from service.problems import Problem
from service.settings import Settings
from service.spool import Spool
from tests.samples import FOLDER

SCAN = Part("text/csv", (FOLDER / "film_scan.csv").read_bytes(), "film_scan.csv")


def computed(scale, *, corrections=None, reference=None):
    """Values of the film at its ends, quarter and middle."""
    request = json.loads((FOLDER / "film_from_scan.json").read_text())
    request["set"]["preparation"]["scale"] = scale
    if corrections is not None:
        request["set"]["preparation"]["corrections"] = corrections
    del request["along"], request["samples"]
    request |= {"product": "points", "positions": [[0], [0.25], [0.37]]}
    files = {"reflections": SCAN} if reference is None else {"reflections": SCAN, "reference": reference}
    product, checked = intake.check(None, request, files, max_body_bytes=10**6)
    with Spool.unnamed() as spool:
        return pipeline.run(product, checked, "npy", spool, Settings(), threads=1)


def test_two_densities_hold_at_their_places():
    places = [{"position": [0], "density": 1.7, "sigma": 0.02}, {"position": [0.37], "density": 0.05}]
    done = computed({"kind": "two_densities", "places": places})
    assert done.field.values[0] == pytest.approx(1.7, abs=1e-9)
    assert done.field.values[2] == pytest.approx(0.05, abs=1e-9)
    assert any("two known densities" in words for words in done.field.applied)


def test_reference_is_the_second_file():
    alone = computed({"kind": "none"}).field.values
    doubled = b"\n".join(
        line
        if not line[:1].isdigit()
        else b",".join(
            [line.split(b",")[0], *(b"%.3f" % (4 * float(x)) for x in line.split(b",")[1:3]), line.split(b",")[3]]
        )
        for line in SCAN.data.splitlines()
    )
    made = computed({"kind": "reference"}, reference=Part("text/csv", doubled, "twice.csv")).field.values
    # Four times the intensity is twice the amplitude.
    np.testing.assert_allclose(made, 2 * alone, rtol=1e-6)


def test_reference_has_multiplicities_of_its_own():
    """A reference of fewer orders is corrected by its own rows."""
    fewer = Part("text/csv", b"\n".join(SCAN.data.splitlines()[:-3]), "fewer.csv")
    kinds = [{"kind": "multiplicity"}]
    made = computed({"kind": "reference"}, corrections=kinds, reference=fewer).field.values
    np.testing.assert_allclose(made, computed({"kind": "none"}, corrections=kinds).field.values, rtol=1e-6)


def test_multiplicity_divides_intensities():
    plain = computed({"kind": "none"}, corrections=[]).field.values
    shared = computed({"kind": "none"}, corrections=[{"kind": "multiplicity"}]).field.values
    # Of a stack with inversion every order stands for itself and its mate.
    np.testing.assert_allclose(shared, plain / np.sqrt(2), rtol=1e-12)


@pytest.mark.parametrize(
    ("scale", "pointer"),
    [
        ({"kind": "reference"}, "/set/reference"),
        ({"kind": "two_densities"}, "/set/preparation/scale/places"),
        ({"kind": "zero_term", "mean": 0.3}, "/set/reflections/indices"),
        ({"kind": "none", "mean": 0.3}, "/set/preparation/scale/mean"),
        (
            {
                "kind": "two_densities",
                "places": [{"position": [0, 0], "density": 1}, {"position": [0.4], "density": 0}],
            },
            "/set/preparation/scale/places/0/position",
        ),
        (
            {"kind": "two_densities", "places": [{"position": [0], "density": 0}, {"position": [0.37], "density": 1}]},
            "/set/preparation/scale/places",
        ),
    ],
)
def test_faults_point_to_the_member(scale, pointer):
    with pytest.raises(Problem) as caught:
        computed(scale)
    assert caught.value.places[0].pointer == pointer


def test_reference_that_nothing_asks_for_is_refused():
    with pytest.raises(Problem, match="nothing is scaled to it"):
        computed({"kind": "none"}, reference=SCAN)
