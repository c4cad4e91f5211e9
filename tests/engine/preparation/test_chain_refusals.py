"""The chain of preparation: every refusal names its place."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest

from engine import InputError
from engine.amplitudes.corrections import Polarisation
from engine.preparation import prepare_reflections
from engine.symmetry import plane_group, space_group
from tests.engine.preparation.crystal import (
    CONTENT,
    OR,
    exact,
    measured,
    noisy,
    recipe,
    with_row,
)


def without_sigma():
    return replace(noisy(), sigma=None)


def zero_alone():
    return with_row(measured(OR, OR.sphere(3.0), quantity="amplitude"), (0, 0, 0), 1.0).select(np.array([-1]))


def two_zero_terms():
    given = measured(OR, OR.sphere(3.0), quantity="amplitude")
    return with_row(with_row(given, (0, 0, 0), 150.0), (0, 0, 0), 151.0)


def wrong_phase():
    """One row of a general orbit turned by 40°."""
    given = exact()
    row = np.flatnonzero(np.all(given.indices > 0, axis=1))[0]
    phase = given.phase.copy()
    phase[row] += math.radians(40)
    return replace(given, phase=phase)


def only_absent():
    return measured(OR, np.array([[1, 0, 0], [0, 3, 0]]), floor=1.0)


def few():
    return noisy().select(np.arange(0, 60, 4))


def amplitudes_given():
    return measured(OR, OR.sphere(3.0), quantity="amplitude")


WILSON = {"scale": "wilson", "content": CONTENT, "units": 4}


@pytest.mark.parametrize(
    ("make", "asked", "path"),
    [
        (noisy, {"corrections": (Polarisation(),)}, "wavelength"),
        (noisy, {"corrections": (Polarisation(),), "wavelength": 2.5}, "wavelength"),
        (noisy, {"corrections": (Polarisation(),), "wavelength": -1.0}, "wavelength"),
        (amplitudes_given, {"corrections": (Polarisation(),), "wavelength": 0.7}, "corrections"),
        (noisy, {"amplitudes": "guess"}, "amplitudes"),
        (amplitudes_given, {"amplitudes": "guess"}, "amplitudes"),
        (noisy, {"scale": "guess"}, "scale"),
        (noisy, {"scale": "wilson"}, "content"),
        (noisy, {**WILSON, "probe": "electron"}, "probe"),
        (noisy, {**WILSON, "units": 0.0}, "units"),
        (few, WILSON, "reflections"),
        (noisy, {"scale": "factor"}, "factor"),
        (noisy, {"scale": "factor", "factor": 0.0}, "factor"),
        (noisy, {"scale": "factor", "factor": -2.0}, "factor"),
        (noisy, {"scale": "factor", "factor": math.nan}, "factor"),
        (noisy, {"factor": 2.0}, "factor"),
        (noisy, {**WILSON, "factor": 2.0}, "factor"),
        (without_sigma, {}, "sigma"),
        (zero_alone, {}, "indices"),
        (two_zero_terms, {}, "indices"),
        (only_absent, {}, "indices"),
        (wrong_phase, {"amplitudes": "root"}, "phase"),
        (noisy, {"group": space_group("P 4 2 2")}, "lattice"),
        (noisy, {"group": plane_group("p2")}, "group"),
    ],
)
def test_refusals_name_their_place(make, asked, path):
    with pytest.raises(InputError) as caught:
        prepare_reflections(make(), recipe(**asked))
    assert caught.value.path == (path,)
    assert caught.value.reason
    assert caught.value.cure


def test_rows_are_those_of_the_source():
    """Whatever was left out before: rows 1000, 1001, … here."""
    given = two_zero_terms()
    with pytest.raises(InputError) as caught:
        prepare_reflections(replace(given, row=given.row + 1000), recipe())
    assert caught.value.rows == (1000 + given.count - 2, 1000 + given.count - 1)
