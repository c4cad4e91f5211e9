"""Films from one end to the other: over HTTP and by the command, a run whose swelling gives its signs."""

from __future__ import annotations

import csv
import io
import json

import numpy as np
import pytest

from service import cli
from tests import samples_films
from tests.samples import FOLDER

RUN = samples_films.requests("")["coating_run.json"]


@pytest.fixture
def command(capsys):
    def run(*arguments):
        code = cli.main(list(map(str, arguments)))
        told = capsys.readouterr()
        return code, told.out, told.err

    return run


def test_swelling_of_a_run_gives_the_signs_it_was_made_with(client):
    told = client.post("/v1/films/run", json=RUN).json()
    assert told["swelling"]["settled"]
    for member, period in zip(told["members"], samples_films.RUN.values(), strict=True):
        assert member["spacing"]["period"] == pytest.approx(period, abs=0.02)
        for row in member["orders"]:
            truth = samples_films.transform(np.array([2 * np.pi * row["order"] / period]))[0]
            assert row["phase_deg"] == (0 if truth > 0 else 180)
    # The facts put every film on one scale: the sheet holds the same at every humidity.
    excess = 2 * 0.55 * 3.2 + 2.6 + 1.8
    for row in told["table"]:
        assert row["sheet"] == pytest.approx(samples_films.WATER * 9 + excess, abs=3 * row["sheet_sigma"] + 0.1)


def test_swelling_needs_a_run(client):
    film = {**samples_films.requests("")["coating_film.json"], "scan": RUN["members"][0]["scan"]}
    film["scan"] = {**film["scan"], "wavelength": samples_films.WAVELENGTH}
    answer = client.post("/v1/films/analysis", json={**film, "phases": RUN["phases"]})
    assert answer.status_code == 422
    assert answer.json()["errors"][0]["pointer"] == "/phases/swelling"


@pytest.mark.parametrize("ending", ["json", "csv", "png", "svg"])
def test_command_writes_a_film(command, tmp_path, ending):
    out = tmp_path / f"film.{ending}"
    code, told, errors = command(
        "run", FOLDER / "coating_film.json", "--columns", FOLDER / "coating_scan.csv", "--out", out
    )
    assert (code, errors) == (0, "")
    assert "period 18.8" in told
    assert "in doubt" in told.lower()
    content = out.read_bytes()
    if ending == "json":
        assert json.loads(content)["product"] == "film"
    elif ending == "csv":
        lines = [line for line in content.decode().splitlines() if not line.startswith("#")]
        assert next(csv.reader(io.StringIO(lines[0])))[0] == "layer"
    else:
        assert content.startswith(b"\x89PNG" if ending == "png" else b"<?xml")


def test_command_writes_a_run_and_its_waterfall(command, tmp_path):
    for ending in ("csv", "png"):
        code, told, _ = command("run", FOLDER / "coating_run.json", "--out", tmp_path / f"run.{ending}")
        assert code == 0
        assert "Signs decided." in told
    rows = [line for line in (tmp_path / "run.csv").read_text().splitlines() if not line.startswith("#")]
    assert len(rows) == 1 + len(samples_films.RUN)
    assert (tmp_path / "run.png").read_bytes().startswith(b"\x89PNG")


def test_unit_without_facts_is_not_claimed(client):
    film = {name: value for name, value in RUN.items() if name not in ("facts",)}
    told = client.post("/v1/films/run", json=film).json()
    for member in told["members"]:
        assert member["unit"] == "arbitrary"
        assert any("scale is arbitrary" in note for note in member["notes"])
