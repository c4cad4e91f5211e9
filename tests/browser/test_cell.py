"""The whole cell: surface, turning, extrema, and what is said where it cannot be drawn."""

from __future__ import annotations

import struct

import httpx
import pytest

DRAWN = "Number(document.querySelector('.space')?.dataset.drawn ?? 0)"


def test_surface_comes_coarse_then_fine(look, sets):
    asked = []
    look.page.on("request", lambda request: asked.append(request.url) if "format=glb" in request.url else None)
    page = look.open(f"set={sets['crystal']}&view=cell&level=3")
    page.wait_for_selector(".readout:has-text('triangles')")
    look.until(f"{DRAWN} > 500")
    spacings = [float(httpx.URL(url).params["spacing"]) for url in asked]
    assert len(spacings) == 2
    assert spacings[0] > spacings[1]
    assert "e/Å³" in page.inner_text(".readout")
    assert "Surface at" in page.get_attribute(".space", "aria-label")
    assert "all 1" in page.inner_text("#strip")


def test_levels_may_be_counted_otherwise(look, sets):
    look.expected.append("status of 422")
    page = look.open(f"set={sets['crystal']}&view=cell")
    page.wait_for_selector(".readout:has-text('triangles')")
    page.get_by_label("counted in").select_option("sigmas")
    page.get_by_label("Level, σ").nth(0).fill("20")
    page.keyboard.press("Enter")
    look.until("location.hash.includes('level=20')")
    look.settle()
    page.get_by_label("counted in").select_option("value")
    page.get_by_label("Level, e/Å³").fill("12")
    page.keyboard.press("Enter")
    page.wait_for_selector(".readout:has-text('12 e/Å³')")
    page.check("text=and at minus the level")
    page.wait_for_selector(".readout .below:has-text('no surface')")
    assert "outside the values" in page.inner_text(".readout .below")
    page.get_by_label("Level, e/Å³").fill("200")
    page.keyboard.press("Enter")
    page.wait_for_selector(".view .problem:has-text('Choose a level between them')")


def test_turned_by_keys_and_by_hand(look, sets):
    page = look.open(f"set={sets['crystal']}&view=cell&level=3")
    page.wait_for_selector(".readout:has-text('triangles')")
    labels = "[...document.querySelectorAll('.axis-name')].map((node) => node.style.transform).join()"
    before = page.evaluate(labels)
    page.focus(".space")
    page.keyboard.press("Shift+ArrowLeft")
    page.keyboard.press("+")
    look.until("(before) => " + labels + " !== before", arg=before)
    look.until("location.hash.includes('turn=') && location.hash.includes('zoom=')")
    turned = look.state()["turn"]
    box = page.locator(".space").bounding_box()
    page.mouse.move(box["x"] + box["width"] / 2, box["y"] + box["height"] / 2)
    page.mouse.down()
    page.mouse.move(box["x"] + box["width"] / 2 + 80, box["y"] + box["height"] / 2 + 30, steps=4)
    page.mouse.up()
    look.until("(turned) => !decodeURIComponent(location.hash).includes(turned)", arg=turned)
    kept = page.evaluate(labels)
    page.wait_for_timeout(300)
    page.reload()
    page.wait_for_selector(".readout:has-text('triangles')")
    look.until("(kept) => " + labels + " === kept", arg=kept)
    page.click("text=First view")
    look.until("(kept) => " + labels + " !== kept", arg=kept)


def test_extrema_and_cell_mark_each_other(look, sets):
    page = look.open(f"set={sets['crystal']}&view=cell&level=3&most=4")
    rows = page.locator("tr[data-place]")
    rows.first.wait_for()
    assert rows.count() == 4
    rows.nth(2).hover()
    assert page.locator(".extremum-name.on").inner_text() == "3"
    # Towards the reader, so that nothing of the list is under the pointer.
    label = page.locator(".extremum-name").nth(0).bounding_box()
    page.mouse.move(label["x"] - 4, label["y"] + label["height"] + 8)
    look.until("document.querySelector('tr[data-place].marked')?.dataset.place === '0'")
    page.get_by_label("Mark", exact=True).select_option("none")
    look.until("document.querySelectorAll('.extremum-name').length === 0")


def test_browser_without_webgl_is_told_the_cure(look, sets):
    look.page.add_init_script(
        "const get = HTMLCanvasElement.prototype.getContext;"
        "HTMLCanvasElement.prototype.getContext = function (kind, ...rest) {"
        "  return kind.startsWith('webgl') ? null : get.call(this, kind, ...rest); };"
    )
    page = look.open(f"set={sets['crystal']}&view=cell")
    page.wait_for_selector(".space-part .problem")
    assert "WebGL 2" in page.inner_text(".space-part .problem")
    page.wait_for_selector("tr[data-place]")


def test_server_without_the_package_is_told_the_cure(look, sets):
    look.expected.append("status of 501")
    problem = (
        '{"type":"urn:densityloom:problem:not-installed","title":"This needs an optional package","status":501,'
        '"detail":"Install scikit-image."}'
    )
    look.page.route(
        "**/grid?*format=glb",
        lambda route: route.fulfill(status=501, content_type="application/problem+json", body=problem),
    )
    page = look.open(f"set={sets['crystal']}&view=cell")
    page.wait_for_selector(".view .problem")
    told = page.inner_text(".view .problem")
    assert "Install scikit-image" in told
    assert "slices show the same density" in told


GLB = """async (bytes) => {
    const { readGlb } = await import("/page/js/cell/glb.js");
    const read = readGlb(new Uint8Array(bytes).buffer);
    return { position: [...read.position], indices: [...read.indices], extras: read.extras };
}"""


def test_surface_file_is_read_as_it_was_written(look):
    text = (
        b'{"asset":{"version":"2.0","extras":{"level":1.5}},"meshes":[{"primitives":[{"attributes":{"POSITION":0},'
        b'"indices":1}]}],"accessors":[{"bufferView":0,"componentType":5126,"count":3,"type":"VEC3"},'
        b'{"bufferView":1,"componentType":5123,"count":3,"type":"SCALAR"}],'
        b'"bufferViews":[{"buffer":0,"byteLength":36},{"buffer":0,"byteOffset":36,"byteLength":6}],"buffers":[{"byteLength":42}]}'
    )
    text += b" " * (-len(text) % 4)
    numbers = struct.pack("<9f3H", 0, 0, 0, 1, 0, 0, 0, 1, 0, 0, 1, 2) + b"\0\0"
    size = 12 + 8 + len(text) + 8 + len(numbers)
    file = struct.pack("<4sII", b"glTF", 2, size) + struct.pack("<I4s", len(text), b"JSON") + text
    file += struct.pack("<I4s", len(numbers), b"BIN\0") + numbers
    page = look.open()
    read = page.evaluate(GLB, list(file))
    assert read["position"] == [0, 0, 0, 1, 0, 0, 0, 1, 0]
    assert read["indices"] == [0, 1, 2]
    assert read["extras"] == {"level": 1.5}
    with pytest.raises(Exception, match="no binary glTF"):
        page.evaluate(GLB, list(b"not a file of that kind"))
