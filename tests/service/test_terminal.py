from __future__ import annotations

import numpy as np
import pytest

from engine import Demand, Treatment, evaluate, sampling
from service.encoders.describe import Shown
from service.terminal import COLUMNS, LISTED, ROWS, render
from tests.service import bodies

FILM = bodies.coefficients(bodies.FILM)
CRYSTAL = bodies.coefficients(bodies.CRYSTAL)
ABSORBING = bodies.coefficients(bodies.ABSORBING)


def shown(coefficients, where, treatment=None):
    field = evaluate(coefficients, where, treatment, Demand())
    whole = Shown(product="", kind="density", quantity="value", coefficients=coefficients, field=field)
    return field, render(whole).splitlines()


def test_profile_is_a_chart():
    field, lines = shown(FILM, sampling.line(FILM.lattice, [0], [1], 640))
    chart = lines[:ROWS]
    assert all("┤" in line for line in chart)
    bars = np.array([list(line.partition("┤")[2]) for line in chart])
    assert bars.shape == (ROWS, COLUMNS)
    # The highest column of the chart is where the profile is highest, the lowest is empty.
    heights = (bars != " ").sum(axis=0)
    means = field.values.reshape(COLUMNS, 10).mean(axis=1)
    assert heights[means.argmax()] == ROWS == heights.max()
    assert heights[means.argmin()] == 0
    assert float(chart[0].split("┤")[0]) == pytest.approx(means.max(), rel=1e-3)
    assert float(chart[-1].split("┤")[0]) == pytest.approx(means.min(), rel=1e-3)
    assert lines[ROWS + 1].split() == ["0", "17.4", "Å"]
    assert "e/Å³" in lines[ROWS + 2]


def test_short_profile_has_a_column_for_each_sample():
    _, lines = shown(FILM, sampling.line(FILM.lattice, [0], [1], 5))
    assert len(lines[0].partition("┤")[2]) == 5


def test_flat_profile_is_drawn():
    _, lines = shown(FILM, sampling.line(FILM.lattice, [0], [1], 9, include_end=False), Treatment(sharpen=-1e300))
    assert lines[0].startswith("         0 ┤")


def test_plane_is_shaded_with_its_second_axis_upwards():
    where = sampling.plane(CRYSTAL.lattice, [0, 0, 0], [1, 0, 0], [0, 1, 0], (64, 28))
    field, lines = shown(CRYSTAL, where)
    legend = next(number for number, line in enumerate(lines) if "…" in line)
    picture = lines[:legend]
    assert {len(line) for line in picture} == {2 + COLUMNS}
    # The darkest character sits where the field is highest: across to the right, up to the top.
    across, up = np.unravel_index(field.values.argmax(), field.values.shape)
    row = len(picture) - 1 - int(up * len(picture) / 28)
    assert "█" in picture[row][2 + max(across - 2, 0) : 2 + across + 3]
    assert "edge_1 → to the right, edge_2 ↑ upwards" in lines[legend + 1]


def test_points_are_listed_up_to_a_number():
    positions = np.linspace(0, 1, 3 * (LISTED + 5)).reshape(-1, 3)
    field, lines = shown(CRYSTAL, sampling.points(CRYSTAL.lattice, positions))
    assert sum(line.startswith("  (") for line in lines) == LISTED
    assert "… and 5 more" in lines[LISTED]
    assert float(lines[0].split()[-1]) == pytest.approx(field.values[0], rel=1e-4)


def test_cell_is_a_histogram():
    _, lines = shown(CRYSTAL, sampling.full_cell(CRYSTAL.lattice, (6, 7, 8)))
    assert "distributed" in lines[0]
    assert "█" in lines[1]


@pytest.mark.parametrize("treatment", [Treatment(), Treatment(field="gradient")])
def test_complex_and_vector_fields_are_shown_by_their_size(treatment):
    where = sampling.line(ABSORBING.lattice, [0, 0, 0], [0, 0, 1], 20)
    field, lines = shown(ABSORBING, where, treatment)
    size = np.abs(field.values) if not field.components else np.sqrt((np.abs(field.values) ** 2).sum(axis=1))
    assert float(lines[0].split("┤")[0]) == pytest.approx(size.max(), rel=1e-3)


def test_figures_say_what_was_done():
    field, lines = shown(CRYSTAL.within(d_min=1.5), sampling.full_cell(CRYSTAL.lattice, (4, 5, 6)))
    text = "\n".join(lines)
    assert "4 × 5 × 6 values" in text
    assert f"{field.summed} coefficients summed of 40 rows" in text
    assert f"resolution {field.resolution[0]:.4g} … {field.resolution[1]:.4g} Å" in text
    for sentence in (*field.applied, *field.notes):
        assert f"· {sentence}" in text
    complex_text = "\n".join(shown(ABSORBING, sampling.full_cell(ABSORBING.lattice, (4, 5, 6)))[1])
    assert "i, rms" in complex_text
