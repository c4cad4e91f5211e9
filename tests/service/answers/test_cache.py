from __future__ import annotations

from hypothesis import given
from hypothesis import strategies as st

from service.answers.cache import OVERHEAD, Cache, Kept

MOST = 100_000


def kept(size):
    """An answer that costs so many bytes."""
    return Kept(memoryview(bytes(size - OVERHEAD)), "x/y", {}, 0.1)


def test_an_answer_is_kept():
    cache = Cache(MOST)
    answer = kept(10_000)
    assert cache.get("a") is None
    cache.put("a", answer)
    assert cache.get("a") is answer
    assert (cache.hits, cache.misses, cache.bytes) == (1, 1, 10_000)


def test_the_least_recently_used_goes_first():
    cache = Cache(MOST)
    for name in "abcd":
        cache.put(name, kept(25_000))
    cache.get("a")
    cache.put("e", kept(25_000))
    assert [name for name in "abcde" if cache.get(name)] == ["a", "c", "d", "e"]


def test_an_answer_that_would_drive_out_all_others_is_not_kept():
    cache = Cache(MOST)
    cache.put("a", kept(int(cache.largest) + 1))
    assert cache.get("a") is None
    assert cache.bytes == 0


def test_codings_count():
    cache = Cache(MOST)
    answer = kept(10_000)
    cache.put("a", answer)
    answer.coded["gzip"] = bytes(5000)
    cache.put("a", answer)
    assert cache.bytes == 15_000
    answer.coded["zstd"] = bytes(20_000)
    cache.put("a", answer)
    assert (cache.bytes, cache.get("a")) == (0, None)


@given(st.lists(st.tuples(st.integers(0, 5), st.integers(OVERHEAD, 30_000)), max_size=40))
def test_the_bound_holds_and_the_count_is_right(puts):
    cache = Cache(MOST)
    for name, size in puts:
        cache.put(str(name), kept(size))
        held = [found for name in range(6) if (found := cache.get(str(name)))]
        assert cache.bytes == sum(one.size for one in held) <= MOST


def test_many_small_answers_are_bounded_too():
    cache = Cache(MOST)
    for number in range(1000):
        cache.put(str(number), kept(OVERHEAD))
    assert sum(cache.get(str(number)) is not None for number in range(1000)) == MOST // OVERHEAD
