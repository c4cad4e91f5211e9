from __future__ import annotations

import json
import subprocess
import sys

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays

from service.parts import Part
from service.schemas.coefficient_set import CoefficientSetIn
from service.store.content import Content, Damaged, content_of, stored_set
from tests.service import bodies
from tests.service.store.made import content, file_content

anything = arrays(np.float64, st.integers(1, 20), elements=st.floats(width=64))


@given(anything)
def test_columns_come_back_bit_for_bit(column):
    given_set = CoefficientSetIn.model_validate(
        {"cell": {"period": 9.0}, "values": "density_coefficient", "l": column, "real": column, "imag": column}
    )
    back = content_of(given_set).columns()
    assert set(back) == {"l", "real", "imag"}
    for name in back:
        assert back[name].tobytes() == column.tobytes()


@pytest.mark.parametrize("body", [bodies.FILM, bodies.CRYSTAL, bodies.SHEET, bodies.ABSORBING])
def test_a_set_comes_back_as_it_was(body):
    given_set = CoefficientSetIn.model_validate(body)
    back = stored_set(content_of(given_set))
    assert content_of(back) == content_of(given_set)
    for name in CoefficientSetIn.model_fields:
        np.testing.assert_array_equal(getattr(back, name), getattr(given_set, name))


def test_the_name_does_not_depend_on_how_a_set_is_written():
    spelled = {"density": "real", "scale_sigma": 0, "symmetry": None}
    reordered = dict(reversed(bodies.CRYSTAL.items()))
    names = {content_of(CoefficientSetIn.model_validate({**one, **spelled})).id for one in (bodies.CRYSTAL, reordered)}
    assert names == {content_of(CoefficientSetIn.model_validate(bodies.CRYSTAL)).id}


def test_the_name_is_the_same_in_another_process():
    code = (
        "import json, sys; from service.schemas.coefficient_set import CoefficientSetIn as C;"
        "from service.store.content import content_of as c;"
        "print(c(C.model_validate(json.load(sys.stdin))).id)"
    )
    done = subprocess.run(
        [sys.executable, "-c", code], input=json.dumps(bodies.CRYSTAL), capture_output=True, text=True, check=True
    )
    assert done.stdout.strip() == content_of(CoefficientSetIn.model_validate(bodies.CRYSTAL)).id


def changes():
    whole = content()
    for name, part in whole.parts.items():
        yield name, {**whole.parts, name: Part(part.media_type, part.data[:-1] + b"\x01", part.name)}
        yield f"without {name}", {other: one for other, one in whole.parts.items() if other != name}
    amplitude, phase = whole.parts["amplitude"], whole.parts["phase_deg"]
    yield "exchanged", {**whole.parts, "amplitude": phase, "phase_deg": amplitude}


@pytest.mark.parametrize("parts", [one for _, one in changes()], ids=[name for name, _ in changes()])
def test_any_change_is_noticed(parts):
    whole = content()
    changed = Content(parts)
    assert changed.id != whole.id
    with pytest.raises(Damaged):
        changed.checked(whole.id)
    assert whole.checked(whole.id) is whole


def test_a_file_is_kept_as_it_is():
    made = file_content(b"h,k,l,intensity\r\n1,0,0,5\r\n", "run 7.csv")
    assert (made.kind, made.file) == ("reflections", "run 7.csv")
    back = stored_set(made)
    assert back.reflections == Part("text/csv", b"h,k,l,intensity\r\n1,0,0,5\r\n", "run 7.csv")
    assert made.bytes == sum(len(part.data) for part in made.parts.values())
    assert made.id == file_content(b"h,k,l,intensity\r\n1,0,0,5\r\n", "run 8.csv").id
    assert made.id != file_content(b"h,k,l,intensity\r\n1,0,0,6\r\n", "run 7.csv").id
