from __future__ import annotations

from hypothesis import given
from hypothesis import strategies as st

from service.answers.cache import LARGEST_SHARE, Cache, Kept


def kept(size):
    return Kept(memoryview(bytes(size)), "x/y", {}, 0.1)


def test_an_answer_is_kept():
    cache = Cache(1000)
    answer = kept(100)
    assert cache.get("a") is None
    cache.put("a", answer)
    assert cache.get("a") is answer
    assert (cache.hits, cache.misses, cache.bytes) == (1, 1, 100)


def test_the_least_recently_used_goes_first():
    cache = Cache(1000)
    for name in "abcd":
        cache.put(name, kept(250))
    cache.get("a")
    cache.put("e", kept(250))
    assert [name for name in "abcde" if cache.get(name)] == ["a", "c", "d", "e"]


def test_an_answer_that_would_drive_out_all_others_is_not_kept():
    cache = Cache(1000)
    cache.put("a", kept(int(1000 * LARGEST_SHARE) + 1))
    assert cache.get("a") is None
    assert cache.bytes == 0


def test_codings_count():
    cache = Cache(1000)
    answer = kept(100)
    cache.put("a", answer)
    answer.coded["gzip"] = bytes(50)
    cache.put("a", answer)
    assert cache.bytes == 150
    answer.coded["zstd"] = bytes(200)
    cache.put("a", answer)
    assert (cache.bytes, cache.get("a")) == (0, None)


@given(st.lists(st.tuples(st.integers(0, 5), st.integers(0, 300)), max_size=40))
def test_the_bound_holds_and_the_count_is_right(puts):
    cache = Cache(1000)
    for name, size in puts:
        cache.put(str(name), kept(size))
        held = [found for name in range(6) if (found := cache.get(str(name)))]
        assert cache.bytes == sum(one.size for one in held) <= 1000
