from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from service.pictures import captions
from service.pictures.captions import contour_words, mean_density, number, power_of, ten_to, with_unit
from service.pictures.options import PictureOptions
from tests.service.pictures.made import cell, profile


def test_a_caption_says_what_must_be_known():
    made, field = profile()
    told = " ".join(captions.caption("density", made, field, ("Band: ±1 σ.",)).needed)
    for words in (
        "Density (e/Å³)",
        f"{field.summed} coefficients summed",
        "d_min = 13.3 Å",
        "no termination window",
        "wrong phases give a wrong map that looks as sharp",
        "σ contains standard uncertainties of the amplitudes",
        "Not in σ:",
        "Band: ±1 σ.",
    ):
        assert words in told


def test_history_is_left_to_the_data_and_treatment_is_not():
    made, field = profile()
    made = replace(made, history=("scaled by Wilson's plot",))
    field = replace(field, applied=("scaled by Wilson's plot", "termination window lanczos"))
    told = " ".join(captions.caption("density", made, field, ()).needed)
    assert "Wilson" not in told
    assert "lanczos" in told


def test_a_missing_zero_term_is_said_among_what_must_be():
    made, field = profile(mean=None)
    assert any(sentence.startswith("The zero term") for sentence in captions.caption("density", made, field, ()).needed)


def test_no_sentence_of_the_notes_is_lost():
    made, field = profile(mean=None)
    told = captions.caption("density", made, field, ())
    said = (*told.needed, *told.further)
    assert all(note in said for note in field.notes if "phases" not in note)


@pytest.mark.parametrize(
    ("unit", "power", "label"),
    [
        ("e/Å³", 0, "density (e/Å³)"),
        ("1", 0, "density"),
        ("σ", 0, "density"),
        ("arbitrary", 0, "density (arbitrary unit)"),
        ("e/Å³", -12, "density (10⁻¹² e/Å³)"),
        ("1", 8, "density (10⁸)"),
    ],
)
def test_labels(unit, power, label):
    assert with_unit("density", unit, power) == label


def test_names_of_quantities():
    assert captions.name_of("laplacian", "value") == "Laplacian"
    assert captions.name_of("density", "sigma") == "σ of the density"
    assert captions.name_of("density", "significance") == "density over its σ"
    assert captions.name_of("new_field", "value") == "new field"
    made, field = profile()
    # A capital of σ would be a sum.
    assert captions.caption("σ of the density", made, field, ()).needed[0].startswith("σ of")


def test_numbers():
    assert number(-0.02) == "−0.02"
    assert number(1.5e-9) == "1.5 × 10⁻⁹"
    assert ten_to(0) == ""
    assert (power_of(-3e7, 2), power_of(0.0, 0.02), power_of(0, 99999), power_of(0, 0), power_of(0, 4e-9)) == (
        7,
        0,
        0,
        0,
        -9,
    )


def test_contour_words_say_where_and_how():
    levels = np.array([-0.2, 0.2])
    told = contour_words(levels, "e/Å³", PictureOptions(level_step=0.2), None)
    assert "every 0.2 e/Å³" in told
    assert "dashed where negative" in told
    assert "none at 0" in told
    told = contour_words(np.array([0.3]), "e/Å³", PictureOptions(level_sigmas=3.0, zero_contour=True), 0.1)
    assert "every 3 σ = 0.3 e/Å³ (rms σ)" in told
    assert "dashed" not in told
    assert "none at 0" not in told
    assert "every 3 σ" in contour_words(np.array([3.0]), "σ", PictureOptions(level_sigmas=3.0), 1.0)
    listed = contour_words(levels, "1", PictureOptions(levels=tuple(map(float, range(20)))), None)
    assert "at 0, 1, …, 18, 19" in listed
    assert "none within the values" in contour_words(np.zeros(0), "1", PictureOptions(level_step=9.0), None)


def test_the_mean_is_known_only_where_it_is():
    made, field = profile(mean=2.5)
    assert mean_density("density", "value", made, field) == pytest.approx(2.5)
    assert mean_density("laplacian", "value", made, field) is None
    assert mean_density("density", "sigma", made, field) is None
    bare, its = profile(mean=None)
    assert mean_density("density", "value", bare, its) is None
    both, its = cell(density="complex")
    assert mean_density("density", "value", both, its) is None


def test_a_weighted_zero_term_is_not_the_mean():
    made, field = profile(mean=2.5)
    made = replace(made, merit=np.full(made.count, 0.5))
    field = replace(field, applied=(*field.applied, "each coefficient multiplied by its figure of merit"))
    assert mean_density("density", "value", made, field) is None
