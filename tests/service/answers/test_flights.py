from __future__ import annotations

import asyncio

import pytest

from service.answers.flights import Flights


def test_a_hundred_clients_cost_one_computation():
    async def scenario():
        flights: Flights[object] = Flights()
        begun = []

        async def compute():
            begun.append(1)
            await asyncio.sleep(0.01)
            return object()

        found = await asyncio.gather(*(flights.share("k", compute) for _ in range(100)))
        assert len(begun) == 1
        assert len({id(one) for one in found}) == 1
        await flights.share("k", compute)
        assert len(begun) == 2, "one that has landed is not under way"

    asyncio.run(scenario())


def test_different_keys_are_computed_apart():
    async def scenario():
        flights: Flights[str] = Flights()

        def compute(name):
            async def inner():
                await asyncio.sleep(0)
                return name

            return inner

        assert await asyncio.gather(*(flights.share(name, compute(name)) for name in "abc")) == ["a", "b", "c"]

    asyncio.run(scenario())


def test_a_fault_reaches_all_and_is_not_kept():
    async def scenario():
        flights: Flights[int] = Flights()

        async def failing():
            await asyncio.sleep(0.01)
            raise ValueError("no")

        async def good():
            return 7

        found = await asyncio.gather(*(flights.share("k", failing) for _ in range(3)), return_exceptions=True)
        assert [type(one) for one in found] == [ValueError] * 3
        assert await flights.share("k", good) == 7

    asyncio.run(scenario())


def test_a_computation_lasts_as_long_as_someone_waits():
    async def scenario():
        flights: Flights[int] = Flights()
        ended = []

        async def compute():
            try:
                await asyncio.sleep(0.05)
            except asyncio.CancelledError:
                ended.append("cancelled")
                raise
            return 7

        first, second = (asyncio.ensure_future(flights.share("k", compute)) for _ in range(2))
        await asyncio.sleep(0.01)
        first.cancel()
        assert await second == 7
        assert ended == []
        only = asyncio.ensure_future(flights.share("k", compute))
        await asyncio.sleep(0.01)
        only.cancel()
        with pytest.raises(asyncio.CancelledError):
            await only
        await asyncio.sleep(0.01)
        assert ended == ["cancelled"]

    asyncio.run(scenario())


def test_who_comes_after_the_last_has_left_starts_anew():
    async def scenario():
        flights: Flights[int] = Flights()
        begun = []

        async def compute():
            begun.append(1)
            await asyncio.sleep(0.02)
            return len(begun)

        gone = asyncio.ensure_future(flights.share("k", compute))
        await asyncio.sleep(0.005)
        gone.cancel()
        await asyncio.sleep(0)
        assert await flights.share("k", compute) == 2

    asyncio.run(scenario())


def test_the_end_of_an_old_flight_is_not_that_of_a_new_one():
    async def scenario():
        flights: Flights[int] = Flights()
        begun = []

        async def compute():
            begun.append(1)
            try:
                await asyncio.sleep(0.03)
            except asyncio.CancelledError:
                await asyncio.sleep(0.01)
                raise
            return len(begun)

        gone = asyncio.ensure_future(flights.share("k", compute))
        await asyncio.sleep(0.005)
        gone.cancel()
        await asyncio.sleep(0)
        second = asyncio.ensure_future(flights.share("k", compute))
        await asyncio.sleep(0.02)
        third = asyncio.ensure_future(flights.share("k", compute))
        assert await asyncio.gather(second, third) == [2, 2]

    asyncio.run(scenario())
