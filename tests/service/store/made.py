"""Small sets as the store keeps them."""

from __future__ import annotations

import numpy as np

from service.parts import Part
from service.schemas.coefficient_set import CoefficientSetIn
from service.store.content import Content, content_of
from service.store.records import Facts, Labels

FACTS = Facts(kind="columns", file="", dimension=1, rows=3, coefficients=4, d_min=2.5, d_max=10.0, unit="e/Å³")


def content(seed: int = 0, rows: int = 3) -> Content:
    """A layer stack with random amplitudes."""
    rng = np.random.default_rng(seed)
    return content_of(
        CoefficientSetIn.model_validate(
            {
                "cell": {"period": 10.0},
                "values": "structure_factor",
                "l": list(range(1, rows + 1)),
                "amplitude": rng.uniform(1, 9, rows).tolist(),
                "phase_deg": [None, *[0.0] * (rows - 1)],
                "unit": "e/Å³",
            }
        )
    )


def file_content(data: bytes = b"h,k,l,intensity\n1,0,0,5\n", name: str = "film.csv") -> Content:
    """A file of reflections."""
    part = Part("text/csv", data, name)
    given = {"values": "structure_factor", "cell": {"period": 10.0}, "reflections": part}
    return content_of(CoefficientSetIn.model_validate(given))


def keep(sets, seed: int = 0, name: str = "a film", tags: tuple[str, ...] = ()):
    return sets.keep(content(seed), Labels(name=name, tags=tags), FACTS, b'{"warnings":[]}')
