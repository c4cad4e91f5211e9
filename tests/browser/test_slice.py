"""The slice: map, slider, contours, read-out, looks."""

from __future__ import annotations

import statistics

import httpx
import pytest

PIXELS = """() => {
    const canvas = document.querySelector("canvas.map");
    const data = canvas.getContext("2d").getImageData(0, 0, canvas.width, canvas.height).data;
    const seen = new Set();
    for (let i = 0; i < data.length; i += 4) {
        if (data[i + 3]) seen.add((data[i] << 16) | (data[i + 1] << 8) | data[i + 2]);
    }
    return seen.size;
}"""


def slide(page, value: float) -> None:
    """Move the slider as a hand does: an input event, none of change."""
    page.evaluate(
        """(value) => {
            const slider = document.querySelector(".rail-slider");
            slider.value = String(value);
            slider.dispatchEvent(new Event("input", { bubbles: true }));
        }""",
        value,
    )


def test_map_is_drawn_and_read_out(look, served, sets):
    page = look.open(f"set={sets['crystal']}&view=slice&height=0.25")
    assert page.evaluate(PIXELS) > 100
    page.focus(".map-box")
    page.keyboard.press("ArrowRight")
    page.wait_for_selector(".readout strong:has-text('±')")
    told = page.inner_text(".readout")
    x, y, z = (float(part) for part in told.split("at (")[1].split(")")[0].replace("−", "-").split(","))
    assert z == 0.25
    point = httpx.get(
        f"{served.address}/v1/sets/{sets['crystal']}/points", params={"positions": f"[[{x},{y},{z}]]"}
    ).json()
    shown = float(told.split(" ± ")[0].replace("−", "-"))
    # The place is told to three decimals, the value at the sample itself.
    assert shown == pytest.approx(point["values"][0], abs=0.3)


def test_pointer_reads_and_marks_the_colour_bar(look, sets):
    page = look.open(f"set={sets['planar']}&view=slice")
    box = page.locator(".map-box").bounding_box()
    page.mouse.move(box["x"] + box["width"] / 2, box["y"] + box["height"] / 2)
    assert "e/Å³" in page.inner_text(".map-part .readout")
    assert page.is_visible(".bar-mark")
    page.mouse.move(5, 5)
    assert "Point at the map" in page.inner_text(".map-part .readout")


def test_slider_shows_the_next_picture(look, sets):
    page = look.open(f"set={sets['crystal']}&view=slice")
    times = []
    for step in range(1, 21):
        page.evaluate("performance.clearMeasures('slice-shown')")
        # Far apart, so that none is fetched beforehand.
        slide(page, 0.045 * step)
        look.until("performance.getEntriesByName('slice-shown').length > 0")
        times.append(page.evaluate("performance.getEntriesByName('slice-shown').at(-1).duration"))
    print(f"slider to the next picture: median {statistics.median(times):.0f} ms, longest {max(times):.0f} ms")
    look.until("document.querySelector('h1').textContent.includes('0.9 of c')")
    look.until("location.hash.includes('height=0.9')")


def test_hand_that_moves_on_asks_for_little(look, sets):
    page = look.open(f"set={sets['crystal']}&view=slice&axes=bc")
    asked = []
    page.on("request", lambda request: asked.append(request.url) if "/slice?" in request.url else None)
    page.evaluate(
        """() => {
            const slider = document.querySelector(".rail-slider");
            for (let i = 1; i <= 100; i += 1) {
                slider.value = String(0.3 + 0.005 * i);
                slider.dispatchEvent(new Event("input", { bubbles: true }));
            }
        }"""
    )
    page.wait_for_selector("h1:has-text('0.8 of a')")
    look.settle()
    values = [url for url in asked if "quantity" not in url]
    # The first, the last, and the neighbours beforehand.
    assert 2 <= len(values) <= 12


def test_keys_move_the_slider(look, sets):
    page = look.open(f"set={sets['crystal']}&view=slice")
    page.focus(".rail-slider")
    page.keyboard.press("ArrowRight")
    page.wait_for_selector("h1:has-text('0.005 of c')")
    page.keyboard.press("Shift+ArrowRight")
    page.wait_for_selector("h1:has-text('0.055 of c')")
    assert page.get_attribute(".rail-slider", "aria-valuetext") == "0.055 of the cell"


def test_plane_by_indices(look, sets):
    page = look.open(f"set={sets['crystal']}&view=slice")
    page.get_by_label("Plane", exact=True).select_option("plane")
    page.get_by_label("Indices").fill("1 0 -1")
    page.keyboard.press("Enter")
    page.wait_for_selector("h1:has-text('Parallel to (1 0 -1)')")
    page.get_by_label("Width, Å").fill("9")
    page.keyboard.press("Enter")
    look.until("location.hash.includes('width=9')")
    look.settle()
    page.fill(".rail-number", "0.5")
    page.keyboard.press("Enter")
    page.wait_for_selector("h1:has-text('0.5 Å along the normal')")
    assert page.evaluate(PIXELS) > 100
    page.get_by_label("Indices").fill("0 0 0")
    page.get_by_label("Indices").blur()
    assert page.evaluate("document.querySelector('.indices').validity.customError")


def test_looks_change_the_picture(look, sets):
    page = look.open(f"set={sets['crystal']}&view=slice&height=0.18")
    first = page.evaluate(PIXELS)
    assert "Contours every" in page.inner_text(".colour-bar")
    page.get_by_label("Contours").select_option("none")
    look.until("!document.querySelector('.colour-bar').textContent.includes('Contours')")
    page.get_by_label("Colours", exact=True).nth(1).select_option("sequential")
    look.until("!document.querySelector('.bar-zero')")
    assert page.evaluate(PIXELS) != first
    page.get_by_label("Scale").select_option("own")
    page.get_by_label("from", exact=True).fill("-1")
    page.get_by_label("to", exact=True).fill("4")
    page.keyboard.press("Enter")
    page.wait_for_selector(".bar-ends:has-text('4')")
    assert "end colours" in page.inner_text(".colour-bar")
    page.get_by_label("Contours").select_option("sigma")
    page.wait_for_selector(".colour-bar:has-text('Contours every')")
    page.get_by_label("Show", exact=True).select_option("significance")
    look.until("location.hash.includes('show=significance')")
    look.settle()
    assert page.locator(".problem").count() == 0


def test_plane_in_words_and_as_a_table(look, sets):
    page = look.open(f"set={sets['planar']}&view=slice&cells=2")
    page.wait_for_selector("text=On this plane")
    assert "largest" in page.inner_text(".side")
    page.click("text=The map as a coarse table")
    assert page.locator(".side details tbody tr").count() == 7
    assert page.get_attribute(".map-box", "aria-label").startswith("The plane: from 0.3")


CONTOURS = """async () => {
    const { piecesOf } = await import("/page/js/slice/contours.js");
    const n = 41;
    const values = new Float32Array(n * n);
    for (let i = 0; i < n; i += 1) for (let j = 0; j < n; j += 1) values[i * n + j] = (i - 20) ** 2 + (j - 20) ** 2;
    return piecesOf(values, n, n, 144);
}"""


def test_contours_of_a_paraboloid_are_circles(look):
    page = look.open()
    pieces = page.evaluate(CONTOURS)
    assert len(pieces) % 4 == 0
    ends = [(pieces[i] - 20, pieces[i + 1] - 20) for i in range(0, len(pieces), 2)]
    radii = [(x * x + y * y) ** 0.5 for x, y in ends]
    assert max(radii) == pytest.approx(12, abs=0.03)
    assert min(radii) == pytest.approx(12, abs=0.03)
    # Every end is that of two pieces: the line is closed.
    places = sorted((round(x, 6), round(y, 6)) for x, y in ends)
    assert places[0::2] == places[1::2]


TRACES = """async () => {
    const { tracesOf } = await import("/page/js/slice/traces.js");
    return tracesOf([-0.5, 0, 0.25], [[0.1, 0, 0], [0.05, 0.2, 0]], [20, 10]);
}"""


def test_traces_of_cells_lie_where_coordinates_are_whole(look):
    page = look.open()
    traces = page.evaluate(TRACES)
    # The first coordinate runs from -0.5 to 2 over the corners, the second from 0 to 2; the third stays.
    assert len(traces) == 3 + 3
    for (s1, t1), (s2, t2) in traces:
        for s, t in ((s1, t1), (s2, t2)):
            assert -1e-6 <= s <= 20 + 1e-6
            assert -1e-6 <= t <= 10 + 1e-6
            places = (-0.5 + 0.1 * s + 0.05 * t, 0.2 * t)
            assert min(abs(place - round(place)) for place in places) < 1e-9
