"""Links that restore a view, downloads, and requests that do the same."""

from __future__ import annotations

import io
import subprocess
import sys

import httpx
import numpy as np
import pytest

from tests.samples import FOLDER

VIEWS = {
    "profile": ("stack", "view=profile&d_min=8&window=lanczos&intervals=8~16~gallery"),
    "plane": ("planar", "view=slice&cells=2&contours=step&step=0.05&palette=sequential"),
    "slice": ("crystal", "view=slice&axes=ca&height=0.335&scale=slice&least_merit=0.7"),
    "cell": ("crystal", "view=cell&level=3.5&most=5&turn=0.1000,0.2000,0.3000,0.9274&zoom=1.4"),
}


@pytest.mark.parametrize("name", VIEWS)
def test_link_restores_the_view(look_at, served, sets, name):
    demo, rest = VIEWS[name]
    fragment = f"set={sets[demo]}&{rest}"
    seen = [look_at(served.address), look_at(served.address)]
    told = []
    for one in seen:
        page = one.open(fragment)
        page.wait_for_timeout(400)
        told.append((page.inner_text("h1"), page.inner_text("#strip"), sorted(one.state().items())))
    assert told[0] == told[1]
    wanted = dict(httpx.QueryParams(fragment))
    assert {key: value for key, value in seen[0].state().items() if key in wanted} == wanted
    page = seen[0].page
    page.reload()
    seen[0].settle()
    page.wait_for_timeout(400)
    assert (page.inner_text("h1"), page.inner_text("#strip"), sorted(seen[0].state().items())) == told[0]


def test_back_goes_to_the_view_before(look, sets):
    page = look.open(f"set={sets['crystal']}&view=summary")
    page.click("text=See a slice")
    page.wait_for_selector(".map-box")
    page.click("#views >> text=Profile")
    page.wait_for_selector(".curve-box")
    page.go_back()
    page.wait_for_selector(".map-box")
    page.go_back()
    page.wait_for_selector(".facts")


def download(page, product: str, form: str) -> bytes:
    with page.expect_download() as waited:
        page.click(f"[data-product={product}][data-format={form}]")
    path = waited.value.path()
    assert waited.value.suggested_filename.endswith(f".{form}")
    return path.read_bytes()


STARTS = {"npy": b"\x93NUMPY", "npz": b"PK", "png": b"\x89PNG", "svg": b"<?xml", "glb": b"glTF", "csv": b""}


@pytest.mark.parametrize(
    ("demo", "view", "product", "forms"),
    [
        ("stack", "profile", "profile", ["npy", "npz", "csv", "png", "svg"]),
        ("stack", "profile", "layers", ["csv"]),
        ("planar", "slice", "slice", ["npy", "npz", "png", "svg"]),
        ("crystal", "cell&level=3", "grid", ["npy", "npz", "png", "svg", "glb"]),
        ("crystal", "cell&level=3", "extrema", ["csv"]),
    ],
)
def test_downloads(look, sets, demo, view, product, forms):
    page = look.open(f"set={sets[demo]}&view={view}")
    page.wait_for_selector(f"[data-product={product}]")
    for form in forms:
        content = download(page, product, form)
        assert content.startswith(STARTS[form]), form
        assert len(content) > 100


def test_request_as_curl_gives_the_same_numbers(look, sets):
    page = look.open(f"set={sets['planar']}&view=slice&d_min=8")
    values = np.load(io.BytesIO(download(page, "slice", "npy")))
    page.click("summary:has-text('for a pipeline')")
    command = page.inner_text("pre >> nth=0")
    assert command.startswith("curl 'http://127.0.0.1:")
    address = command.split("'")[1]
    answer = np.load(io.BytesIO(httpx.get(address).raise_for_status().content))
    assert (answer == values).all()


def test_request_as_python_runs(look, sets, tmp_path):
    page = look.open(f"set={sets['stack']}&view=profile&window=gaussian&window_b=20")
    page.click("summary:has-text('for a pipeline')")
    program = page.inner_text("pre >> nth=1")
    assert "from service.client import Client" in program
    done = subprocess.run(
        [sys.executable, "-c", program], capture_output=True, text=True, cwd=FOLDER.parent, timeout=60, check=False
    )
    assert done.returncode == 0, done.stderr
    assert "(321,) e/Å³" in done.stdout


def test_link_is_copied(look_at, served, sets):
    look = look_at(served.address, permissions=["clipboard-read", "clipboard-write"])
    page = look.open(f"set={sets['stack']}&view=profile&d_min=9")
    page.click("text=Copy the link to this view")
    page.wait_for_selector("text=Copied")
    link = page.evaluate("navigator.clipboard.readText()")
    assert link == f"{served.address}/#set={sets['stack']}&view=profile&d_min=9"


def test_what_cannot_be_computed_is_said_and_nothing_is_lost(look, sets):
    look.expected.append("status of 422")
    page = look.open(f"set={sets['stack']}&view=profile&d_min=10&d_max=5")
    page.wait_for_selector(".view .problem")
    assert page.get_by_label("d from, Å").input_value() == "10"
    page.get_by_label("d from, Å").fill("")
    page.keyboard.press("Enter")
    page.wait_for_selector(".u-over")
    look.until("!document.querySelector('.view > div > .problem')")
    assert "1 of 13 used" in page.inner_text("#strip")
