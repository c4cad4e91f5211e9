import pytest

from engine.features.morse import morse


@pytest.mark.parametrize("counts", [(1, 1), (7, 7), (1, 2, 1), (3, 9, 6), (1, 3, 3, 1), (4, 9, 7, 2)])
def test_numbers_that_can_be_all(counts):
    made = morse(counts)
    assert made.counts == counts
    assert made.alternating == 0
    assert made.holds


@pytest.mark.parametrize(
    ("counts", "alternating"), [((2, 1), 1), ((1, 2), -1), ((3, 8, 6), 1), ((1, 3, 3, 2), -1), ((2, 3, 3, 1), 1)]
)
def test_one_is_missing(counts, alternating):
    assert morse(counts).alternating == alternating
    assert not morse(counts).holds


@pytest.mark.parametrize("counts", [(0, 0), (1, 1, 0), (0, 1, 1), (2, 3, 1, 0), (1, 2, 2, 1), (2, 2, 2, 2)])
def test_the_inequalities_are_those_of_a_torus(counts):
    """The alternating sum vanishes, and still a periodic function cannot have so few of a kind."""
    assert morse(counts).alternating == 0
    assert not morse(counts).holds


def test_the_strong_inequalities_say_more_than_the_weak():
    """As many saddles as the weak ones ask for, but three minima need two more saddles to join them."""
    assert not morse((3, 3, 1)).holds
    # Weak inequalities hold, and the sum vanishes; c1 − c0 ≥ 2 does not.
    assert not morse((5, 6, 6, 5)).holds
