from __future__ import annotations

import typing

import pytest
from pydantic import TypeAdapter, ValidationError

from engine.readers.mapping import Status
from service.parts import Part
from service.schemas.preparation import OmittedStatus, PreparationIn, ReflectionsFile, SymmetryIn


def test_nothing_is_done_that_was_not_asked_for():
    wanted = PreparationIn()
    assert (wanted.corrections, wanted.omit, wanted.reject_outliers) == ([], [], False)
    assert (wanted.scale.kind, wanted.model, wanted.missing_sigma) == ("none", None, "refuse")


def test_statuses_are_those_of_the_readers():
    assert {name.upper() for name in typing.get_args(OmittedStatus)} <= set(Status.__members__)


def test_file_comes_as_a_part_and_in_no_other_way():
    adapter = TypeAdapter(ReflectionsFile)
    part = Part("text/csv", b"h,k,l\n")
    assert adapter.validate_python(part) is part
    for value in (None, "h,k,l", {"data": "x"}, [1], b"x"):
        with pytest.raises(ValidationError, match="is not a file"):
            adapter.validate_python(value)


@pytest.mark.parametrize(
    "members",
    [
        {"widow": 1},
        {"block": 1},
        {"block": "x" * 201},
        {"phase": "phases"},
        {"mapping": {"a": 1}},
        {"mapping": {str(number): "h" for number in range(101)}},
        {"missing_sigma": "guess"},
        {"omit": ["free"]},
        {"omit": "unreliable"},
        {"wavelength": 0},
        {"wavelength": float("nan")},
        {"corrections": [{"kind": "extinction"}]},
        {"corrections": [{}]},
        {"corrections": [{"kind": "lorentz", "geometry": "flat"}]},
        {"corrections": [{"kind": "polarisation", "degree": 2}]},
        {"corrections": [{"kind": "polarisation", "monochromator_2theta_deg": 180}]},
        {"corrections": [{"kind": "polarisation", "perfect": 1}]},
        {"corrections": [{"kind": "film_absorption", "thickness_um": 0, "mu_per_cm": 1}]},
        {"corrections": [{"kind": "film_absorption", "thickness_um": 1, "mu_per_cm": -1}]},
        {"corrections": [{"kind": "footprint", "length_mm": -1, "width_mm": 1}]},
        {"corrections": [{"kind": "lorentz"}] * 6},
        {"amplitudes": "abs"},
        {"reject_outliers": "yes"},
        {"scale": "wilson"},
        {"scale": {"kind": "guess"}},
        {"scale": {"formula": "C" * 1001}},
        {"scale": {"units": 0}},
        {"scale": {"factor": 0}},
        {"scale": {"probe": "electron"}},
        {"model": {"atoms": []}},
        {"model": {"atoms": [{"element": "C", "position": [0, 0, 0]}]}},
        {"model": {"atoms": [{"element": "C", "position": [], "b_iso": 1}]}},
        {"model": {"atoms": [{"element": "C", "position": [0], "b_iso": -1}]}},
        {"model": {"atoms": [{"element": "C", "position": [0], "b_iso": 1, "occupancy": 1.5}]}},
        {"model": {"atoms": [{"element": "C" * 11, "position": [0], "b_iso": 1}]}},
    ],
)
def test_bad_preparations(members):
    with pytest.raises(ValidationError):
        PreparationIn.model_validate(members)


@pytest.mark.parametrize(
    "members",
    [
        {"space_group": 1.0},
        {"space_group": True},
        {"space_group": [1]},
        {"hall": 1},
        {"hall": "x" * 61},
        {"stack_group": "2"},
        {"operations": []},
        {"operations": "x,y,z"},
        {"operations": ["x" * 101]},
        {"operations": ["x,y,z"] * 193},
        {"point_group": "222"},
    ],
)
def test_bad_symmetries(members):
    with pytest.raises(ValidationError):
        SymmetryIn.model_validate(members)
