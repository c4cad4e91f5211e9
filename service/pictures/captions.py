"""Words of a picture: what is drawn, in which unit, from what, and what must be known to trust it."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from engine.arrays import FloatArray
from engine.coefficients import CoefficientSet
from engine.evaluate import Field
from engine.fields import PHASES_DECIDE
from engine.quantities import SIGNIFICANCE_UNIT, Quantity
from service.pictures.geometry import MOST_OUTLINES, Plane, outlines
from service.pictures.options import PictureOptions

_RAISED = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")
SHORT_POWERS = (-3, 4)
"""Powers of ten of the largest number on an axis between which all are written in full."""
LISTED = 8
"""Contour levels named one by one."""
NAMES = {
    "density": "density",
    "gradient": "gradient",
    "gradient_magnitude": "length of the gradient",
    "laplacian": "Laplacian",
    "autocorrelation": "autocorrelation",
    "response": "response",
}


@dataclass(frozen=True, slots=True)
class Caption:
    """Sentences under a picture: those that must be there, and those that are where there is room."""

    needed: tuple[str, ...]
    further: tuple[str, ...]


def name_of(kind: str, quantity: Quantity) -> str:
    """What the values are, in words."""
    name = NAMES.get(kind, kind.replace("_", " "))
    return {"value": name, "sigma": f"σ of the {name}", "significance": f"{name} over its σ"}[quantity]


def with_unit(name: str, unit: str, power: int = 0) -> str:
    """A label of an axis whose numbers are in 10^power of the unit."""
    measure = {"1": "", SIGNIFICANCE_UNIT: "", "arbitrary": "arbitrary unit"}.get(unit, unit)
    inside = " ".join(filter(None, (ten_to(power), measure)))
    return f"{name} ({inside})" if inside else name


def ten_to(power: int) -> str:
    """10ⁿ in letters; nothing for n = 0."""
    return "10" + str(power).translate(_RAISED) if power else ""


def power_of(low: float, high: float) -> int:
    """The power of ten to take out of the numbers on an axis; 0 where they are short as they are."""
    largest = max(abs(low), abs(high))
    power = math.floor(math.log10(largest)) if largest > 0 else 0
    return 0 if SHORT_POWERS[0] <= power <= SHORT_POWERS[1] else power


def caption(name: str, coefficients: CoefficientSet, field: Field, drawn: tuple[str, ...]) -> Caption:
    """The sentences of a field's picture; `drawn` says what its marks mean."""
    needed = [_sum(name, coefficients, field), *drawn]
    if PHASES_DECIDE in field.notes:
        needed.append("Phases decide: wrong phases give a wrong map that looks as sharp.")
    if field.sigma is not None:
        contains = "; ".join(field.sigma.contains) or "nothing"
        omits = f" Not in σ: {'; '.join(field.sigma.omits)}." if field.sigma.omits else ""
        needed.append(f"σ contains {contains}.{omits}")
    needed += [note for note in field.notes if note.startswith("The zero term")]
    further = [note for note in field.notes if note != PHASES_DECIDE and not note.startswith("The zero term")]
    return Caption(tuple(needed), tuple(further))


def number(value: float) -> str:
    """Four digits, with a true minus sign and a raised power of ten."""
    digits, _, power = f"{value:.4g}".partition("e")
    return digits.replace("-", "−") + (f" × {ten_to(int(power))}" if power else "")


def _sum(name: str, coefficients: CoefficientSet, field: Field) -> str:
    # A capital sigma is another symbol.
    words = [with_unit(name[:1].upper() + name[1:] if name[:1].isascii() else name, field.unit)]
    words.append(f"{field.summed} coefficient{'' if field.summed == 1 else 's'} summed")
    if field.resolution is not None:
        words.append(f"d_min = {field.resolution[0]:.3g} Å")
    # What was done to the measurements stands before the treatment, and is too long for a picture.
    words += field.applied[len(coefficients.history) :]
    return ", ".join(words) + "."


def mean_density(kind: str, quantity: Quantity, coefficients: CoefficientSet, field: Field) -> float | None:
    """The zero term of a real density, where it is known and summed as it stands."""
    if kind != "density" or quantity != "value" or not coefficients.real:
        return None
    zero = ~coefficients.indices.any(axis=1) & coefficients.phase_known
    if not zero.any():
        return None
    weighted = "each coefficient multiplied by its figure of merit" in field.applied
    if weighted and coefficients.merit is not None and np.any(coefficients.merit[zero] != 1):
        return None
    return float(coefficients.values[zero].real.sum())


def cell_words(planes: Sequence[Plane]) -> str:
    """What the thin lines are, or why there are none."""
    found = [outlines(plane) for plane in planes]
    if any(lines is None for lines in found):
        return f"Outlines of the unit cells are left out: more than {MOST_OUTLINES} lines."
    drawn = any(line.shape[0] for lines in found if lines is not None for line in lines)
    return "Thin lines: where the faces of the unit cells cut the plane." if drawn else ""


def contour_words(levels: FloatArray, unit: str, options: PictureOptions, sigma: float | None) -> str:
    """Where the contour lines are, and how they differ."""
    measure = "" if unit == "1" else f" {'units' if unit == 'arbitrary' else unit}"
    if options.levels:
        asked = np.unique(options.levels).tolist()
        listed = [number(level) for level in (asked if len(asked) <= LISTED else (*asked[:2], *asked[-2:]))]
        if len(asked) > LISTED:
            listed.insert(2, "…")
        where = f"at {', '.join(listed)}{measure}"
    elif options.level_sigmas is not None and sigma is not None:
        value = number(options.level_sigmas * sigma)
        step = f"{options.level_sigmas:g} σ"
        where = f"every {step}" if unit == SIGNIFICANCE_UNIT else f"every {step} = {value}{measure} (rms σ)"
    else:
        where = f"every {number(options.level_step or 0.0)}{measure}"
    if not levels.size:
        return f"Contour lines {where}: none within the values."
    signs = [", dashed where negative"] if levels[0] < 0 else []
    if not options.levels and not options.zero_contour:
        signs.append(", none at 0")
    return f"Contour lines {where}{''.join(signs)}."
