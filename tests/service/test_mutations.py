"""Good requests spoilt at random places: any answer will do but a 500 or one with holes.

The worker may not die either; so the requests go to a real service and not through this process.
"""

from __future__ import annotations

import copy
import json
import math
import random

import pytest

from service.schemas.products import PRODUCTS
from tests.service import bodies
from tests.service.conftest import worker_processes

SEEDS = range(12)
ROUNDS = 40
ODDITIES = [
    None, True, False, 0, 1, -1, 2, 0.5, -0.0, 1e-300, 1e300, -1e300, 1e8, 1e-9, 2**31, 2**53, 2**63, 2**64 - 1,
    -(2**63), 10**30, 90, 179.999999, 1e-5, "", "none", "lateral", "\u0000", "x" * 3000, [], [[]], [0], [1, 0, 0],
    [0, 0, 0], {}, [None], [[1, 2, 3]] * 3, [1e300] * 3, {"kind": "gaussian", "b": 1e300},
    {"kind": "gaussian", "b": 1e-300}, {"kind": "ball", "radius": 1e8}, {"kind": "lateral", "normal": [0, 0, 2**20]},
    {"d_min": 1e300}, {"d_max": 1e-300},
    {"vectors": [[1e7, 0, 0], [0, 1e7, 0], [0, 0, 1e7]]}, {"vectors": [[0.1, 0, 0], [0, 0.1, 0], [0, 0, 0.1]]},
]  # fmt: skip


def places(value, path=()):
    """The way to every member and element."""
    if path:
        yield path
    inner = value.items() if isinstance(value, dict) else enumerate(value) if isinstance(value, list) else ()
    for key, one in inner:
        yield from places(one, (*path, key))


def spoilt(body, chance):
    """A body with one or two of its places changed, added or removed."""
    made = json.loads(json.dumps(body))
    known = sorted({name for model in PRODUCTS.values() for name in model.model_fields} | {"from", "to"})
    for _ in range(chance.randint(1, 2)):
        # A set is mostly columns; a place of any kind shall be as likely as one in them.
        found = sorted(places(made), key=str)
        length = chance.choice(sorted({len(path) for path in found}))
        path = chance.choice([path for path in found if len(path) == length])
        place = made
        for key in path[:-1]:
            place = place[key]
        action = chance.random()
        if action < 0.1:
            del place[path[-1]]
        elif action < 0.2:
            made[chance.choice(known)] = copy.deepcopy(chance.choice(ODDITIES))
        elif action < 0.8 and isinstance(place[path[-1]], int | float) and not isinstance(place[path[-1]], bool):
            place[path[-1]] = place[path[-1]] * chance.choice([-1, 2, 1e-8, 1e3, 1e7, 1e12, 1e100, 1e300])
            if not math.isfinite(place[path[-1]]):
                place[path[-1]] = 0
        else:
            place[path[-1]] = copy.deepcopy(chance.choice(ODDITIES))
        if not made:
            break
    return made


def holes(value):
    """Whether some number of an answer's values is none."""
    if isinstance(value, dict):
        return any(map(holes, value.values()))
    return any(map(holes, value)) if isinstance(value, list) else value is None


@pytest.mark.parametrize("seed", SEEDS)
def test_spoilt_requests(small_service, small_client, seed):
    chance = random.Random(seed)
    workers = worker_processes(small_service)
    requests = [*bodies.GOOD.items(), ("slice", bodies.PLANE), ("grid", bodies.BOX)]
    statuses = set()
    for _ in range(ROUNDS):
        product, body = chance.choice(requests)
        body = spoilt(body, chance)
        answer = small_client.post(f"/v1/{product}", json=body)
        assert answer.status_code in (200, 400, 422), (product, body, answer.text)
        statuses.add(answer.status_code)
        if answer.status_code == 200:
            told = answer.json()
            assert not holes(told["values"]), (product, body)
            assert not holes({name: told["summary"][name] for name in ("minimum", "maximum", "mean", "rms")})
    assert statuses >= {200, 422}
    assert worker_processes(small_service) == workers
