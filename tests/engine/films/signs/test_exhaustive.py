import numpy as np
import pytest

from engine.films.signs.exhaustive import search, sign_table, work_bytes
from tests.engine.films.signs.problems import EVERYTHING, POSITIONS, SHAPE, all_signs, problem

CRITERIA = [EVERYTHING, SHAPE, POSITIONS]


def plain(terms, given):
    """Every sign set that agrees with the given signs, and its score by the terms themselves."""
    signs = all_signs(terms.count)
    signs = signs[((signs == given) | (given == 0)).all(axis=1)]
    return signs, terms.scores(signs)


def compare(found, signs, scores, free):
    kept = found.scores.size
    order = np.argsort(scores, kind="stable")[:kept]
    np.testing.assert_allclose(found.scores, scores[order], rtol=1e-9, atol=1e-9)
    if np.diff(np.sort(scores)[: kept + 1]).min(initial=1.0) > 1e-9:
        np.testing.assert_array_equal(found.signs, signs[order])
    share = np.exp(0.5 * (scores.min() - scores))
    assert found.total == pytest.approx(share.sum(), rel=1e-5)
    for place in free:
        for side, sign in enumerate((-1, 1)):
            here = signs[:, place] == sign
            assert found.support[side, place] == pytest.approx(share[here].sum(), rel=1e-5, abs=1e-5)
            expected = scores[here].min()
            if expected <= scores.min() + found.reach:
                assert found.least[side, place] == pytest.approx(expected, rel=1e-9, abs=1e-9)
            else:
                assert found.least[side, place] > scores.min() + found.reach


@pytest.mark.parametrize("criteria", CRITERIA, ids=["everything", "shape", "positions"])
@pytest.mark.parametrize("count", [1, 2, 5, 9])
def test_all_sign_sets_are_ranked_as_by_enumeration(criteria, count):
    _, terms = problem(count, 10 + count, criteria)
    given = np.zeros(count, dtype=np.int64)
    found = search(terms, given, best=1 << count)
    assert found.looked_at == 1 << count == found.scores.size
    assert found.exhaustive
    compare(found, *plain(terms, given), range(count))


@pytest.mark.parametrize("criteria", CRITERIA, ids=["everything", "shape", "positions"])
@pytest.mark.parametrize("threads", [1, 2])
def test_dismissing_loses_nothing_that_matters(criteria, threads):
    """So many orders that there are several blocks, and most of the sets are dismissed."""
    _, terms = problem(16, 5, criteria, missing=(7,))
    given = np.zeros(16, dtype=np.int64)
    given[[1, 9]] = -1, 1
    found = search(terms, given, best=6, threads=threads)
    assert found.looked_at == 1 << 14
    compare(found, *plain(terms, given), np.flatnonzero(given == 0))
    assert (found.signs[:, [1, 9]] == [-1, 1]).all()


def test_signs_may_all_be_given():
    _, terms = problem(3, 5, EVERYTHING)
    given = np.array([1, -1, 1])
    found = search(terms, given, best=4)
    assert found.signs.tolist() == [[1, -1, 1]]
    assert found.scores[0] == pytest.approx(terms.scores(given[None])[0])
    assert found.total == pytest.approx(1)


def test_progress_ends_with_all():
    _, terms = problem(16, 5, SHAPE)
    seen = []
    search(terms, np.zeros(16, dtype=np.int64), best=1, progress=lambda done, total: seen.append((done, total)))
    assert seen[-1] == (1 << 16, 1 << 16)
    assert len(seen) > 1
    assert np.all(np.diff([done for done, _ in seen]) > 0)


def test_codes_count_down_from_all_plus():
    assert sign_table(2).tolist() == [[1, 1], [1, -1], [-1, 1], [-1, -1]]
    assert sign_table(3, 5, 7).tolist() == [[-1, 1, -1], [-1, -1, 1]]


def test_memory_does_not_grow_with_the_number_of_sign_sets():
    """2^24 sign sets in hardly more than the memory of 2^20."""
    _, terms = problem(24, 5, EVERYTHING)
    assert work_bytes(terms, 24, 2) < 1.1 * work_bytes(terms, 20, 2)
    assert work_bytes(terms, 24, 2) < 64 * 2**20
