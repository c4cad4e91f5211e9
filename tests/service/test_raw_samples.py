"""The samples that begin with raw intensities end in the structures they were made of."""

from __future__ import annotations

import io
import itertools
import json

import numpy as np
import pytest
from scipy.ndimage import maximum_filter

from service.cli import main
from tests import samples_raw
from tests.service.bodies import FORM, SAMPLES, form
from tests.service.test_openapi import check_shape

EDGES = np.array([samples_raw.CRYSTAL[name] for name in "abc"])


def sample(name):
    return json.loads((SAMPLES / name).read_text())


def posted(client, product, request, file, accept="application/json"):
    kind = "text/csv" if file.endswith(".csv") else "chemical/x-cif"
    parts = [("request", "application/json", json.dumps(request).encode())]
    body = form(*parts, ("reflections", kind, (SAMPLES / file).read_bytes()))
    answer = client.post(f"/v1/{product}", content=body, headers={"Content-Type": FORM, "Accept": accept})
    assert answer.status_code == 200, answer.text
    return answer


def images(position):
    """The four places of P 21 21 21 (International Tables A, No. 19), fractions of the cell."""
    x, y, z = position
    return [(x, y, z), (0.5 - x, -y, z + 0.5), (-x, y + 0.5, 0.5 - z), (x + 0.5, 0.5 - y, -z)]


def peaks(values):
    """Places (fractional) and heights of the local maxima of a periodic grid, the highest first.

    The vertex of the parabola through a grid point and its two neighbours, axis by axis; a peak of
    OR-4 is 0.7 Å wide, so on a grid of 0.15 Å that is good to some thousandths of an Å.
    """
    at = np.argwhere(values == maximum_filter(values, size=3, mode="wrap"))
    middle = values[tuple(at.T)]
    places, heights = at.astype(float), middle.copy()
    for axis, count in enumerate(values.shape):
        step = np.eye(3, dtype=int)[axis]
        below, above = (values[tuple(((at + way * step) % values.shape).T)] for way in (-1, 1))
        shift = (below - above) / (2 * (below - 2 * middle + above))
        heights -= (below - above) * shift / 4
        places[:, axis] = (places[:, axis] + shift) / count
    order = np.argsort(-heights)
    return places[order], heights[order]


@pytest.fixture(scope="module")
def atoms_found(client):
    """Each atom of the cell with the distance (Å) and height of the peak nearest to it, and the rest of the peaks."""
    request = {"set": sample("crystal_from_cif.json")["set"], "spacing": 0.15}
    answer = posted(client, "grid", request, "crystal_OR4.cif", "application/x-npy")
    places, heights = peaks(np.load(io.BytesIO(answer.content)))
    found, taken = [], set()
    for element, position in samples_raw.ATOMS:
        for image in images(position):
            apart = (places - image + 0.5) % 1 - 0.5
            distances = np.linalg.norm(apart * EDGES, axis=1)
            nearest = int(distances.argmin())
            taken.add(nearest)
            found.append((element, distances[nearest], heights[nearest]))
    others = [height for peak, height in enumerate(heights) if peak not in taken]
    return found, taken, np.array(others)


def test_every_atom_has_its_peak(atoms_found):
    """Within 0.05 Å: noise of 3 % in the intensities moves the peak of a carbon atom by some hundredths."""
    found, taken, _ = atoms_found
    assert len(found) == len(taken) == 24
    assert {element: distance for element, distance, _ in found if distance > 0.05} == {}


def test_peaks_are_as_high_as_their_atoms_are_heavy(atoms_found):
    found, _, others = atoms_found
    heights = {
        element: [height for one, _, height in found if one == element] for element in ("Cl", "S", "O", "N", "C")
    }
    for heavier, lighter in itertools.pairwise(heights):
        assert min(heights[heavier]) > max(heights[lighter]), heights
    # What is no atom is a ripple of the heavy ones and noise.
    assert others.max() < 0.5 * min(heights["C"])
    # The four images of an atom are one atom.
    for element, all_of in heights.items():
        for four in np.reshape(all_of, (-1, 4)):
            assert np.ptp(four) < 0.02 * four.mean(), element


def test_plane_through_sulfur(client):
    """The sample as it stands: its maximum is the sulfur atom in the plane."""
    answer = posted(client, "slice", sample("crystal_from_cif.json"), "crystal_OR4.cif").json()
    values = np.array(answer["values"])
    assert list(values.shape) == answer["shape"]
    place = np.array(answer["origin"]["cartesian"])
    for number, axis in zip(np.unravel_index(values.argmax(), values.shape), answer["axes"], strict=True):
        place = place + number * axis["step"] * np.array(axis["direction"])
    sulfur = samples_raw.ATOMS[0][1]
    apart = min(np.linalg.norm(((place / EDGES - image + 0.5) % 1 - 0.5) * EDGES) for image in images(sulfur))
    # The samples of the plane are 0.1 Å apart: half a diagonal.
    assert apart < 0.0708 + 0.05


def test_film_of_a_scan_is_the_film_of_its_structure_factors(client):
    measured = posted(client, "profile", sample("film_from_scan.json"), "film_scan.csv").json()
    given = client.post("/v1/profile", json=sample("film_profile.json")).json()
    ours, theirs = np.array(measured["values"]), np.array(given["values"])
    assert np.corrcoef(ours, theirs)[0, 1] > 0.99
    # The scale is that of the structure factors too, to the 2 % of noise in either.
    assert np.std(ours) == pytest.approx(np.std(theirs), rel=0.03)
    assert measured["unit"] == given["unit"] == "e/Å³"
    for words in ("Lorentz", "polarisation", "absorption", "footprint"):
        assert any(words.lower() in one.lower() for one in measured["applied"]), words


@pytest.mark.parametrize("name", ["inspect_crystal.json", "crystal_from_cif.json"])
def test_inspection_on_the_command_line_is_that_of_the_service(client, capsys, name):
    request = {"set": {"preparation": sample(name)["set"]["preparation"]}}
    answer = posted(client, "sets/inspect", request, "crystal_OR4.cif").json()
    check_shape(answer, "SummaryAnswer")
    assert main(["inspect", str(SAMPLES / "crystal_OR4.cif"), "--request", str(SAMPLES / name), "--json"]) == 0
    assert json.loads(capsys.readouterr().out) == answer


def test_inspection_in_words_has_the_key_figures(client, capsys):
    answer = posted(client, "sets/inspect", sample("inspect_crystal.json"), "crystal_OR4.cif").json()
    path = str(SAMPLES / "inspect_crystal.json")
    assert main(["inspect", str(SAMPLES / "crystal_OR4.cif"), "--request", path]) == 0
    told = capsys.readouterr().out
    tables = [line for line in told.splitlines() if line.startswith("    ")]
    assert len(tables) > 10
    assert max(map(len, tables)) <= 80
    for words in (
        "1757 rows",
        "P 21 21 21",
        f"{answer['unique']} unique",
        "cell 7.12 8.95 10.43 90 90 90",
        "wavelength 0.7107 Å",
        "completeness 100.0 %",
        f"{answer['absences']} systematically absent",
        f"B {answer['wilson_b']:.3g} ±",
        *answer["applied"],
        *answer["warnings"],
    ):
        assert words in told
    assert not any(word in told for word in ("nan", "None", "inf "))
