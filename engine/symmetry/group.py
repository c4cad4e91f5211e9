"""Group: the symmetry operations of a crystal, a planar lattice or a stack, modulo lattice translations."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, field
from fractions import Fraction
from typing import Literal, get_args

import numpy as np
from numpy.typing import ArrayLike

from engine.arrays import FloatArray, IntArray, as_choice
from engine.errors import InputError
from engine.symmetry.operations import (
    COORDINATES,
    LARGEST_COEFFICIENT,
    LARGEST_DENOMINATOR,
    Operation,
    determinant,
    format_operation,
    parse_operation,
)

Closure = Literal["complete", "require"]

MOST_OPERATIONS = 192
"""Order of the largest conventional group, a face-centred cubic one with inversion."""
SNAP = 1e-4
"""A translation in floating point is the nearest fraction with a denominator up to 24 when it is
this close to it; such fractions are 1.8e-3 apart."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Group:
    """Operations x' = R x + t, a group modulo lattice translations; make one with a constructor.

    Attributes
    ----------
    rotations : int64, shape (n, d, d)
        R; the identity first. Acts on columns of fractional coordinates; on rows of indices
        from the right, h' = hR.
    translations : float64, shape (n, d)
        t in [0, 1).
    name : str
    number : int or None
        Of the space-group type (1–230), plane group (1–17) or line group (1, 2).
    denominator : int
        Common denominator of all translations.
    numerators : int64, shape (n, d)
        ``translations`` times ``denominator``, exactly: phases are reduced in whole numbers.
    cosets : int64, shape (p,)
        One operation for each distinct rotation part.
    """

    rotations: IntArray
    translations: FloatArray
    name: str
    number: int | None = None
    denominator: int = field(init=False, repr=False)
    numerators: IntArray = field(init=False, repr=False)
    cosets: IntArray = field(init=False, repr=False)

    def __post_init__(self) -> None:
        rotations, fractions = _checked(self.rotations, self.translations)
        denominator = math.lcm(*(shift.denominator for row in fractions for shift in row))
        numerators = np.array([[int(shift * denominator) for shift in row] for row in fractions], dtype=np.int64)
        _require_closed(np.concatenate([rotations, numerators[..., None]], axis=2), denominator)
        _, first = np.unique(rotations.reshape(len(rotations), -1), axis=0, return_index=True)
        values: dict[str, object] = {
            "rotations": rotations,
            "translations": numerators / denominator,
            "denominator": denominator,
            "numerators": numerators,
            "cosets": np.sort(first).astype(np.int64),
        }
        for name, value in values.items():
            if isinstance(value, np.ndarray):
                value.setflags(write=False)
            object.__setattr__(self, name, value)

    @property
    def order(self) -> int:
        """Operations modulo lattice translations."""
        return int(self.rotations.shape[0])

    @property
    def dimension(self) -> int:
        """1, 2 or 3."""
        return int(self.rotations.shape[1])

    @property
    def centring(self) -> IntArray:
        """The pure translations, the zero one among them, times ``denominator``; shape (c, d)."""
        pure = np.all(self.rotations == np.eye(self.dimension, dtype=np.int64), axis=(1, 2))
        return np.asarray(self.numerators[pure])

    @property
    def centrosymmetric(self) -> bool:
        """Whether an inversion is among the operations, at the origin or elsewhere."""
        return bool(np.any(np.all(self.rotations == -np.eye(self.dimension, dtype=np.int64), axis=(1, 2))))

    @property
    def operations(self) -> tuple[str, ...]:
        """The operations as coordinates, such as ``-x+1/2,y,-z``."""
        elements = np.concatenate([self.rotations, self.numerators[..., None]], axis=2)
        return tuple(format_operation(_operation(element, self.denominator)) for element in elements)

    @classmethod
    def from_operations(
        cls,
        operations: Sequence[str],
        dimension: int,
        *,
        name: str = "",
        number: int | None = None,
        closure: Closure = "complete",
    ) -> Group:
        """The group that a list of operations such as ``-x+1/2,y,-z`` generates.

        Parameters
        ----------
        operations : sequence of str
            Any generators, or all operations; what comes twice is joined. The order of a list
            that is already a group is kept, but for the identity, which comes first.
        dimension : {1, 2, 3}
        name, number : str, int
            Of the group, where it has one; the name else lists the operations given.
        closure : {"complete", "require"}
            ``complete`` adds the products that the list lacks; ``require`` refuses a list that
            lacks some.

        Raises
        ------
        InputError
            A text that is no operation, no operations at all, a list that generates more than
            192 operations (naming the first operation that does), or a list that is not closed
            where that is required (naming two operations and their product).
        """
        if dimension not in COORDINATES:
            raise InputError("dimension", f"is {dimension}", "give 1, 2 or 3")
        as_choice(closure, get_args(Closure), "closure")
        if not operations:
            raise InputError("operations", "is an empty list", "give at least the identity")
        parsed = [parse_operation(text, dimension, ("operations", row)) for row, text in enumerate(operations)]
        denominator = math.lcm(*(shift.denominator for one in parsed for shift in one.translation))
        given = np.stack([_augmented(one, denominator) for one in parsed])
        elements = _generated(given, denominator, operations)
        listed = _with_identity_first(_distinct(given), dimension)
        if len(listed) == len(elements):
            elements = listed
        elif closure == "require":
            _require_closed(listed, denominator)
        return cls(
            rotations=np.ascontiguousarray(elements[:, :, :dimension]),
            translations=elements[:, :, dimension] / denominator,
            name=name or "; ".join(operations),
            number=number,
        )


def _checked(rotations: ArrayLike, translations: ArrayLike) -> tuple[IntArray, list[list[Fraction]]]:
    """Border check of arrays: shapes, whole rotations of determinant ±1, translations that are small fractions."""
    matrices, shifts = np.asarray(rotations), np.asarray(translations, dtype=np.float64)
    if matrices.ndim != 3 or matrices.shape[1] != matrices.shape[2] or not 1 <= matrices.shape[1] <= 3:
        raise InputError("rotations", "does not hold 1×1, 2×2 or 3×3 matrices", "give the shape (n, d, d)")
    if shifts.shape != matrices.shape[:2]:
        raise InputError("translations", f"has the shape {shifts.shape}", f"give the shape {matrices.shape[:2]}")
    if not 1 <= len(matrices) <= MOST_OPERATIONS:
        raise InputError("rotations", f"holds {len(matrices)} operations", f"give 1 to {MOST_OPERATIONS}")
    whole = np.rint(matrices).astype(np.int64)
    for place in range(len(whole)):
        if np.any(whole[place] != matrices[place]) or abs(determinant(whole[place])) != 1:
            raise InputError(("rotations", place), "is not integral with determinant 1 or -1", "give such matrices")
    if not np.array_equal(whole[0], np.eye(whole.shape[1])) or np.any(shifts[0]):
        raise InputError(("rotations", 0), "is not the identity", "list the identity first")
    fractions = []
    for place, row in enumerate(shifts.tolist()):
        snapped = [_snapped(value) for value in row]
        if any(value is None for value in snapped):
            raise InputError(
                ("translations", place),
                f"{row} holds a number that is no fraction with a denominator up to {LARGEST_DENOMINATOR}",
                "give the translations with at least four decimals",
            )
        fractions.append([value for value in snapped if value is not None])
    return whole, fractions


def _snapped(value: float) -> Fraction | None:
    if not math.isfinite(value):
        return None
    nearest = Fraction(value).limit_denominator(LARGEST_DENOMINATOR)
    return nearest % 1 if abs(float(nearest) - value) <= SNAP else None


def _augmented(operation: Operation, denominator: int) -> IntArray:
    """(d, d+1): R beside the numerators of t."""
    shifts = [int(shift * denominator) for shift in operation.translation]
    return np.column_stack([operation.rotation, np.array(shifts, dtype=np.int64)])


def _operation(element: IntArray, denominator: int) -> Operation:
    d = element.shape[0]
    return Operation(element[:, :d], tuple(Fraction(int(n), denominator) for n in element[:, d]))


def _products(left: IntArray, right: IntArray, denominator: int) -> IntArray:
    """All left∘right: R R', R t' + t; (n, d, d+1), (m, d, d+1) -> (n, m, d, d+1)."""
    d = left.shape[1]
    made = left[:, None, :, :d] @ right[None]
    made[..., d] = (made[..., d] + left[:, None, :, d]) % denominator
    return np.asarray(made)


def _keys(elements: IntArray) -> list[bytes]:
    """Each element (..., d, d+1) as bytes, to be looked up in a set or a dict."""
    flat = np.ascontiguousarray(elements, dtype=np.int64).reshape(-1, elements.shape[-2] * elements.shape[-1])
    made: list[bytes] = flat.view(f"V{flat.itemsize * flat.shape[1]}")[:, 0].tolist()
    return made


def _distinct(elements: IntArray) -> IntArray:
    """Each element once, in the order of first appearance."""
    kept = b"".join(dict.fromkeys(_keys(elements)))
    return np.frombuffer(kept, dtype=np.int64).reshape(-1, *elements.shape[1:])


def _with_identity_first(elements: IntArray, dimension: int) -> IntArray:
    identity = np.eye(dimension, dimension + 1, dtype=np.int64)
    others = ~np.all(elements == identity, axis=(1, 2))
    return np.concatenate([identity[None], elements[others]])


def _generated(given: IntArray, denominator: int, texts: Sequence[str]) -> IntArray:
    """The group generated; refuses at the first operation with which it grows beyond the largest."""
    d = given.shape[1]
    elements = np.eye(d, d + 1, dtype=np.int64)[None]
    known = {elements[0].tobytes()}
    generators: list[IntArray] = []
    for row, one in enumerate(given):
        if one.tobytes() in known:
            continue
        generators.append(one)
        size = 0
        while len(elements) != size:
            size = len(elements)
            made = _products(elements, np.stack(generators), denominator)
            elements = _distinct(np.concatenate([elements, made.reshape(-1, d, d + 1)]))
            # Entries are bounded as well, so that the products of an endless group cannot overflow.
            if len(elements) > MOST_OPERATIONS or np.abs(elements[..., :d]).max() > LARGEST_COEFFICIENT:
                raise InputError(
                    ("operations", row),
                    f"'{texts[row]}', together with those before it, does not generate a group of at most "
                    f"{MOST_OPERATIONS} operations",
                    "correct this operation or those before it",
                )
        known = set(_keys(elements))
    return elements


def _require_closed(elements: IntArray, denominator: int) -> None:
    """Every product is among the elements (n, d, d+1), and none comes twice.

    A finite set that is closed under products holds the inverses too.
    """
    known = set(_keys(elements))
    if len(known) != len(elements):
        raise InputError("operations", "list an operation twice", "list each operation once")
    made = _products(elements, elements, denominator)
    lacking = next((place for place, key in enumerate(_keys(made)) if key not in known), None)
    if lacking is not None:
        left, right = divmod(lacking, len(elements))
        first, second, product = (
            format_operation(_operation(one, denominator))
            for one in (elements[left], elements[right], made[left, right])
        )
        raise InputError(
            ("operations", right),
            f"'{first}' after '{second}' is '{product}', which the list lacks",
            "add the operations that are missing, or ask for the list to be completed",
        )
