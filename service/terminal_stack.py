"""A stack of fields in a terminal: shades of profiles along the variable, or the figures of slices."""

from __future__ import annotations

import numpy as np

from engine.combination import StackedField
from service.terminal import shade_rows

LISTED = 40


def render_stack(made: StackedField) -> str:
    """One line a member: its value of the variable, its profile in shades, its extremes."""
    values = np.asarray(np.abs(made.values) if made.values.dtype.kind == "c" else made.values, dtype=np.float64)
    count = min(len(values), LISTED)
    shades = shade_rows(values[:count]) if values.ndim == 2 else [""] * count
    lines = []
    for number in range(count):
        row = values[number]
        lines.append(
            f"  {made.variable.values[number]:10.5g} {made.variable.unit:8} {shades[number]}  "
            f"{float(row.min()):.4g} … {float(row.max()):.4g}"
        )
    if len(values) > count:
        lines.append(f"  … and {len(values) - count} more")
    remarks = dict.fromkeys(note for every in (*made.applied, *made.notes) for note in every)
    shape = " × ".join(str(size) for size in made.values.shape)
    head = f"  {made.variable.name}; {shape} values in {made.unit}; shades from the lowest to the highest of all"
    return "\n".join([*lines, "", head, *(f"  · {text}" for text in remarks)])
