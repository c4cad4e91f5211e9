"""The sample requests: made as the generator says, answered as their README says."""

from __future__ import annotations

import json
import re
import shlex
import shutil
import subprocess

import httpx
import numpy as np
import pytest

from service.routes.compute import ADDRESSES
from service.schemas.products import PRODUCTS
from service.schemas.requests import KEEP
from tests.samples import FOLDER, build, texts
from tests.serving import serving

README = (FOLDER / "README.md").read_text()
CURL_LINES = [line for line in README.splitlines() if line.startswith("curl ")]
EXPECTED = {
    match["name"]: match
    for match in re.finditer(
        r"^\| `(?P<name>\w+\.json)` \| (?P<shape>[\d ×]+) \| (?P<low>[-\d.]+) \| (?P<high>[-\d.]+) \|", README, re.M
    )
}
FILES = sorted(path.name for path in FOLDER.glob("*.json"))


@pytest.fixture(scope="module")
def served():
    with serving() as running:
        yield running


PARTS = {
    "film_from_table.json": ("columns", "film_orders.csv", "text/csv"),
    "coating_film.json": ("columns", "coating_scan.csv", "text/csv"),
    "film_from_scan.json": ("reflections", "film_scan.csv", "text/csv"),
    "crystal_from_cif.json": ("reflections", "crystal_OR4.cif", "chemical/x-cif"),
    "inspect_crystal.json": ("reflections", "crystal_OR4.cif", "chemical/x-cif"),
}
"""Files that go with a request: the part's name, the file, its media type."""
REQUESTS = {name: json.loads((FOLDER / name).read_text()) for name in FILES}
SURFACES = [name for name in FILES if "surface" in REQUESTS[name]]
DENSITIES = [name for name in FILES if REQUESTS[name]["product"] in PRODUCTS and name not in SURFACES]
REPORTED = [name for name in FILES if name not in (*DENSITIES, *SURFACES) and not name.startswith("inspect")]
FIGURES = {
    match["name"]: (match["pointer"], float(match["value"]))
    for match in re.finditer(
        r"^\| `(?P<name>\w+\.json)` \| `(?P<pointer>/[\w/]+)` \| (?P<value>[-\d.]+) \|", README, re.M
    )
}
"""Of each report one figure: its place in the JSON answer, and its value."""


def answered(served, name):
    """A sample's JSON answer."""
    request = (FOLDER / name).read_bytes()
    product = json.loads(request)["product"]
    address = "sets" if product == KEEP else ADDRESSES[product].removeprefix("/")
    body = {"content": request, "headers": {"Content-Type": "application/json"}}
    if name in PARTS:
        part, file, media_type = PARTS[name]
        files = {"request": ("r", request, "application/json"), part: (file, (FOLDER / file).read_bytes(), media_type)}
        body = {"files": files}
    answer = httpx.post(f"{served.address}/v1/{address}", **body)
    assert answer.status_code in (200, 201), answer.text
    return answer.json()


def test_every_file_is_documented():
    assert sorted(EXPECTED) == DENSITIES
    assert sorted(FIGURES) == REPORTED
    for name in FILES:
        assert any(f"@sample_requests/{name}" in line for line in CURL_LINES), name


@pytest.mark.parametrize("name", FILES)
def test_files_are_what_the_generator_makes(name):
    made, kept = build()[name], json.loads((FOLDER / name).read_text())
    assert made.keys() == kept.keys()
    for key, value in made.get("set", {}).items():
        if isinstance(value, list) and key not in ("cell",):
            # Rounded to the last digit kept: the libraries of two machines may differ there.
            np.testing.assert_allclose(kept["set"][key], value, atol=2e-2, rtol=1e-6)
        else:
            assert kept["set"][key] == value


@pytest.mark.parametrize("name", sorted(texts()))
def test_texts_are_what_the_generator_makes(name):
    made, kept = texts()[name].splitlines(), (FOLDER / name).read_text().splitlines()
    assert len(made) == len(kept)
    for one, other in zip(made, kept, strict=True):
        if one != other:
            # Rounded to the last digit kept: the libraries of two machines may differ there.
            numbers = [[float(word) for word in re.split(r"[ ,]", line)] for line in (one, other)]
            np.testing.assert_allclose(*numbers, atol=0.11)


@pytest.mark.parametrize("name", DENSITIES)
def test_answers_are_those_of_the_readme(served, name):
    answer, expected = answered(served, name), EXPECTED[name]
    assert answer["shape"] == [int(count) for count in expected["shape"].split("×")]
    # Four digits are printed; the tolerance is half a unit of the last.
    assert answer["summary"]["minimum"] == pytest.approx(float(expected["low"]), rel=6e-4)
    assert answer["summary"]["maximum"] == pytest.approx(float(expected["high"]), rel=6e-4)
    assert np.shape(answer["values"]) == tuple(answer["shape"])


@pytest.mark.parametrize("name", REPORTED)
def test_reports_are_those_of_the_readme(served, name):
    pointer, value = FIGURES[name]
    found = answered(served, name)
    for part in pointer[1:].split("/"):
        found = found[int(part)] if isinstance(found, list) else found[part]
    assert found == pytest.approx(value, rel=6e-4)


@pytest.mark.skipif(shutil.which("curl") is None, reason="curl is not installed")
@pytest.mark.parametrize(
    "line", CURL_LINES, ids=lambda line: re.findall(r"@sample_requests/(\w+)|v1/(\w+)", line)[0][0]
)
def test_curl_lines_work(served, line, tmp_path):
    words = shlex.split(line.replace("http://127.0.0.1:8420", served.address))
    words = [
        str(tmp_path / word) if before == "--output" else word
        for before, word in zip(["", *words[:-1]], words, strict=True)
    ]
    done = subprocess.run([*words, "--silent", "--fail"], cwd=FOLDER.parent, capture_output=True, check=True)
    written = list(tmp_path.iterdir())
    if written:
        kind, content = written[0].suffix, written[0].read_bytes()
        if kind in (".png", ".svg"):
            assert content.startswith(b"\x89PNG" if kind == ".png" else b"<?xml")
            return
        if kind == ".glb":
            assert content.startswith(b"glTF")
            return
        loaded = np.load(written[0])
        values = loaded if kind == ".npy" else loaded["values"]
        assert np.isfinite(values).all()
    else:
        assert done.stdout.startswith((b"{", b"# "))


def test_inspection_tells_what_the_file_is_worth(served):
    """The figures of OR-4 are those it was made with."""
    summary = answered(served, "inspect_crystal.json")
    assert summary["file"]["rows_read"] == 1757
    assert summary["group"] == "P 21 21 21"
    assert summary["completeness"] == 1
    assert summary["absences"] == 12
    assert abs(summary["absence_signal"]) < 3 / 12**0.5
    # B was 2.4 Å² and the scale 0.0137.
    assert abs(summary["wilson_b"] - 2.4) < 3 * summary["wilson_b_sigma"] < 1.5
    assert abs(summary["wilson_scale"] - 0.0137) < 3 * summary["wilson_scale_sigma"] < 0.01


def test_silicon_shows_the_bond(served):
    """Check 11, over HTTP, from measured factors to the density halfway between two neighbours.

    Source: factors of Aldred & Hart, Proc. R. Soc. A 332 (1973) 223, and later Pendellösung work,
    memory; the published maps show about 0.2 e/Å³.
    """
    request = json.loads((FOLDER / "silicon_bond.json").read_text())
    asked = {"set": request["set"], "positions": [[0.125, 0.125, 0.125], [0.5, 0.5, 0.5]]}
    answer = httpx.post(f"{served.address}/v1/points", json=asked).json()
    assert answer["values"][0] == pytest.approx(0.22, abs=0.005)
    assert answer["unit"] == "e/Å³"


def test_stacking_shows_the_layers(served):
    """The laterally averaged profile has a maximum at the height of every layer of the structure."""
    answer = answered(served, "hexagonal_stacking.json")
    values = np.array(answer["values"])
    axis = answer["axes"][0]
    heights = axis["start"] + axis["step"] * np.arange(axis["count"])
    inner = (values[1:-1] > values[:-2]) & (values[1:-1] > values[2:]) & (values[1:-1] > 2)
    assert heights[1:-1][inner] / 17.4 == pytest.approx([0.159, 0.25, 0.341, 0.659, 0.75, 0.841], abs=0.003)


def test_silicon_bond_is_many_sigma(served):
    """Check 11 with its uncertainty: the bond stands out of the errors of the measured factors by far.

    Source of factors and σ's: Aldred & Hart, Proc. R. Soc. A 332 (1973) 223, and later Pendellösung work, memory.
    """
    request = REQUESTS["silicon_uncertainty.json"]
    asked = {"set": request["set"], "positions": [[0.125, 0.125, 0.125], [0.3, 0.1, 0.45]], "uncertainty": True}
    answer = httpx.post(f"{served.address}/v1/points", json=asked).json()
    value, sigma = answer["values"][0], answer["uncertainty"][0]
    assert value == pytest.approx(0.22, abs=0.005)
    assert 0.0005 < sigma < 0.01
    assert value / sigma > 40
    # On the threefold axis with its mirrors and inversion the related errors add up.
    assert sigma > 1.5 * answer["uncertainty"][1]


def test_the_surface_is_the_one_that_is_told_of(served):
    """Area and volume of the README, from the file's own words; they are compared with known bodies elsewhere."""
    (name,) = SURFACES
    request = (FOLDER / name).read_bytes()
    headers = {"Content-Type": "application/json", "Accept": "model/gltf-binary"}
    content = httpx.post(f"{served.address}/v1/grid", content=request, headers=headers).content
    length = int.from_bytes(content[12:16], "little")
    told = json.loads(content[20 : 20 + length])["asset"]["extras"]
    (line,) = (line for line in README.splitlines() if line.startswith(f"| `{name}`"))
    area, volume = (float(word) for word in re.findall(r"([\d.]+) Å[²³]", line))
    assert told["area"] == pytest.approx(area, rel=2e-3)
    assert told["volume"] == pytest.approx(volume, rel=2e-3)
