"""What holds in every view: sizes, themes, keys, keys of the service, and what a screen reader gets."""

from __future__ import annotations

import os
import subprocess
import sys

import httpx
import numpy as np
import pytest

from service.pictures.palettes import palette
from tests import demos
from tests.browser.conftest import AXE, SIZES, missing
from tests.service.conftest import alone

VIEWS = {
    "sets": ("stack", ""),
    "summary": ("crystal", "view=summary"),
    "profile": ("stack", "view=profile&intervals=8~16~gallery"),
    "plane": ("planar", "view=slice&cells=2"),
    "slice": ("crystal", "view=slice&height=0.18"),
    "cell": ("crystal", "view=cell&level=3"),
}


def fragment_of(sets, name: str) -> str:
    demo, rest = VIEWS[name]
    return f"set={sets[demo]}&{rest}" if rest else ""


@pytest.mark.parametrize("size", SIZES)
@pytest.mark.parametrize("name", VIEWS)
def test_nothing_hangs_over_the_side(look_at, served, sets, size, name, tmp_path):
    look = look_at(served.address, size)
    page = look.open(fragment_of(sets, name))
    page.screenshot(path=tmp_path / f"{name}_{size}.png", full_page=True)
    wide, room = page.evaluate("[document.documentElement.scrollWidth, document.documentElement.clientWidth]")
    assert wide <= room


@pytest.mark.parametrize("theme", ["light", "dark"])
@pytest.mark.parametrize("name", VIEWS)
def test_accessible(look_at, served, sets, name, theme):
    if not AXE.is_file():
        missing("TEST_AXE does not name axe.min.js (npm install axe-core)")
    look = look_at(served.address, theme=theme, bypass_csp=True)
    page = look.open(fragment_of(sets, name))
    for details in page.locator("details").all():
        details.evaluate("(node) => { node.open = true; }")
    page.add_script_tag(path=AXE)
    found = page.evaluate("axe.run(document, { resultTypes: ['violations'] })")["violations"]
    grave = [
        f"{one['id']} ({one['impact']}): {one['nodes'][0]['target']} {one['nodes'][0]['failureSummary']}"
        for one in found
        if one["impact"] in ("serious", "critical")
    ]
    assert not grave, "\n".join(grave)


def test_statement_and_origin_are_on_every_view(look_at, served, sets):
    for name in VIEWS:
        look = look_at(served.address, "phone")
        page = look.open(fragment_of(sets, name))
        assert "A density is only as good as its phases" in page.inner_text("body")
        if name == "sets":
            continue
        page.evaluate("scrollTo(0, document.body.scrollHeight)")
        strip = page.locator("#strip")
        assert strip.bounding_box()["y"] >= 0, name
        told = strip.inner_text()
        for word in ("invented", "coefficients", "resolution", "window", "field", "unit", "only as good as its phases"):
            assert word in told, (name, word)


def test_treatment_is_told_in_the_strip(look, sets):
    page = look.open(f"set={sets['crystal']}&view=profile")
    page.get_by_label("Termination window").select_option("lanczos")
    page.get_by_label("d from, Å").fill("1.5")
    page.keyboard.press("Enter")
    page.get_by_label("Least figure of merit").fill("0.9")
    page.keyboard.press("Enter")
    page.wait_for_selector("#strip:has-text('without a trusted phase')")
    told = page.inner_text("#strip")
    assert "Lanczos" in told
    assert "of 1 354 used" in told
    assert "beyond the resolution" in told
    page.get_by_label("Field").select_option("autocorrelation")
    page.wait_for_selector("#strip:has-text('autocorrelation')")


def test_colours_follow_the_system_and_the_switch(look_at, served, sets):
    look = look_at(served.address, theme="dark")
    page = look.open(f"set={sets['stack']}&view=profile")
    assert page.evaluate("document.documentElement.dataset.theme") == "dark"
    page.select_option("#colours", "light")
    assert page.evaluate("document.documentElement.dataset.theme") == "light"
    assert page.evaluate("getComputedStyle(document.body).colorScheme") == "light"
    page.reload()
    look.settle()
    assert page.evaluate("document.documentElement.dataset.theme") == "light"
    page.emulate_media(color_scheme="light")
    page.select_option("#colours", "system")
    assert page.evaluate("document.documentElement.dataset.theme") == "light"


def test_all_is_reached_by_keys_and_shows_the_focus(look, sets):
    page = look.open(f"set={sets['stack']}&view=profile")
    reached = set()
    for _ in range(60):
        page.keyboard.press("Tab")
        told = page.evaluate(
            """() => {
                const node = document.activeElement;
                if (node === document.body) return null;
                const style = getComputedStyle(node);
                const shown = style.outlineStyle !== "none" && parseFloat(style.outlineWidth) >= 2;
                return [node.className || node.tagName, shown];
            }"""
        )
        if told is None:
            break
        reached.add(told[0])
        assert told[1], f"{told[0]} does not show that it has the focus"
    assert {"curve-box", "A", "SELECT", "SUMMARY", "BUTTON"} <= reached


def test_screen_readers_are_told_of_a_new_view(look, sets):
    page = look.open(f"set={sets['stack']}&view=summary")
    page.click("text=See its profile")
    look.until("document.getElementById('told').textContent.includes('Profile')")
    assert page.evaluate("document.activeElement.tagName") == "H1"


def test_palettes_are_those_of_the_pictures(look):
    page = look.open()
    script = """async ([kind, theme]) => {
        const { colourAt } = await import("/page/js/palettes.js");
        return Array.from({ length: 256 }, (_, i) => colourAt(kind, theme, i / 255));
    }"""
    for kind in ("sequential", "diverging"):
        for theme in ("light", "dark"):
            found = np.array(page.evaluate(script, [kind, theme]))
            assert np.abs(found - palette(kind, theme, np.linspace(0, 1, 256))).max() < 1e-9


def test_key_is_asked_for_kept_for_the_tab_and_sent_in_the_header(look_at, tmp_path):
    environment = {**os.environ, "DENSITYLOOM_DATA_DIR": str(tmp_path)}
    command = [sys.executable, "-m", "service.cli", "keys", "create", "--name", "page"]
    for scope in ("read", "compute", "write"):
        command += ["--scope", scope]
    key = subprocess.run(
        command, env=environment, capture_output=True, text=True, check=True, timeout=60
    ).stdout.strip()
    with alone(data_dir=tmp_path, require_keys="true", compute_workers=1) as served:
        look = look_at(served.address)
        look.expected.append("status of 401")
        headers = {"Authorization": f"Bearer {key}"}
        kept = httpx.post(f"{served.address}/v1/sets", json=demos.build()["stack.json"], headers=headers).json()
        look.page.goto(f"{served.address}/#set={kept['id']}&view=profile")
        dialog = look.page.locator("dialog")
        dialog.wait_for()
        look.page.get_by_label("Key", exact=True).fill("dl_wrong")
        look.page.click("text=Go on with this key")
        look.page.wait_for_selector("dialog:has-text('no key in force')")
        look.page.get_by_label("Key", exact=True).fill(key)
        look.page.click("text=Go on with this key")
        look.page.wait_for_selector(".u-over")
        look.settle()
        assert key not in look.page.url
        assert look.page.evaluate("Object.values(localStorage).join()") == ""
        assert look.page.evaluate("sessionStorage.length") == 1
        with look.page.expect_download() as waited:
            look.page.click("[data-product=profile][data-format=csv]")
        assert waited.value.path().stat().st_size > 1000
        look.page.click("summary:has-text('for a pipeline')")
        assert "Authorization: Bearer $KEY" in look.page.inner_text("pre >> nth=0")
        assert key not in look.page.inner_text("body")
        # Another tab has to be told anew.
        other = look_at(served.address)
        other.expected.append("status of 401")
        other.page.goto(f"{served.address}/")
        other.page.locator("dialog").wait_for()
        other.page.click("text=Not now")
        other.page.wait_for_selector(".problem")
