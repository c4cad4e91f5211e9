from dataclasses import replace

import numpy as np
import pytest

from engine.errors import TooLargeError
from engine.features.extrema import find_extrema
from engine.features.geometry import distances
from engine.features.neighbours import neighbours
from engine.features.regions import ball_region
from engine.symmetry import plane_group, space_group
from engine.symmetry.operations import parse_operation
from tests.engine.features.densities import random_set, symmetric_set
from tests.strategies import refusal_of


def plain_neighbours(found, places, cutoff, reach=4):
    """(row, distance) of everything within the cutoff, image by image."""
    lattice, d = found.coefficients.lattice, found.coefficients.lattice.dimension
    cells = np.stack(np.meshgrid(*[np.arange(-reach, reach + 1)] * d, indexing="ij"), axis=-1).reshape(-1, d)
    made = []
    for row, x in enumerate(found.fractional):
        length = np.linalg.norm((places[:, None] + cells - x) @ lattice.vectors, axis=2)
        made += [(row, one) for one in np.sort(length[(length <= cutoff) & (length > 1e-6)])]
    return made


@pytest.mark.parametrize(
    "known",
    [
        symmetric_set(plane_group("p4mm"), 1, 1.5),
        symmetric_set(space_group(19), 2, 1.6, 5.0, count=2),
        symmetric_set(space_group(136), 2, 2.2, 5.0),
        random_set(1, 5)[0],
        random_set(3, 5)[0],
    ],
    ids=["p4mm", "P212121", "P42/mnm", "stack", "P1"],
)
def test_all_within_a_cutoff(known):
    known = replace(known, sigma=np.full(known.count, 0.02 * np.abs(known.values).max()))
    found = find_extrema(known)
    plain = find_extrema(replace(known, group=None))
    cutoff = 0.75 * float(known.lattice.lengths.max())
    made = neighbours(found, cutoff)
    expected = plain_neighbours(found, plain.fractional, cutoff)
    assert len(made.value) == len(expected) > 0
    assert made.first.tolist() == [row for row, _ in expected]
    np.testing.assert_allclose(made.value, [length for _, length in expected], atol=1e-6)
    for row, text in enumerate(made.operation):
        # The words lead from the second as listed to the end of the distance.
        d = known.lattice.dimension
        operation = parse_operation(text, d)
        image = operation.rotation @ found.fractional[made.second[row]] + _exact(text, d)
        vector = (image - found.fractional[made.first[row]]) @ known.lattice.vectors
        np.testing.assert_allclose(vector, made.vector[row], atol=1e-8)
    last = found.count - 1
    one = neighbours(found, cutoff, rows=[last])
    np.testing.assert_allclose(one.value, made.value[made.first == last])


def _exact(text, dimension):
    """The translation that is written, not reduced to the cell."""
    names = {1: "z", 2: "xy", 3: "xyz"}[dimension]
    return np.array([eval(part, {}, dict.fromkeys(names, 0)) for part in text.split(",")], dtype=float)


def test_sigmas_with_a_group_are_those_without_it_but_for_the_errors_related():
    """The same distances between positions in full, with the errors of symmetric coefficients shared."""
    known = symmetric_set(space_group(19), 2, 1.6, 5.0, count=2)
    found = find_extrema(known)
    made = neighbours(found, 4.0, rows=[0])
    whole = find_extrema(known, region=ball_region(known.lattice, found.fractional[0], 4.0))
    centre = int(np.linalg.norm(whole.cartesian - found.cartesian[0], axis=1).argmin())
    others = [row for row in range(whole.count) if row != centre]
    plain = distances(whole, [(centre, row) for row in others], translations=np.zeros((len(others), 3), dtype=int))
    order = np.lexsort((np.round(plain.sigma, 9), np.round(plain.value, 6)))
    mine = made.first == 0
    rank = np.lexsort((np.round(made.sigma[mine], 9), np.round(made.value[mine], 6)))
    np.testing.assert_allclose(made.value[mine][rank], plain.value[order], atol=1e-7)
    np.testing.assert_allclose(made.sigma[mine][rank], plain.sigma[order], rtol=1e-6, atol=1e-12)


def test_refusals():
    known = random_set(2, 5)[0]
    found = find_extrema(known)
    assert refusal_of(lambda: neighbours(found, 0.0)).path == ("cutoff",)
    assert refusal_of(lambda: neighbours(found, 3.0, rows=[found.count])).path == ("rows",)
    with pytest.raises(TooLargeError):
        neighbours(found, 1e5)
    part = find_extrema(known, region=ball_region(known.lattice, [0.5, 0.5], 9.0))
    assert refusal_of(lambda: neighbours(part, 3.0)).path == ("extrema",)
