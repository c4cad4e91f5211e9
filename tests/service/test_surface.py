"""Surfaces of grids: what is asked for, refused, computed, and told beside a mesh."""

from __future__ import annotations

import json

import numpy as np
import pytest

from engine.fields import PHASES_DECIDE
from engine.surfaces import Mesh
from service import intake, pipeline
from service import surface as module
from service.problems import Problem
from service.settings import Settings
from service.spool import Spool
from tests.service import bodies
from tests.service.gltf_files import opened
from tests.service.problem_shape import assert_problem

MEDIA_TYPE = "model/gltf-binary"
SURFACE = {"set": bodies.CRYSTAL, "spacing": 0.25, "surface": {"level_rms": 0.8}}
CLOSED = {**SURFACE, "surface": {"level_rms": 0.8, "closed": True}}
MEASURED = bodies.changed(SURFACE, "set/sigma", [0.5] * len(bodies.CRYSTAL["h"]))


def ran(body, form="glb", watch=None, **limits):
    _, request = intake.check("grid", body, {}, max_body_bytes=2**20)
    with Spool.unnamed() as spool:
        done = pipeline.run("grid", request, form, spool, Settings(**limits), threads=1, watch=watch)
        return done, bytes(spool.view())


def refusal(*arguments, **options):
    with pytest.raises(Problem) as caught:
        ran(*arguments, **options)
    return caught.value


def mesh_of(made):
    none = np.zeros(len(made.triangles), dtype=bool)
    return Mesh(made.positions.astype(float), made.normals.astype(float), made.triangles.astype(np.int32), none)


def test_a_closed_mesh_and_what_is_told_of_it():
    done, content = ran(CLOSED)
    made = opened(content)
    told, mesh = made.extras, mesh_of(made)
    assert mesh.unpaired_edges() == 0
    assert told["triangles"] == len(made.triangles)
    assert told["vertices"] == len(made.positions)
    assert told["volume"] == pytest.approx(mesh.volume(), rel=1e-4)
    assert told["area"] + told["cap_area"] == pytest.approx(mesh.area(), rel=1e-5)
    assert told["closed"] is True
    assert told["coarsened"] is False
    assert told["steps"] == told["steps_asked"] == told["shape"]
    lattice = bodies.coefficients(bodies.CRYSTAL).lattice
    np.testing.assert_allclose(told["cell"]["vectors"], lattice.vectors)
    np.testing.assert_allclose(told["region"]["edges"], lattice.vectors)
    np.testing.assert_allclose(told["spacing"], lattice.lengths / told["steps"])
    assert max(told["spacing"]) <= 0.25
    assert told["region"]["volume"] == pytest.approx(lattice.volume)
    assert told["region"]["repeats"] == [True] * 3
    values = done.field.values
    assert told["level"] == pytest.approx(values.mean() + 0.8 * values.std(), rel=1e-6)
    assert told["level_in"]["member"] == "level_rms"
    assert told["level_in"]["number"] == 0.8
    assert told["fraction_above"] == pytest.approx((values > told["level"]).mean())
    assert told["statement"] == PHASES_DECIDE
    assert PHASES_DECIDE in told["notes"]
    assert any(f"{told['triangles']:,} triangles" in note for note in told["notes"])
    assert told["unit"] == told["units"]["level"] == done.field.unit
    assert told["units"]["length"] == "Å"
    assert "Å" in told["coordinates"]
    assert "lower values" in told["orientation"]
    assert told["summary"]["coefficients"]["rows"] == len(bodies.CRYSTAL["h"])
    assert told["summary"]["resolution"]["d_min"] > 0
    assert told["field"] == "density"
    inside = lattice.to_fractional(made.positions.astype(float))
    assert inside.min() > -1e-6
    assert inside.max() < 1 + 1e-6


def test_an_open_mesh_encloses_nothing():
    made = opened(ran(SURFACE)[1])
    assert (made.extras["volume"], made.extras["cap_area"], made.extras["closed"]) == (None, 0.0, False)
    assert made.extras["area"] == pytest.approx(opened(ran(CLOSED)[1]).extras["area"])


def test_a_box():
    body = {**bodies.BOX, "shape": [14, 15, 40], "surface": {"level_rms": 0.0, "closed": True}}
    made = opened(ran(body)[1])
    assert made.extras["steps"] == [14, 15, 40]
    assert made.extras["region"]["repeats"] == [False] * 3
    assert mesh_of(made).unpaired_edges() == 0
    ended = opened(ran({**body, "shape": [15, 16, 41], "include_end": True})[1])
    assert ended.extras["steps"] == [14, 15, 40]
    np.testing.assert_allclose(ended.positions, made.positions, atol=1e-5)


def test_a_coarser_mesh_says_so():
    free = opened(ran(bodies.changed(SURFACE, "spacing", 0.1))[1])
    body = bodies.changed(bodies.changed(SURFACE, "spacing", 0.1), "surface/max_triangles", 1000)
    made = opened(ran(body)[1])
    assert free.extras["coarsened"] is False
    assert free.extras["triangles"] > 1000 >= made.extras["triangles"]
    assert made.extras["coarsened"] is True
    assert made.extras["steps_asked"] == free.extras["steps"]
    assert min(made.extras["spacing"]) > 0.1
    assert any("summed anew" in note for note in made.extras["notes"])
    assert made.extras["level"] == free.extras["level"]


def test_levels_in_uncertainties():
    body = bodies.changed(MEASURED, "surface", {"level_sigmas": 4})
    made = opened(ran(body)[1])
    assert made.extras["level"] == pytest.approx(4 * made.extras["level_in"]["rms_uncertainty"])
    assert made.extras["summary"]["uncertainty"]["contains"]


@pytest.mark.parametrize(("quantity", "level"), [("sigma", {"level_rms": 0.2}), ("significance", {"level": 1.5})])
def test_quantities(quantity, level):
    made = opened(ran({**MEASURED, "quantity": quantity, "surface": level})[1])
    assert made.extras["quantity"] == quantity


def test_a_field_that_needs_no_phases_has_no_word_about_them():
    made = opened(ran({**SURFACE, "field": "autocorrelation"})[1])
    assert made.extras["statement"] is None
    assert made.extras["field"] == "autocorrelation"


@pytest.mark.parametrize(
    ("body", "pointer", "words"),
    [
        ({**SURFACE, "surface": {}}, "/surface", "level_sigmas"),
        ({**SURFACE, "surface": {"level": 1, "level_rms": 1}}, "/surface/level_rms", "second"),
        ({**SURFACE, "surface": {"level": 1e9}}, "/surface/level", "to"),
        ({**SURFACE, "surface": {"level_rms": -90}}, "/surface/level_rms", "outside"),
        ({**SURFACE, "surface": {"level_sigmas": 3}}, "/set/sigma", "sigma"),
        ({**MEASURED, "quantity": "sigma", "surface": {"level_sigmas": 3}}, "/surface/level_sigmas", "quantity"),
        ({**SURFACE, "surface": {"level_rms": 0, "max_triangles": 100}}, "/surface/max_triangles", "more triangles"),
        ({**MEASURED, "uncertainty": True}, "/uncertainty", "no place"),
        ({**SURFACE, "unmeasured": {"amplitude": 0.1, "b": 1}}, "/unmeasured", "no place"),
        ({**SURFACE, "field": "gradient"}, "/field", "gradient_magnitude"),
        ({**SURFACE, "set": bodies.ABSORBING}, "/set/density", "complex"),
        ({"set": bodies.GRID["set"], "shape": [8, 8, 8]}, "/surface", "level"),
        ({"set": bodies.FILM, "spacing": 1.0, "surface": {"level": 0}}, "/set/cell", "dimensions"),
    ],
)
def test_refusals_say_where_and_how_to_mend_it(body, pointer, words):
    problem = refusal(body)
    assert (problem.status, problem.places[0].pointer) == (422, pointer)
    assert words in problem.detail


@pytest.mark.parametrize("form", ["json", "npy", "npz", "png", "svg", "f32", "u16", "u8"])
def test_other_forms_hold_no_surface(form):
    problem = refusal(SURFACE, form)
    assert problem.places[0].pointer == "/surface"
    assert MEDIA_TYPE in problem.detail


def test_absent_package_is_named(monkeypatch):
    monkeypatch.setattr(module, "find_spec", lambda name: None)
    problem = refusal(SURFACE)
    assert problem.status == 501
    assert "densityloom[surfaces]" in problem.detail
    assert ran(bodies.GRID, "json")[1]


def test_limits():
    problem = refusal({**SURFACE, "spacing": 0.05}, max_samples=1000)
    assert (problem.kind, problem.places[0].pointer) == ("too-costly", "/spacing")
    problem = refusal({**SURFACE, "spacing": 0.05}, max_memory_bytes=2**24)
    assert (problem.kind, problem.places[0].pointer) == ("too-costly", "/spacing")
    assert "MiB" in problem.detail


def test_without_a_form_it_is_computed_and_not_written():
    works = []
    done, content = ran(SURFACE, None, watch=lambda work: works.append(work))
    assert content == b""
    assert len(works) == 1
    assert any("triangles" in word for word in done.shown.advice)


def test_over_http(client):
    address = "/v1/grid"
    answer = client.post(address, json=CLOSED, headers={"Accept": MEDIA_TYPE})
    assert answer.status_code == 200, answer.text
    assert answer.headers["content-type"] == MEDIA_TYPE
    assert answer.headers["content-disposition"] == 'attachment; filename="grid.glb"'
    assert answer.content == client.post(address, params={"format": "glb"}, json=CLOSED).content
    assert mesh_of(opened(answer.content)).unpaired_edges() == 0
    assert_problem(client.post(address, json=CLOSED), 422, "/surface")
    assert_problem(client.post(address, params={"format": "glb"}, json=bodies.GRID), 422, "/surface")
    assert client.post("/v1/slice", params={"format": "glb"}, json=bodies.SLICE).status_code == 406


def test_by_the_command_line(tmp_path, capsys):
    from service.cli import main

    request, out = tmp_path / "request.json", tmp_path / "surface.glb"
    request.write_text(json.dumps({"product": "grid", **CLOSED}))
    assert main(["run", str(request), "--threads", "1", "--out", str(out)]) == 0
    assert "triangles" in capsys.readouterr().out
    assert out.read_bytes() == ran(CLOSED)[1]
    assert main(["run", str(request), "--threads", "1"]) == 0
    assert main(["run", str(request), "--threads", "1", "--out", str(tmp_path / "surface.npy")]) == 2
    assert "/surface" in capsys.readouterr().err
    assert sorted(path.name for path in tmp_path.iterdir()) == ["request.json", "surface.glb"]
