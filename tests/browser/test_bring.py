"""Bringing a set: files, tables, what is kept, demonstrations, and what goes wrong."""

from __future__ import annotations

import json

import numpy as np
import pytest

from tests.samples import FOLDER

TABLE = "l amplitude phase_deg sigma\n1 7.2757 0 0.1457\n2 6.7528 0 0.1353\n3 3.417 180 0.0688\n"


def test_demonstration_opens_with_its_summary_and_warnings_first(look):
    page = look.open()
    page.click("[data-demo=stack]")
    page.wait_for_selector("h2:has-text('Know before you look')")
    assert "Phases are taken as exact" in page.inner_text(".warnings")
    assert "invented" in page.inner_text("h1")
    facts = page.inner_text(".facts")
    assert "61.2 Å" in facts
    assert "layer stack" in facts
    assert look.state()["view"] == "summary"
    assert page.locator("#views a").all_inner_texts() == ["Sets", "Summary", "Profile"]


@pytest.mark.parametrize(
    ("demo", "views"),
    [
        ("planar", ["Sets", "Summary", "Profile", "Plane"]),
        ("crystal", ["Sets", "Summary", "Profile", "Slice", "Whole cell"]),
    ],
)
def test_views_are_those_that_the_dimension_allows(look, demo, views):
    page = look.open()
    page.click(f"[data-demo={demo}]")
    page.wait_for_selector(".facts")
    assert page.locator("#views a").all_inner_texts() == views


def test_pasted_table_is_asked_about_and_kept(look):
    page = look.open()
    page.fill("[name=table]", TABLE)
    page.click("text=Go on with the table")
    meanings = page.locator(".preview select")
    assert [meanings.nth(i).input_value() for i in range(4)] == ["l", "amplitude", "phase_deg", "sigma"]
    page.fill("[name=period]", "52")
    page.get_by_label("Name", exact=True).fill("pasted film")
    page.check("#values-structure_factor")
    page.fill("[list=units]", "e/Å³")
    page.click("text=Keep it and look")
    page.wait_for_selector("h1:has-text('pasted film')")
    assert "The zero term is absent" in page.inner_text(".warnings")
    assert "3 rows brought" in page.inner_text(".facts")


def test_meaning_of_the_values_is_never_guessed(look):
    page = look.open()
    page.fill("[name=table]", TABLE)
    page.click("text=Go on with the table")
    page.fill("[name=period]", "52")
    page.click("text=Keep it and look")
    assert page.evaluate("document.querySelector('#values-structure_factor').validity.valueMissing")
    assert page.is_visible("text=Keep it and look")


def test_errors_name_place_and_cure_and_lose_nothing(look):
    look.expected.append("status of 422")
    page = look.open()
    page.fill("[name=table]", TABLE.replace("7.2757", "-7.2757"))
    page.click("text=Go on with the table")
    page.fill("[name=period]", "52")
    page.get_by_label("Name", exact=True).fill("wrong film")
    page.check("#values-structure_factor")
    page.click("text=Keep it and look")
    problem = page.locator(".about .problem")
    problem.wait_for()
    assert "amplitude, row 1: is negative" in problem.inner_text()
    assert problem.locator(".cure").first.inner_text()
    assert page.input_value("[name=period]") == "52"
    assert page.get_by_label("Name", exact=True).input_value() == "wrong film"
    assert page.is_checked("#values-structure_factor")
    page.click("text=Back")
    assert "-7.2757" in page.input_value("[name=table]")


def test_table_that_cannot_be_read_says_where(look):
    page = look.open()
    page.fill("[name=table]", "l amplitude phase_deg\n1 2 0\n2 3\n")
    page.click("text=Go on with the table")
    assert "line 3 has 2 fields" in page.inner_text(".problem")
    page.fill("[name=table]", "l,amplitude,phase_deg\n1,two,0\n")
    page.click("text=Go on with the table")
    page.fill("[name=period]", "52")
    page.check("#values-structure_factor")
    page.click("text=Keep it and look")
    assert "“two” is not a number" in page.inner_text(".about .problem")


def test_columns_may_be_named_by_hand(look):
    page = look.open()
    page.fill("[name=table]", "1\t0\t7.2\t0\n0\t1\t3.1\t180\n1\t1\t2.2\t0\n")
    page.click("text=Go on with the table")
    meanings = page.locator(".preview select")
    assert [meanings.nth(i).input_value() for i in range(4)] == ["h", "k", "amplitude", "phase_deg"]
    meanings.nth(2).select_option("real")
    meanings.nth(3).select_option("imag")
    page.fill("[name=a]", "31")
    page.fill("[name=b]", "31")
    page.fill("[name=gamma]", "120")
    page.check("#values-density_coefficient")
    page.get_by_label("Name", exact=True).fill("by hand")
    page.click("text=Keep it and look")
    page.wait_for_selector("h1:has-text('by hand')")
    assert "planar lattice" in page.inner_text(".facts")


def test_chosen_files_of_every_kind(look, tmp_path):
    page = look.open()
    page.set_input_files("input[type=file]", FOLDER / "crystal_OR4.cif")
    page.wait_for_selector("h1:has-text('crystal_OR4')")
    assert "systematically absent" in page.inner_text(".warnings")
    assert "R_merge" in page.inner_text("#view")
    page = look.open()
    page.set_input_files("input[type=file]", FOLDER / "film_profile.json")
    page.wait_for_selector("h1:has-text('film_profile')")
    archive = tmp_path / "film.npz"
    np.savez(archive, l=np.arange(1, 4), amplitude=[7.2, 6.7, 3.4], phase_deg=[0.0, 0, 180])
    page = look.open()
    page.set_input_files("input[type=file]", archive)
    page.select_option(".about select >> nth=0", "1")
    page.fill("[name=period]", "52")
    page.check("#values-structure_factor")
    page.click("text=Keep it and look")
    page.wait_for_selector("h1:has-text('film')")


def test_raw_intensities_go_through_preparation(look):
    page = look.open()
    page.set_input_files("input[type=file]", FOLDER / "film_scan.csv")
    assert "(12 rows)" in page.inner_text(".about h2")
    page.fill("[name=period]", "52")
    page.check("#values-structure_factor")
    page.click("text=Keep it and look")
    page.wait_for_selector("h1:has-text('film_scan')")
    assert "scale is arbitrary" in page.inner_text(".warnings")


def test_dropped_file_is_taken(look):
    page = look.open()
    text = (FOLDER / "film_orders.csv").read_text()
    page.evaluate(
        """(text) => {
            const transfer = new DataTransfer();
            transfer.items.add(new File([text], "film_orders.csv", { type: "text/csv" }));
            const drop = document.querySelector(".drop");
            drop.dispatchEvent(new DragEvent("drop", { dataTransfer: transfer, bubbles: true, cancelable: true }));
        }""",
        text,
    )
    page.wait_for_selector(".about h2:has-text('12 rows')")


def test_file_without_a_cell_asks_for_it(look, tmp_path):
    look.expected.append("status of 422")
    path = tmp_path / "bare.cif"
    columns = ("index_h", "index_k", "index_l", "F_meas", "phase_meas")
    head = "".join(f"_refln_{name}\n" for name in columns)
    path.write_text(f"data_bare\nloop_\n{head}1 0 0 3 0\n0 1 0 2 180\n")
    page = look.open()
    page.set_input_files("input[type=file]", path)
    page.wait_for_selector(".about .problem")
    assert "cell" in page.inner_text(".about .problem")
    for name, value in zip(("a", "b", "c", "alpha", "beta", "gamma"), (5, 6, 7, 90, 90, 90), strict=True):
        page.fill(f"[name={name}]", str(value))
    page.click("text=Keep it and look")
    page.wait_for_selector("h1:has-text('bare')")


def test_what_is_kept_is_found_and_opened(look, sets):
    page = look.open()
    page.get_by_label("Search").fill("MO-8")
    look.until("document.querySelectorAll('.sets')[0].children.length === 1")
    page.click(".set:has-text('MO-8')")
    page.wait_for_selector("h1:has-text('MO-8')")
    assert look.state()["set"] == sets["crystal"]


def test_names_are_text_and_nothing_else(look):
    page = look.open()
    name = "<img src=x onerror=alert(1)> & film"
    document = {"name": name, "set": json.loads((FOLDER / "film_profile.json").read_text())["set"]}
    document["set"]["mean"] = 19.5
    page.fill("[name=table]", json.dumps(document))
    page.click("text=Go on with the table")
    page.wait_for_selector("h1:has-text('film')")
    assert page.inner_text("h1") == name
    assert page.locator("#view img").count() == 0


def test_set_is_deleted_when_asked_twice(look):
    page = look.open()
    document = {"name": "to go", "set": json.loads((FOLDER / "film_profile.json").read_text())["set"]}
    document["set"]["mean"] = 20.25
    page.fill("[name=table]", json.dumps(document))
    page.click("text=Go on with the table")
    page.click("text=Delete this set")
    page.click("text=Delete it")
    page.wait_for_selector("h1:has-text('What density')")
    page.get_by_label("Search").fill("to go")
    page.wait_for_selector("text=No set is called so.")


def test_set_that_is_gone_is_said_plainly(look):
    look.expected.append("status of 404")
    page = look.open(f"set={'0' * 64}&view=profile")
    page.wait_for_selector("#trouble .problem")
    assert "set" in page.inner_text("#trouble")
    assert page.is_visible("text=Bring what you measured")
