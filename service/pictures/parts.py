"""A field as real arrays that can be drawn: components of a vector, parts of a complex value."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from engine.arrays import AnyArray
from engine.errors import InputError
from engine.evaluate import Field
from engine.quantities import Quantity


@dataclass(frozen=True, slots=True)
class Part:
    """One real array of a field.

    Attributes
    ----------
    name : str
        Empty where there is but one.
    values : float array, shape of the sampling
    sigma : float array of the same shape, or None
        Standard uncertainty; None also where that of a complex value cannot be shared out.
    """

    name: str
    values: AnyArray
    sigma: AnyArray | None


def parts(field: Field, quantity: Quantity, wanted: str | None) -> tuple[Part, ...]:
    """What can be drawn of a field.

    Raises
    ------
    InputError
        `wanted` is not among them.
    """
    sigma = None if field.sigma is None or quantity != "value" else field.sigma.values
    if not field.components:
        found = _of_scalar("", field.values, sigma, wanted)
    else:
        found = tuple(
            part
            for place, name in enumerate(field.components)
            for part in _of_scalar(
                f"component {name}", field.values[..., place], None if sigma is None else sigma[..., place], None
            )
        )
    if wanted is None:
        return found
    chosen = tuple(part for part in found if _short(part.name) == wanted)
    if not chosen:
        known = [_short(part.name) for part in found if part.name]
        if not known:
            raise InputError("part", "is given, and the field has but one", "leave it out")
        raise InputError("part", "is not one of the field", f"give one of {', '.join(known)}")
    return chosen


def _of_scalar(name: str, values: AnyArray, sigma: AnyArray | None, wanted: str | None) -> tuple[Part, ...]:
    if values.dtype.kind != "c":
        return (Part(name, values, sigma),)
    prefix = f"{name}, " if name else ""
    found = (Part(f"{prefix}real part", values.real, None), Part(f"{prefix}imaginary part", values.imag, None))
    if wanted == "modulus":
        return (Part(f"{prefix}modulus", np.abs(values), None),)
    return found


def _short(name: str) -> str:
    """What a part is called in an option: x, real, x real."""
    return name.replace("component ", "").replace(" part", "").replace(",", "")
