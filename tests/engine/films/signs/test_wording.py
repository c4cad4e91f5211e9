import math

import pytest

from engine.films.signs.wording import Fit, Verdict

GOOD, BAD = Fit(misfit=6.0, expected=5.0), Fit(misfit=60.0, expected=5.0)


def said(margin=12.0, fit=GOOD, in_doubt=(), others=5, exhaustive=True):
    return Verdict(margin=margin, decisive=9.0, in_doubt=in_doubt, others=others, exhaustive=exhaustive, fit=fit)


def test_a_clear_margin_decides():
    assert said().decided
    assert said().words() == "The criteria prefer one sign set: the next scores 12.0 more, 9 being enough."
    assert "among those looked at, which are not all" in said(exhaustive=False).words()
    assert said(margin=9.0).decided


def test_doubt_names_its_orders():
    doubtful = said(margin=2.0, in_doubt=(3, 7))
    assert not doubtful.decided
    assert doubtful.words() == (
        "The data do not decide: the next sign set scores only 2.0 more, less than 9. In doubt is the sign of orders "
        "3, 7. The other 5 are the same in all sets within that margin."
    )
    assert "order 3. No sign is the same" in said(margin=2.0, in_doubt=(3,), others=0).words()


def test_a_contradiction_decides_nothing():
    assert not said(fit=BAD).decided
    assert "contradicts the criteria: they come to 60 where right signs would come to about 5" in said(fit=BAD).words()


def test_no_other_sign_set_leaves_nothing_to_decide():
    assert said(margin=math.nan).decided
    assert "only one sign set" in said(margin=math.nan).words()


@pytest.mark.parametrize(("misfit", "contradicts"), [(26.0, False), (27.0, True)])
def test_what_counts_as_contradiction(misfit, contradicts):
    """5 + 4·√10 + 9 = 26.6."""
    assert Fit(misfit=misfit, expected=5.0).contradicts is contradicts
