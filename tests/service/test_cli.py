from __future__ import annotations

import io
import json
import os
import signal
import subprocess
import sys
import time
from importlib.metadata import version

import numpy as np
import pytest
import uvicorn

from engine.errors import TransformError
from service import cli, pipeline
from service.cli import main
from tests.service import bodies
from tests.service.analyses import asked
from tests.service.raw_files import AMPLITUDES, CELL, CIF, GRID, TABLE, WITHOUT_CELL, sent, with_set
from tests.service.series_bodies import SERIES, SLICES

NAMED = {product: {"product": product, **body} for product, body in bodies.GOOD.items()}


@pytest.fixture(autouse=True)
def _own_signals():
    """A run takes over the signal that a batch system sends; the test run shall have it back."""
    handler = signal.getsignal(signal.SIGTERM)
    yield
    signal.signal(signal.SIGTERM, handler)


@pytest.fixture
def run(tmp_path, capsys):
    """Run a request; gives the exit code, standard output and error."""

    def go(request, *options):
        path = tmp_path / "request.json"
        path.write_bytes(request if isinstance(request, bytes) else json.dumps(request).encode())
        code = main(["run", str(path), "--threads", "1", *map(str, options)])
        told = capsys.readouterr()
        return code, told.out, told.err

    return go


def left_behind(folder):
    return sorted(path.name for path in folder.iterdir() if path.name != "request.json")


@pytest.mark.parametrize(
    ("product", "form"),
    [
        (product, form)
        for product in NAMED
        for form in ("json", "npy", "npz", "csv")
        if form != "csv" or product in ("profile", "points")
    ],
)
def test_files_hold_what_the_service_answers(client, run, tmp_path, product, form):
    out = tmp_path / f"out.{form}"
    code, told, errors = run(NAMED[product], "--out", out)
    assert (code, errors) == (0, "")
    assert f"written to {out}" in told
    assert left_behind(tmp_path) == [out.name]
    answer = client.post(f"/v1/{product}", params={"format": form}, json=NAMED[product])
    if form == "npz":
        with np.load(out, allow_pickle=False) as ours:
            theirs = tmp_path / "theirs.npz"
            theirs.write_bytes(answer.content)
            with np.load(theirs, allow_pickle=False) as other:
                assert ours.files == other.files
                for name in ours.files:
                    np.testing.assert_array_equal(ours[name], other[name])
    else:
        assert out.read_bytes() == answer.content


def test_without_a_file_the_field_is_shown(run, tmp_path):
    code, told, errors = run(NAMED["profile"])
    assert (code, errors) == (0, "")
    assert "┤" in told
    assert "17 values" in told
    assert left_behind(tmp_path) == []


@pytest.mark.parametrize(("ending", "packed"), [(".csv", bodies.as_csv), (".npz", bodies.as_npz)])
def test_columns_from_a_table(run, tmp_path, ending, packed):
    table = tmp_path / f"film{ending}"
    table.write_bytes(packed(bodies.table_of(bodies.FILM)))
    out = tmp_path / "out.npy"
    code, _, errors = run({"product": "profile", **bodies.bare(bodies.PROFILE)}, "--columns", table, "--out", out)
    assert (code, errors) == (0, "")
    np.testing.assert_allclose(np.load(out), bodies.film_profile(np.linspace(0, 1, 17)), rtol=0, atol=1e-12)


@pytest.fixture
def inspected(tmp_path, capsys):
    """Inspect a file; gives the exit code, standard output and error."""

    def go(file, request=None, *options, name="file.cif"):
        path = tmp_path / name
        path.write_text(file)
        if request is not None:
            (tmp_path / "request.json").write_text(json.dumps(request))
            options = (*options, "--request", str(tmp_path / "request.json"))
        code = main(["inspect", str(path), *options])
        told = capsys.readouterr()
        return code, told.out, told.err

    return go


@pytest.mark.parametrize(
    ("file", "members"),
    [(CIF, {}), (TABLE, {"cell": CELL, "symmetry": {"space_group": 19}}), (AMPLITUDES, {"cell": CELL})],
)
def test_inspection_as_json_is_what_the_service_answers(client, inspected, file, members):
    code, told, errors = inspected(file, {"set": members}, "--json", name="file")
    assert (code, errors) == (0, "")
    body = sent({"set": members}, file)
    assert (
        json.loads(told) == client.post("/v1/sets/inspect", content=body, headers={"Content-Type": bodies.FORM}).json()
    )


def test_inspection_is_told_in_words(inspected):
    code, told, errors = inspected(CIF)
    assert (code, errors) == (0, "")
    assert "4 reflections, 4 unique in P 21 21 21" in told
    assert not told.startswith("{")


def test_inspection_takes_of_a_density_how_its_file_is_prepared(inspected):
    asked = with_set({"product": "grid", **GRID}, preparation={"amplitudes": "root_exclude"}, unit="e/Å³", mean=1.0)
    code, told, errors = inspected(CIF, asked, "--json")
    assert (code, errors) == (0, "")
    assert "1 reflections without a root are left out." in json.loads(told)["warnings"]


@pytest.mark.parametrize(
    ("file", "request_body", "message"),
    [
        (WITHOUT_CELL, None, "/set/cell: is absent, and the file gives none."),
        (CIF.replace("21'", "21"), None, "/set/reflections/file.cif/line 8: a quotation mark is not closed"),
        (CIF, {"set": {"preparations": {}}}, "/set/preparations: extra inputs are not permitted."),
        (CIF, {"set": [1]}, "/set: is not an object."),
        (CIF, {"set": None}, "/set: is not an object."),
        (CIF, [1], "not an object"),
    ],
)
def test_inspections_that_fail_are_readable(inspected, file, request_body, message):
    code, told, errors = inspected(file, request_body)
    assert (code, told) == (2, "")
    assert errors.startswith("densityloom: ")
    assert message in errors
    assert "Traceback" not in errors


def test_inspection_of_a_file_that_is_not_there(tmp_path, capsys):
    assert main(["inspect", str(tmp_path / "none.cif")]) == 2
    assert "none.cif" in capsys.readouterr().err


def test_progress_of_a_long_reading_is_shown(inspected, monkeypatch):
    table = "h,k,l,amplitude\n" + "".join(f"{h},{k},{l},1\n" for h in range(20) for k in range(20) for l in range(15))
    monkeypatch.setattr(cli, "SILENT_SECONDS", 0.0)
    code, told, errors = inspected(table, {"set": {"cell": CELL}}, name="long.csv")
    assert code == 0
    assert "reading" in errors
    assert "5999 reflections" in told


def test_density_of_a_file(client, run, tmp_path):
    file, out = tmp_path / "crystal.cif", tmp_path / "out.npy"
    file.write_text(CIF)
    asked = {"product": "grid", **with_set(GRID, preparation={"amplitudes": "root_exclude"})}
    code, _, errors = run(asked, "--reflections", file, "--out", out)
    assert (code, errors) == (0, "")
    headers = {"Content-Type": bodies.FORM, "Accept": "application/x-npy"}
    assert out.read_bytes() == client.post("/v1/grid", content=sent(asked, CIF), headers=headers).content


def test_run_of_an_inspection_names_the_right_command(run, tmp_path):
    file = tmp_path / "crystal.cif"
    file.write_text(CIF)
    code, told, errors = run({"product": "inspect", "set": {}}, "--reflections", file)
    assert (code, told) == (2, "")
    assert "use densityloom inspect" in errors


@pytest.mark.parametrize(
    ("request_body", "options", "message"),
    [
        (NAMED["profile"], ["--out", "out.txt"], "--out: a profile is written as json, npy"),
        (NAMED["profile"], ["--out", "out"], "--out: a profile is written as"),
        (NAMED["grid"], ["--out", "out.csv"], "--out: a grid is written as json, npy, npz, png, svg, glb"),
        (NAMED["profile"], ["--out", "no/such/folder/out.npy"], "there is no such file or folder"),
        (NAMED["profile"], ["--columns", "table.txt"], "--columns: table.txt does not end in .csv or .npz"),
        (NAMED["profile"], ["--columns", "table.csv"], "there is no such file or folder"),
        (NAMED["profile"], ["--threads", "0"], "--threads: give at least 1"),
        (bodies.PROFILE, [], "/product: names no product. Give one of profile, slice, grid, points, series, extrema"),
        ({**NAMED["profile"], "product": ["profile"]}, [], "/product: names no product"),
        (b"{", [], "The body is not JSON"),
        ({**NAMED["profile"], "samples": 1}, [], "/samples: input should be greater than or equal to 2"),
        (bodies.changed(NAMED["profile"], "set/sigma", [1, 1, 1, -1]), [], "/set/sigma/3: is negative"),
        ({**NAMED["profile"], "samples": 10**12}, [], "/samples: asks for 1,000,000,000,000 samples"),
    ],
)  # fmt: skip
def test_errors_are_readable_and_write_nothing(run, tmp_path, monkeypatch, request_body, options, message):
    monkeypatch.chdir(tmp_path)
    code, told, errors = run(request_body, *options)
    assert code == 2
    assert told == ""
    assert errors.startswith("densityloom: ")
    assert message in errors
    assert "Traceback" not in errors
    assert left_behind(tmp_path) == []


def test_every_place_at_fault_is_told(run):
    code, _, errors = run({**NAMED["profile"], "samples": 1, "widow": 2, "sharpen": "x"})
    assert code == 2
    assert [word for word in ("/sharpen", "/samples", "/widow") if word not in errors] == []


def test_request_that_is_not_there(tmp_path, capsys):
    assert main(["run", str(tmp_path / "none.json")]) == 2
    assert "none.json" in capsys.readouterr().err


def test_fault_of_a_library_is_told_without_a_trace(run, tmp_path, monkeypatch):
    def fails(*_, **__):
        raise TransformError("the transform failed")

    monkeypatch.setattr(pipeline, "write", fails)
    code, _, errors = run(NAMED["profile"], "--out", tmp_path / "out.npy")
    assert code == 2
    assert errors == "densityloom: the transform failed\n"
    assert left_behind(tmp_path) == []


@pytest.mark.filterwarnings("ignore:.*(overflow|invalid value).*:RuntimeWarning")
def test_failed_run_leaves_an_older_file_alone(run, tmp_path):
    out = tmp_path / "out.npy"
    out.write_bytes(b"older")
    # Found out only once the values are there.
    overflowing = bodies.changed(NAMED["profile"], "set/amplitude", [1e50] * 4)
    code, _, errors = run({**overflowing, "precision": "single"}, "--out", out)
    assert code == 2
    assert "overflow" in errors
    assert out.read_bytes() == b"older"
    assert left_behind(tmp_path) == ["out.npy"]


@pytest.mark.parametrize(("sent", "code"), [(signal.SIGINT, 130), (signal.SIGTERM, 130)])
def test_interrupted_run_leaves_no_file(tmp_path, sent, code):
    request = tmp_path / "request.json"
    request.write_text(json.dumps(bodies.heavy_grid()))
    limits = {f"DENSITYLOOM_{name.upper()}": str(value) for name, value in bodies.HEAVY_LIMITS.items()}
    command = [sys.executable, "-m", "service.cli", "run", str(request), "--threads", "1"]
    process = subprocess.Popen(
        [*command, "--out", str(tmp_path / "out.npy")],
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        env={**os.environ, **limits},
    )
    with process:
        end = time.monotonic() + 30
        # The unfinished file grows to its length as soon as the computation begins.
        while not any(path.stat().st_size > 10_000 for path in tmp_path.glob(".*.partial")):
            assert time.monotonic() < end
            assert process.poll() is None, process.stderr.read()
            time.sleep(0.02)
        process.send_signal(sent)
        told, errors = process.communicate(timeout=20)
    assert process.returncode == code, errors
    assert errors.endswith("densityloom: interrupted, nothing was written\n")
    assert told == ""
    assert left_behind(tmp_path) == []


def test_progress_is_shown_for_long_work_alone(run, monkeypatch):
    _, _, errors = run(NAMED["grid"])
    assert errors == ""
    monkeypatch.setattr(cli, "SILENT_SECONDS", 0.0)
    code, told, errors = run(NAMED["grid"])
    assert code == 0
    assert "%" in errors
    assert "left" in errors
    assert "left" not in told.splitlines()[0]


def test_progress_names_method_and_estimate(capsys, monkeypatch):
    class Plan:
        method = "cascade"

    class Work:
        plans = (Plan(),)
        seconds = 42.3

    monkeypatch.setattr(cli, "SILENT_SECONDS", 0.0)
    report = cli._watch(Work())
    time.sleep(0.11)
    report(1, 4)
    time.sleep(0.11)
    report(4, 4)
    shown = capsys.readouterr().err
    assert "cascade, about 42 s" in shown
    assert " 25% |" in shown


def test_output_that_nobody_reads_to_its_end(tmp_path):
    request = tmp_path / "request.json"
    request.write_text(json.dumps(NAMED["profile"]))
    command = [sys.executable, "-m", "service.cli", "run", str(request)]
    reading, writing = os.pipe()
    os.close(reading)
    done = subprocess.run(command, stdout=writing, stderr=subprocess.PIPE, text=True, check=False)
    os.close(writing)
    assert (done.returncode, done.stderr) == (0, "")


def test_version(capsys):
    with pytest.raises(SystemExit) as ended:
        main(["--version"])
    assert ended.value.code == 0
    assert capsys.readouterr().out == f"densityloom {version('densityloom')}\n"


@pytest.mark.parametrize("arguments", [[], ["rum"], ["run"], ["run", "x", "--colour"], ["serve", "--port", "x"]])
def test_unknown_arguments(arguments, capsys):
    with pytest.raises(SystemExit) as ended:
        main(arguments)
    assert ended.value.code == 2
    assert "usage: densityloom" in capsys.readouterr().err


@pytest.mark.parametrize("action", [["serve"], ["run", "request.json"]])
def test_unknown_setting_is_refused_at_start(monkeypatch, capsys, action):
    monkeypatch.setattr(uvicorn, "run", lambda *_, **__: pytest.fail("the service was started"))
    monkeypatch.setenv("DENSITYLOOM_MAX_BODY", "1")
    assert main(action) == 2
    assert "unknown setting DENSITYLOOM_MAX_BODY" in capsys.readouterr().err


@pytest.fixture
def inspect(tmp_path, capsys):
    """Inspect the sample crystal's file; gives the exit code, standard output and error."""

    def go(request, *options):
        file = tmp_path / "crystal.cif"
        file.write_bytes(bodies.CRYSTAL_FILE)
        arguments = ["inspect", str(file), *options]
        if request is not None:
            path = tmp_path / "request.json"
            path.write_text(json.dumps(request))
            arguments += ["--request", str(path)]
        code = main(arguments)
        told = capsys.readouterr()
        return code, told.out, told.err

    return go


def test_inspection_is_that_of_the_service(client, inspect):
    asked = {"set": {"preparation": bodies.SCALED}}
    code, told, errors = inspect(asked, "--json")
    assert (code, errors) == (0, "")
    sent = bodies.reflections_form(asked, bodies.CRYSTAL_FILE)
    answer = client.post("/v1/sets/inspect", content=sent, headers={"Content-Type": bodies.FORM}).json()
    assert json.loads(told) == answer


def test_inspection_is_shown(inspect):
    code, told, errors = inspect(None)
    assert (code, errors) == (0, "")
    assert "unique in P 21 21 21" in told


def test_inspection_takes_a_request_for_a_density(inspect):
    """Of it, only what concerns the file."""
    code, told, _ = inspect({"product": "grid", "set": {"values": "structure_factor", "preparation": bodies.SCALED}})
    assert code == 0
    assert "Wilson's plot: B" in told


@pytest.mark.parametrize(
    ("request_body", "message"),
    [
        ({"set": [1]}, "/set: is not an object"),
        ({"set": 3}, "/set: is not an object"),
        ({"set": {"symmetry": {"space_group": 0}}}, "/set/symmetry/space_group"),
    ],
)
def test_inspections_that_fail(inspect, request_body, message):
    code, told, errors = inspect(request_body)
    assert (code, told) == (2, "")
    assert message in errors


def test_density_from_a_file(run, tmp_path):
    table = tmp_path / "rows.csv"
    table.write_bytes(bodies.AMPLITUDES_FILE)
    given = {name: bodies.AMPLITUDES_SET[name] for name in ("cell", "values")}
    request = {"product": "points", "set": given, "positions": [[0.1, 0.2, 0.3]]}
    code, _, errors = run(request, "--reflections", table, "--out", tmp_path / "out.npy")
    assert (code, errors) == (0, "")
    run({**request, "set": bodies.AMPLITUDES_SET}, "--out", tmp_path / "direct.npy")
    np.testing.assert_allclose(np.load(tmp_path / "out.npy"), np.load(tmp_path / "direct.npy"), rtol=1e-12)


@pytest.mark.parametrize("form", ["json", "csv"])
@pytest.mark.parametrize("product", asked.GOOD)
def test_reports_in_files_are_those_of_the_service(client, run, tmp_path, product, form):
    body = {"product": product, **asked.GOOD[product]}
    out = tmp_path / f"out.{form}"
    code, told, errors = run(body, "--out", out)
    assert (code, errors) == (0, "")
    assert f"written to {out}" in told
    assert left_behind(tmp_path) == [out.name]
    assert out.read_bytes() == client.post(f"/v1/{product}", params={"format": form}, json=body).content


def test_reports_are_shown(run, tmp_path):
    code, told, errors = run({"product": "integrals", **asked.GOOD["integrals"]})
    assert (code, errors) == (0, "")
    assert " ± " in told
    assert "lower half" in told
    assert left_behind(tmp_path) == []


@pytest.mark.parametrize("form", ["json", "csv", "npz", "npy"])
def test_series_in_files_are_those_of_the_service(client, run, tmp_path, form):
    body = {"product": "series", **SERIES}
    out = tmp_path / f"out.{form}"
    code, told, errors = run(body, "--out", out)
    assert (code, errors) == (0, "")
    assert "temperature; 3 × 17 values" in told
    answer = client.post("/v1/series", params={"format": form}, json=body)
    if form == "npz":
        with (
            np.load(out, allow_pickle=False) as ours,
            np.load(io.BytesIO(answer.content), allow_pickle=False) as theirs,
        ):
            assert ours.files == theirs.files
            for name in ours.files:
                np.testing.assert_array_equal(ours[name], theirs[name])
    else:
        assert out.read_bytes() == answer.content
    assert left_behind(tmp_path) == [out.name]


@pytest.mark.parametrize(
    ("body", "out", "message"),
    [
        ({"product": "extrema", **asked.GOOD["extrema"], "kinds": ["peak"]}, None, "/kinds/0: input should be"),
        (
            {"product": "extrema", **asked.GOOD["extrema"], "distances": [[1, 99]]},
            "json",
            "/distances/0: names number 99",
        ),
        ({"product": "layers", **asked.GOOD["layers"]}, "npz", "--out: a layers is written as json, csv"),
        ({"product": "windows", **asked.GOOD["windows"]}, "png", "--out: a windows is written as json, csv"),
        ({"product": "series", **SERIES, "uncertainty": True}, "npy", "one array"),
        ({"product": "series", **SLICES}, "csv", "Only profiles"),
        ({"product": "series", **SERIES, "reference": 9}, "npz", "/reference: is 9 of 3 members"),
        ({"product": "series", **SERIES}, "png", "--out: a series is written as"),
    ],
)
def test_analyses_and_series_that_fail(run, tmp_path, body, out, message):
    options = ("--out", tmp_path / f"out.{out}") if out else ()
    code, told, errors = run(body, *options)
    assert (code, told) == (2, "")
    assert errors.startswith("densityloom: ")
    assert message in errors
    assert left_behind(tmp_path) == []


@pytest.mark.parametrize(("ending", "packed"), [(".csv", bodies.as_csv), (".npz", bodies.as_npz)])
def test_second_columns_from_a_table(run, tmp_path, ending, packed):
    table = tmp_path / f"later{ending}"
    table.write_bytes(packed(bodies.table_of(asked.LATER)))
    combination = {
        "kind": "difference",
        "scale": {"kind": "as_given"},
        "with": bodies.bare({"set": asked.LATER})["set"],
    }
    body = {"product": "profile", **bodies.PROFILE, "set": asked.FILM, "combination": combination}
    code, told, errors = run(body, "--with-columns", table, "--out", tmp_path / "out.npy")
    assert (code, errors) == (0, "")
    assert "1 × first − 1 × second" in told
    inline = {**body, "combination": {**combination, "with": asked.LATER}}
    run(inline, "--out", tmp_path / "inline.npy")
    np.testing.assert_array_equal(np.load(tmp_path / "out.npy"), np.load(tmp_path / "inline.npy"))
    compared = {"product": "compare", "set": asked.FILM, "with": combination["with"]}
    code, told, errors = run(compared, "--with-columns", table)
    assert (code, errors) == (0, "")
    assert "correlation" in told


def test_second_set_of_a_file_of_reflections(run, tmp_path):
    file = tmp_path / "rows.csv"
    file.write_bytes(bodies.AMPLITUDES_FILE)
    given = {name: bodies.AMPLITUDES_SET[name] for name in ("cell", "values")}
    code, told, errors = run(
        {"product": "compare", "set": bodies.AMPLITUDES_SET, "with": given}, "--with-reflections", file
    )
    assert (code, errors) == (0, "")
    assert "3" in told.split("matched", 1)[1].split()[0]


@pytest.mark.parametrize(
    ("body", "name", "message"),
    [
        ({"product": "profile", **bodies.PROFILE}, "later.csv", "/with: is absent"),
        ({"product": "compare", "set": asked.FILM, "with": asked.LATER}, "later.csv", "/with/amplitude: is given"),
        ({"product": "compare", "set": asked.FILM, "with": asked.LATER}, "later.txt", "--with-columns: later.txt"),
        ({"product": "compare", "set": asked.FILM, "with": asked.LATER}, "absent.csv", "absent.csv"),
    ],
)
def test_second_columns_that_fail(run, tmp_path, body, name, message):
    if not name.startswith("absent"):
        (tmp_path / name).write_bytes(bodies.as_csv(bodies.table_of(asked.LATER)))
    code, told, errors = run(body, "--with-columns", tmp_path / name)
    assert (code, told) == (2, "")
    assert message in errors


def test_progress_of_analyses_and_series_is_shown_for_long_work_alone(run, monkeypatch):
    for body in ({"product": "extrema", **asked.GOOD["extrema"]}, {"product": "series", **SERIES}):
        assert run(body)[2] == ""
    monkeypatch.setattr(cli, "SILENT_SECONDS", 0.0)
    assert "extrema" in run({"product": "extrema", **asked.GOOD["extrema"]})[2]
    assert "series" in run({"product": "series", **SERIES})[2]
