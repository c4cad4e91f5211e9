from dataclasses import replace

import pytest

from engine.errors import InputError
from engine.films.signs.criteria import (
    Criteria,
    Flat,
    KnownDensity,
    KnownTotal,
    LeastStructure,
    NonNegative,
    check_criteria,
)
from tests.engine.films.signs.problems import EVERYTHING, POSITIONS

NAN = float("nan")


def test_every_criterion_has_a_name_in_the_order_of_its_part():
    assert EVERYTHING.names == (
        "non-negative",
        "flat 1",
        "flat 2",
        "density 1",
        "density 2",
        "total 1",
        "least structure",
    )
    assert Criteria().names == ()


def test_good_criteria_pass():
    check_criteria(EVERYTHING, 42.0)
    check_criteria(POSITIONS, 42.0)
    check_criteria(Criteria(least_structure=LeastStructure()), 42.0)
    check_criteria(Criteria(flat=(Flat(start=-21.0, stop=21.0),)), 42.0)


DENSITY = KnownDensity(value=1.0, sigma=0.1, start=0.0, stop=2.0)
TOTAL = KnownTotal(value=1.0, sigma=0.1, start=0.0, stop=2.0)


@pytest.mark.parametrize(
    ("criteria", "path"),
    [
        (Criteria(), ("criteria",)),
        (Criteria(mean=1.0), ("criteria",)),
        (Criteria(non_negative=NonNegative()), ("criteria", "mean")),
        (Criteria(densities=(DENSITY,)), ("criteria", "mean")),
        (Criteria(totals=(TOTAL,)), ("criteria", "mean")),
        (Criteria(mean=NAN, non_negative=NonNegative()), ("criteria", "mean")),
        (Criteria(mean=1.0, mean_sigma=-0.1, non_negative=NonNegative()), ("criteria", "mean_sigma")),
        (Criteria(mean=1.0, non_negative=NonNegative(floor=NAN)), ("criteria", "non_negative", "floor")),
        (Criteria(mean=1.0, non_negative=NonNegative(weight=0.0)), ("criteria", "non_negative", "weight")),
        (Criteria(least_structure=LeastStructure(weight=-1.0)), ("criteria", "least_structure", "weight")),
        (Criteria(flat=(Flat(start=0, stop=1), Flat(start=3.0, stop=3.0))), ("criteria", "flat", 1, "stop")),
        (Criteria(flat=(Flat(start=0.0, stop=42.1),)), ("criteria", "flat", 0)),
        (Criteria(flat=(Flat(start=NAN, stop=1.0),)), ("criteria", "flat", 0, "start")),
        (Criteria(flat=(Flat(start=0.0, stop=1.0, sigma=-1.0),)), ("criteria", "flat", 0, "sigma")),
        (Criteria(flat=(Flat(start=0.0, stop=1.0, weight=0.0),)), ("criteria", "flat", 0, "weight")),
        (Criteria(mean=1.0, densities=(replace(DENSITY, sigma=0.0),)), ("criteria", "densities", 0, "sigma")),
        (Criteria(mean=1.0, densities=(replace(DENSITY, value=NAN),)), ("criteria", "densities", 0, "value")),
        (
            Criteria(mean=1.0, densities=(replace(DENSITY, start=NAN, stop=None),)),
            ("criteria", "densities", 0, "start"),
        ),
        (Criteria(mean=1.0, totals=(TOTAL, replace(TOTAL, stop=-1.0))), ("criteria", "totals", 1, "stop")),
        (Criteria(mean=1.0, totals=(replace(TOTAL, weight=0.0),)), ("criteria", "totals", 0, "weight")),
    ],
)
def test_what_means_nothing_is_refused_where_it_stands(criteria, path):
    with pytest.raises(InputError) as caught:
        check_criteria(criteria, 42.0)
    assert caught.value.path == path
