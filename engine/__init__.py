"""The numerics of densityloom: from Fourier coefficients to a density on real-space samples.

Nothing here knows of HTTP. A lab's script needs these names:

    lattice = Lattice.from_parameters(3.02, 3.02, 17.4, 90, 90, 120)
    coefficients = assemble(lattice, Columns(...), values="structure_factor")
    field = evaluate(coefficients, sampling.line(lattice, [0, 0, 0], [0, 0, 1], 512))
"""

from engine import averages, sampling
from engine.assembly import Columns, assemble
from engine.coefficients import CoefficientSet, Tally
from engine.errors import EngineError, InputError, TooLargeError, TransformError
from engine.evaluate import Field, Work, evaluate, iterate, perform, prepare
from engine.fields import FIELD_KINDS, Treatment
from engine.lattice import Lattice
from engine.synthesis import Demand
from engine.windows import Window

__all__ = [
    "FIELD_KINDS",
    "CoefficientSet",
    "Columns",
    "Demand",
    "EngineError",
    "Field",
    "InputError",
    "Lattice",
    "Tally",
    "TooLargeError",
    "TransformError",
    "Treatment",
    "Window",
    "Work",
    "assemble",
    "averages",
    "evaluate",
    "iterate",
    "perform",
    "prepare",
    "sampling",
]
