"""Amplitudes of orders as a request gives them."""

from __future__ import annotations

from engine.films.orders import FilmOrders
from service.problems import located
from service.schemas.film_models import OrdersIn


def orders_of(given: OrdersIn, place: tuple[str | int, ...]) -> FilmOrders:
    """The engine's orders.

    Raises
    ------
    Problem
        Pointing to the place in the body.
    """
    with located(*place):
        return FilmOrders.of(
            given.period,
            given.order,
            given.amplitude,
            given.sigma,
            period_sigma=given.period_sigma,
            scale="absolute" if given.absolute else "arbitrary",
            unit=given.unit,
        )
