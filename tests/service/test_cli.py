from __future__ import annotations

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


@pytest.mark.parametrize(
    ("request_body", "options", "message"),
    [
        (NAMED["profile"], ["--out", "out.png"], "--out: a profile is written as json, npy, npz, csv, not .png"),
        (NAMED["profile"], ["--out", "out"], "--out: a profile is written as"),
        (NAMED["grid"], ["--out", "out.csv"], "--out: a grid is written as json, npy, npz, not .csv"),
        (NAMED["profile"], ["--out", "no/such/folder/out.npy"], "No such file or directory"),
        (NAMED["profile"], ["--columns", "table.txt"], "--columns: table.txt does not end in .csv or .npz"),
        (NAMED["profile"], ["--columns", "table.csv"], "No such file or directory"),
        (NAMED["profile"], ["--threads", "0"], "--threads: give at least 1"),
        (bodies.PROFILE, [], "/product: names no product. Give one of profile, slice, grid, points, inspect."),
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
    assert "%" not in told


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


@pytest.mark.parametrize(
    ("host", "warned"),
    [("127.0.0.1", False), ("::1", False), ("localhost", False), ("0.0.0.0", True), ("192.0.2.7", True)],
)
def test_listening_beyond_this_machine_is_warned_of(monkeypatch, capsys, host, warned):
    started = []
    monkeypatch.setattr(uvicorn, "run", lambda *_, **options: started.append(options))
    assert main(["serve", "--host", host, "--port", "8421", "--workers", "3"]) == 0
    assert ("anyone who can reach it" in capsys.readouterr().err) is warned
    (options,) = started
    assert (options["host"], options["port"], options["workers"]) == (host, 8421, 3)


def test_serve_on_a_taken_port_ends_with_a_message(service):
    port = service.address.rpartition(":")[2]
    command = [sys.executable, "-m", "service.cli", "serve", "--port", port]
    done = subprocess.run(command, capture_output=True, text=True, timeout=60, check=False)
    assert done.returncode != 0
    assert "address already in use" in done.stderr
