"""The page in a real browser, before a real service."""

from __future__ import annotations

import os
import re
import time
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, NoReturn

import httpx
import pytest

from tests import demos
from tests.service.conftest import alone
from tests.serving import Served

CHROMIUM = Path(os.environ.get("TEST_CHROMIUM", "/usr/bin/chromium"))
AXE = Path(os.environ.get("TEST_AXE", "axe.min.js"))
"""Read here, for no test sees variables with our prefix."""
ARGUMENTS = [
    "--no-sandbox",
    "--disable-gpu",
    "--enable-unsafe-swiftshader",
    "--disable-quic",
    "--no-first-run",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
]
WAIT = 20_000
"""Milliseconds that anything on the page may take before a test fails."""
SIZES = {"phone": (390, 844), "desk": (1280, 800), "projector": (1920, 1080)}
# The software renderer speaks of its own slowness, and tests read pixels back.
_OF_THE_TEST = re.compile(r"GL Driver Message|Canvas2D: Multiple readback operations")


def missing(what: str) -> NoReturn:
    """Skip for want of something; where everything must be there, fail."""
    if os.environ.get("CI"):
        pytest.fail(f"{what}, and CI is set")
    pytest.skip(what)


@dataclass
class Look:
    """A page, and what its browser complained of.

    Attributes
    ----------
    page : playwright Page
    address : str
        Of the service.
    complaints : list of str
        Errors and warnings of the console, of the policy, and of scripts.
    expected : list of str
        Complaints with one of these in them are part of the test.
    """

    page: Any
    address: str
    complaints: list[str] = field(default_factory=list)
    expected: list[str] = field(default_factory=list)

    def open(self, fragment: str = "") -> Any:
        """Go to a view, and wait until nothing is under way."""
        self.page.goto(f"{self.address}/#{fragment}")
        self.until("document.body.dataset.view")
        self.settle()
        return self.page

    def until(self, expression: str, arg: object = None) -> None:
        """Wait for an expression to become true; asked from outside, for within the page the policy forbids it."""
        end = time.monotonic() + WAIT / 1000
        while not self.page.evaluate(expression, arg):
            assert time.monotonic() < end, f"never came true: {expression} with {arg!r}"
            self.page.wait_for_timeout(25)

    def settle(self) -> None:
        """Wait until requests are answered and pictures are drawn."""
        self.page.wait_for_load_state("networkidle")
        self.until("!document.querySelector('[aria-busy=true]')")

    def state(self) -> dict[str, str]:
        """Members of the fragment."""
        return dict(httpx.QueryParams(self.page.evaluate("location.hash.slice(1)")))


@pytest.fixture(scope="package")
def served(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Served]:
    with alone(data_dir=tmp_path_factory.mktemp("page"), compute_workers=2, compute_threads=1) as made:
        yield made


@pytest.fixture(scope="package")
def sets(served: Served) -> dict[str, str]:
    """Ids of the demonstrations, kept in the service: stack, planar, crystal."""
    with httpx.Client(base_url=served.address, timeout=60) as client:
        return {
            name.removesuffix(".json"): client.post("/v1/sets", json=demo).raise_for_status().json()["id"]
            for name, demo in demos.build().items()
        }


# Of this package alone: as long as it lives no other event loop can be run in this thread.
@pytest.fixture(scope="package")
def browser() -> Iterator[Any]:
    try:
        from playwright.sync_api import sync_playwright
    except ImportError:
        missing("playwright is not installed (pip install playwright)")
    if not CHROMIUM.exists():
        missing(f"there is no browser at {CHROMIUM}; TEST_CHROMIUM names another")
    with sync_playwright() as playwright:
        made = playwright.chromium.launch(executable_path=str(CHROMIUM), args=ARGUMENTS)
        yield made
        made.close()


@pytest.fixture
def look_at(browser: Any) -> Iterator[Callable[..., Look]]:
    """Make pages; at the end nothing may have been complained of."""
    made: list[tuple[Any, Look]] = []

    def make(address: str, size: str = "desk", theme: str = "light", **options: Any) -> Look:
        width, height = SIZES[size]
        context = browser.new_context(
            viewport={"width": width, "height": height},
            color_scheme=theme,
            reduced_motion="reduce",
            accept_downloads=True,
            **options,
        )
        context.set_default_timeout(WAIT)
        page = context.new_page()
        seen = Look(page, address)
        page.on("console", lambda told: _console(seen, told))
        page.on("pageerror", lambda fault: seen.complaints.append(f"script: {fault}"))
        made.append((context, seen))
        return seen

    yield make
    faults = []
    for context, seen in made:
        faults += [told for told in seen.complaints if not any(part in told for part in seen.expected)]
        context.close()
    assert not faults, "\n".join(faults)


def _console(seen: Look, told: Any) -> None:
    if told.type in ("error", "warning") and not _OF_THE_TEST.search(told.text):
        where = told.location.get("url", "")
        seen.complaints.append(f"{told.type}: {told.text} {where}")


@pytest.fixture
def look(look_at: Callable[..., Look], served: Served) -> Look:
    """A desk's page before the service."""
    return look_at(served.address)
