"""σ of a field on its samples."""

from __future__ import annotations

from dataclasses import dataclass

from engine.arrays import AnyArray


@dataclass(frozen=True, slots=True, kw_only=True)
class Sigma:
    """Standard uncertainties of a field's values.

    Attributes
    ----------
    values : float array
        The shape of the field's values and their unit. Of a complex value the root of ⟨|δn|²⟩.
    minimum, maximum, rms : float
        Over all samples.
    accuracy : float
        Largest error to expect from the summation, relative to the largest σ.
    contains, omits : tuple of str
        Which errors are in it, and which are not.
    """

    values: AnyArray
    minimum: float
    maximum: float
    rms: float
    accuracy: float
    contains: tuple[str, ...]
    omits: tuple[str, ...]
