"""Signs of one layer's orders from several periods or several contrasts.

transform.py     the layer's continuous transform from its values at even q (sampling theorem)
observations.py  the orders of all sets, sorted by q, with what is known of their size beforehand
branches.py      search over signs along q
fit.py           scales from squared amplitudes; node values and scales by least squares
orientation.py   what fixes the common sign
joint.py         one layer at several periods: all of it together
result.py        signs, margins, verdict
contrast.py      one period at several contrasts: amplitudes linear in the contrast
"""

from engine.films.swelling.contrast import ContrastSigns, contrast_signs
from engine.films.swelling.joint import joint_signs
from engine.films.swelling.orientation import (
    UNDECIDED,
    Orientation,
    excess,
    known_order,
    never_negative,
    total,
)
from engine.films.swelling.result import JointSigns, SignSolution
from engine.films.swelling.transform import LayerTransform

__all__ = [
    "UNDECIDED",
    "ContrastSigns",
    "JointSigns",
    "LayerTransform",
    "Orientation",
    "SignSolution",
    "contrast_signs",
    "excess",
    "joint_signs",
    "known_order",
    "never_negative",
    "total",
]
