from __future__ import annotations

import numpy as np
import pytest

from engine.errors import InputError
from service.pictures.parts import parts
from tests.service.pictures.made import cell, profile


def test_a_real_scalar_is_one_part_with_its_sigma():
    _, field = profile()
    (part,) = parts(field, "value", None)
    assert part.name == ""
    assert part.values is field.values
    assert part.sigma is field.sigma.values
    assert parts(field, "significance", None)[0].sigma is None


def test_a_vector_falls_into_components_each_with_its_sigma():
    _, field = cell(field="gradient")
    found = parts(field, "value", None)
    assert [part.name for part in found] == ["component x", "component y"]
    np.testing.assert_array_equal(found[1].values, field.values[..., 1])
    np.testing.assert_array_equal(found[1].sigma, field.sigma.values[..., 1])
    (chosen,) = parts(field, "value", "y")
    np.testing.assert_array_equal(chosen.values, field.values[..., 1])


def test_a_complex_field_falls_into_two_and_its_sigma_into_none():
    _, field = profile(density="complex")
    real, imaginary = parts(field, "value", None)
    np.testing.assert_array_equal(real.values + 1j * imaginary.values, field.values)
    assert real.sigma is None
    assert parts(field, "value", "imaginary")[0].name == "imaginary part"
    np.testing.assert_array_equal(parts(field, "value", "modulus")[0].values, np.abs(field.values))


def test_a_complex_vector_has_both():
    _, field = cell(field="gradient", density="complex")
    assert len(parts(field, "value", None)) == 4
    (chosen,) = parts(field, "value", "y imaginary")
    np.testing.assert_array_equal(chosen.values, field.values[..., 1].imag)


def test_an_unknown_part_is_refused_with_those_there_are():
    with pytest.raises(InputError, match="give one of x, y"):
        parts(cell(field="gradient")[1], "value", "z")
    with pytest.raises(InputError, match="leave it out"):
        parts(profile()[1], "value", "real")
