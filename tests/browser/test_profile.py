"""The profile: read-out, layers, integrals, directions."""

from __future__ import annotations

import httpx
import pytest


def drag(page, start: float, end: float) -> None:
    """Drag along the curve between two shares of its width."""
    box = page.locator(".u-over").bounding_box()
    y = box["y"] + box["height"] / 2
    page.mouse.move(box["x"] + start * box["width"], y)
    page.mouse.down()
    page.mouse.move(box["x"] + 0.5 * (start + end) * box["width"], y)
    page.mouse.move(box["x"] + end * box["width"], y)
    page.mouse.up()


def test_read_out_agrees_with_the_service(look, served, sets):
    page = look.open(f"set={sets['stack']}&view=profile")
    page.focus(".curve-box")
    page.keyboard.press("Home")
    told = page.inner_text(".readout")
    query = {"normal_to": "1", "samples": 3, "uncertainty": "true"}
    answer = httpx.get(f"{served.address}/v1/sets/{sets['stack']}/profile", params=query).json()
    value, sigma = answer["values"][0], answer["uncertainty"][0]
    assert "at 0 Å" in told
    assert f"{value:.3f} ± {sigma:.3f} e/Å³" in told
    page.keyboard.press("ArrowRight")
    assert page.inner_text(".readout") != told
    box = page.locator(".u-over").bounding_box()
    page.mouse.move(box["x"] + box["width"] / 2, box["y"] + 20)
    assert "at 30.6 Å" in page.inner_text(".readout")


def test_layers_and_curve_mark_each_other(look, sets):
    page = look.open(f"set={sets['stack']}&view=profile")
    rows = page.locator("tr[data-place]")
    assert rows.count() == 5
    rows.nth(1).hover()
    assert "marked" in rows.nth(1).get_attribute("class")
    page.locator("tr[data-place] button").nth(2).focus()
    assert "marked" in rows.nth(2).get_attribute("class")
    box = page.locator(".u-over").bounding_box()
    # The third layer is at 22 Å of 61.2.
    page.mouse.move(box["x"] + box["width"] * 38.8 / 61.2, box["y"] + 20)
    assert "marked" in rows.nth(3).get_attribute("class")
    assert "(" in rows.nth(1).locator("td").first.inner_text()


def test_dragged_interval_is_integrated_labelled_and_removed(look, served, sets):
    page = look.open(f"set={sets['stack']}&view=profile")
    drag(page, 0.1, 0.25)
    page.wait_for_selector(".intervals strong:has-text('e/Å²')")
    start, end, _ = look_interval(look)
    assert (start, end) == pytest.approx((6.12, 15.3), abs=0.3)
    body = {"set_id": sets["stack"], "regions": [{"kind": "slab", "normal": [1], "from": start, "to": end}]}
    found = httpx.post(f"{served.address}/v1/integrals", json=body).json()["integrals"][0]
    shown = page.inner_text(".intervals strong")
    assert float(shown.split(" ± ")[0]) == pytest.approx(found["integral"], rel=0.01)
    page.fill(".intervals input.label", "gallery")
    page.keyboard.press("Enter")
    page.locator(".intervals input.label").blur()
    look.until("location.hash.includes('gallery')")
    page.reload()
    page.wait_for_selector(".intervals strong:has-text('e/Å²')")
    assert page.input_value(".intervals input.label") == "gallery"
    page.click(".intervals >> text=Remove")
    look.until("!location.hash.includes('intervals')")
    assert page.locator(".intervals li").count() == 0


def look_interval(look) -> tuple[float, float, str]:
    look.until("location.hash.includes('intervals')")
    start, end, label = look.state()["intervals"].split("~")
    return float(start), float(end), label


def test_intervals_by_keys_and_by_numbers(look, sets):
    page = look.open(f"set={sets['stack']}&view=profile")
    page.focus(".curve-box")
    page.keyboard.press("Home")
    page.keyboard.press("i")
    assert "interval from" in page.inner_text(".readout")
    page.keyboard.press("PageUp")
    page.keyboard.press("i")
    page.wait_for_selector(".intervals strong:has-text('e/Å²')")
    form = page.locator("form.pair")
    form.locator("input").nth(0).fill("8")
    form.locator("input").nth(1).fill("16")
    page.click("text=Integrate")
    look.until("document.querySelectorAll('.intervals strong').length === 2")


def test_finger_drawn_sideways_marks_an_interval(look_at, served, sets):
    look = look_at(served.address, "phone", has_touch=True)
    page = look.open(f"set={sets['stack']}&view=profile")
    box = page.locator(".u-over").bounding_box()
    session = page.context.new_cdp_session(page)
    y = box["y"] + box["height"] / 2
    for kind, share in (("touchStart", 0.2), ("touchMove", 0.3), ("touchMove", 0.5), ("touchEnd", None)):
        points = [] if share is None else [{"x": box["x"] + share * box["width"], "y": y}]
        session.send("Input.dispatchTouchEvent", {"type": kind, "touchPoints": points})
    page.wait_for_selector(".intervals strong:has-text('e/Å²')")
    start, end, _ = look_interval(look)
    assert (start, end) == pytest.approx((12.2, 30.6), abs=0.5)


@pytest.mark.parametrize(
    ("fragment", "title"),
    [
        ("normal=1,0,1", "Normal to (1 0 1)"),
        ("line=axis&along=1,1,0", "Along [1 1 0]"),
        ("line=points&from=0,0,0&to=0.5,0.5,0.5", "From (0, 0, 0) to (0.5, 0.5, 0.5)"),
    ],
)
def test_directions_of_a_crystal(look, sets, fragment, title):
    page = look.open(f"set={sets['crystal']}&view=profile&{fragment}")
    assert title in page.inner_text("h1")
    drag(page, 0.2, 0.6)
    page.wait_for_selector(".intervals strong:has-text('e/Å²')")


def test_line_without_length_is_refused_in_words(look, sets):
    page = look.open(f"set={sets['crystal']}&view=profile&line=points&from=0,0,0&to=0,0,0")
    page.wait_for_selector(".problem")
    assert "give two that differ" in page.inner_text(".problem")


def test_samples_and_remarks_are_there_as_text(look, sets):
    page = look.open(f"set={sets['stack']}&view=profile")
    page.click("text=The curve as a table")
    assert page.locator("details table >> nth=0").locator("tbody tr").count() > 50
    page.click("summary:has-text('How it was made, and')")
    assert "only as good as its phases" in page.inner_text(".remarks")
    assert "Not in σ" in page.inner_text(".remarks")
