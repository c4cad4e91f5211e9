from __future__ import annotations

import itertools
import math

import numpy as np
import pytest

from engine import Columns, InputError, Lattice, TooLargeError, Treatment, assemble, evaluate, sampling
from engine.sampling import box, full_cell
from engine.surfaces import Level, Region, SurfaceTask, perform_surface, prepare_surface
from engine.surfaces import isosurface as module
from engine.synthesis import Demand
from tests.engine.surfaces.shapes import (
    CUBE,
    TRICLINIC,
    from_terms,
    gaussian,
    gyroid,
    radius_to_level,
    rough,
    surface_of,
    wave,
)

RADIUS = 1.5
SPHERE = (4 / 3 * math.pi * RADIUS**3, 4 * math.pi * RADIUS**2)
ORTHORHOMBIC = Lattice.from_parameters(9.0, 10.0, 12.0, 90.0, 90.0, 90.0)
SHAPES = ((20, 24, 24), (40, 45, 48), (80, 90, 96))


@pytest.mark.parametrize("centre", [(0.5, 0.5, 0.5), (0, 0, 0), (0.97, 0.31, 0.5)], ids=["middle", "corner", "face"])
@pytest.mark.parametrize("lattice", [TRICLINIC, ORTHORHOMBIC], ids=["triclinic", "orthorhombic"])
def test_a_gaussian_has_spheres(lattice, centre):
    """Of the radius its level says, in any cell, cut by its faces or not; closer with the square of the step."""
    coefficients = gaussian(lattice, centre=centre)
    errors = []
    for shape in SHAPES:
        made = surface_of(coefficients, shape, radius_to_level(RADIUS), closed=True)
        mesh = made.mesh
        assert mesh.unpaired_edges() == 0
        errors.append((made.volume / SPHERE[0] - 1, mesh.area() / SPHERE[1] - 1))
        # Every vertex but those of caps at its distance, every normal along the radius.
        rim = np.unique(mesh.triangles[~mesh.caps])
        offset = lattice.to_fractional(mesh.vertices[rim]) - centre
        away = lattice.to_cartesian(offset - np.rint(offset))
        distance = np.linalg.norm(away, axis=1)
        step = max(made.region.spacing(lattice))
        assert np.abs(distance - RADIUS).max() < 0.12 * step**2
        cosine = np.einsum("ij,ij->i", away, mesh.normals[rim]) / distance
        assert cosine.min() > 1 - 0.02 * step**2
    for coarse, fine in itertools.pairwise(np.abs(errors)):
        assert (fine < 0.3 * coarse).all()
    assert np.abs(errors[-1]).max() < 0.004


@pytest.mark.parametrize("shape", [(32, 32, 32), (31, 30, 33)])
def test_a_plane_wave_has_two_planes_in_a_cell(shape):
    """Half of the cell lies above the mean, behind two planes of the cell's face, 2·|b × c|."""
    made = surface_of(wave(TRICLINIC), shape, Level("level_rms", 0.0), closed=True)
    _, b, c = TRICLINIC.vectors
    assert made.mesh.unpaired_edges() == 0
    assert made.mesh.area() == pytest.approx(2 * np.linalg.norm(np.cross(b, c)), rel=1e-12)
    # Samples on the level have their vertices 10⁻⁴ of a step beyond them.
    assert made.volume == pytest.approx(TRICLINIC.volume / 2, rel=1.3e-5 if shape[0] % 4 == 0 else 1e-4)
    direction = TRICLINIC.reciprocal[0] / np.linalg.norm(TRICLINIC.reciprocal[0])
    surface = np.unique(made.mesh.triangles[~made.mesh.caps])
    across = made.mesh.normals[surface] @ direction
    np.testing.assert_allclose(np.abs(across), 1, atol=1e-12)
    first = TRICLINIC.to_fractional(made.mesh.vertices[surface])[:, 0]
    # The wave falls at 1/4 and rises at 3/4.
    np.testing.assert_array_equal(np.sign(across), np.where(first < 0.5, 1, -1))


def test_oblique_waves_in_a_skew_cell():
    """(1 1 0): planes |a × c + …|, by the volume of the cell times |G|/2π, two for each repeat."""
    made = surface_of(wave(TRICLINIC, (1, 1, 0)), (48, 48, 48), Level("level", 0.0), closed=True)
    repeat = float(TRICLINIC.spacings(np.array([[1, 1, 0]]))[0])
    assert made.mesh.area() == pytest.approx(2 * TRICLINIC.volume / repeat, rel=2e-3)
    assert made.volume == pytest.approx(TRICLINIC.volume / 2, rel=1e-3)


@pytest.mark.parametrize("lattice", [CUBE, TRICLINIC], ids=["cubic", "triclinic"])
@pytest.mark.parametrize("count", [32, 45])
def test_a_gyroid_halves_its_cell(lattice, count):
    made = surface_of(gyroid(lattice), (count,) * 3, Level("level", 0.0), closed=True)
    assert made.mesh.unpaired_edges() == 0
    assert made.volume == pytest.approx(lattice.volume / 2, rel=2e-4)
    opened = surface_of(gyroid(lattice), (count,) * 3, Level("level", 0.0))
    assert opened.mesh.area() == pytest.approx(made.mesh.area(), rel=1e-12)
    assert opened.volume is None
    assert opened.mesh.cap_area() == 0 < made.mesh.cap_area()


@pytest.mark.parametrize("number", [-1.2, 0.4, 1.5])
def test_volume_against_samples_of_a_finer_grid(number):
    """Flat triangles cut off what is round, in proportion to the square of the step."""
    coefficients = rough()
    fine = evaluate(coefficients, full_cell(TRICLINIC, (200, 200, 200))).values
    level = fine.mean() + number * fine.std()
    share = np.count_nonzero(fine > level) / fine.size
    errors = []
    for count in (48, 96):
        made = surface_of(coefficients, (count,) * 3, Level("level_rms", number), closed=True)
        assert made.mesh.unpaired_edges() == 0
        assert made.level == pytest.approx(level, abs=1e-9)
        assert made.fraction_above == pytest.approx(share, abs=5e-3)
        errors.append(abs(made.volume / TRICLINIC.volume - share) / share)
    assert errors[0] < 0.1
    assert errors[1] < 0.35 * errors[0]


def test_area_against_the_coarea_formula():
    """∫ A(c) dc over a range of levels is ∫ |∇n| dV over where n lies in it (Federer, Trans. AMS 93 (1959) 418)."""
    coefficients = rough()
    levels = np.linspace(-0.5, 2.0, 11)
    areas = [surface_of(coefficients, (72, 72, 72), Level("level_rms", number)).mesh.area() for number in levels]
    grid = full_cell(TRICLINIC, (100, 100, 100))
    values = evaluate(coefficients, grid).values
    slopes = evaluate(coefficients, grid, Treatment(field="gradient_magnitude")).values
    low, high = (values.mean() + number * values.std() for number in (levels[0], levels[-1]))
    inside = (values > low) & (values < high)
    whole = slopes[inside].sum() / values.size * TRICLINIC.volume
    weights = np.array([1, 4, 2, 4, 2, 4, 2, 4, 2, 4, 1]) / 3 * (levels[1] - levels[0]) * values.std()
    assert weights @ areas == pytest.approx(whole, rel=0.01)


def test_normals_are_those_of_the_series():
    coefficients = rough()
    made = surface_of(coefficients, (90, 90, 90), Level("level_rms", 1.0))
    chosen = np.arange(0, len(made.mesh.vertices), 97)
    points = sampling.points(TRICLINIC, made.mesh.vertices[chosen], coordinates="cartesian")
    gradient = evaluate(coefficients, points, Treatment(field="gradient")).values
    cosine = -np.einsum("ij,ij->i", gradient, made.mesh.normals[chosen]) / np.linalg.norm(gradient, axis=1)
    assert np.median(cosine) > 0.9999
    assert (cosine > 0.99).mean() > 0.995


@pytest.mark.parametrize("include_end", [False, True])
def test_a_box_reaches_its_faces(include_end):
    """A box about the Gaussian's centre, cutting the sphere in half along the first edge."""
    coefficients = gaussian(ORTHORHOMBIC)
    grid = box(
        ORTHORHOMBIC,
        [4.5, 3.0, 4.0],
        [[3.0, 0, 0], [0, 4.0, 0], [0, 0, 4.0]],
        (61, 81, 81) if include_end else (60, 80, 80),
        include_end=include_end,
        coordinates="cartesian",
    )
    region = Region.of(grid, include_end=include_end)
    task = SurfaceTask(level=radius_to_level(RADIUS), closed=True)
    made = perform_surface(prepare_surface(coefficients, region, task))
    assert made.mesh.unpaired_edges() == 0
    assert made.volume == pytest.approx(SPHERE[0] / 2, rel=2e-3)
    assert made.mesh.area() == pytest.approx(SPHERE[1] / 2, rel=2e-3)
    assert made.mesh.cap_area() == pytest.approx(math.pi * RADIUS**2, rel=2e-3)
    assert set(made.mesh.vertices[np.unique(made.mesh.triangles[made.mesh.caps]), 0]) == {4.5}


def test_a_left_handed_box_is_not_turned_inside_out():
    grid = box(ORTHORHOMBIC, [2, 3, 4], [[0, 4.0, 0], [5.0, 0, 0], [0, 0, 4.0]], (40, 50, 40), coordinates="cartesian")
    task = SurfaceTask(level=radius_to_level(RADIUS), closed=True)
    made = perform_surface(prepare_surface(gaussian(ORTHORHOMBIC), Region.of(grid), task))
    assert made.volume == pytest.approx(SPHERE[0], rel=5e-3)
    away = made.mesh.vertices - [4.5, 5.0, 6.0]
    assert (np.einsum("ij,ij->i", away, made.mesh.normals) > 0).all()


def test_a_trough_points_into_itself():
    """Below the mean, too, normals point towards lower values; what is above the level is the rest of the cell."""
    coefficients = gaussian(TRICLINIC)
    hole = from_terms(TRICLINIC, coefficients.indices, -coefficients.values)
    made = surface_of(hole, (40, 45, 48), Level("level", -radius_to_level(RADIUS).number), closed=True)
    assert made.volume == pytest.approx(TRICLINIC.volume - SPHERE[0], rel=1e-3)
    inner = np.unique(made.mesh.triangles[~made.mesh.caps])
    away = made.mesh.vertices[inner] - TRICLINIC.to_cartesian(np.full(3, 0.5))
    assert (np.einsum("ij,ij->i", away, made.mesh.normals[inner]) < 0).all()


@pytest.mark.parametrize("field", ["laplacian", "gradient_magnitude", "autocorrelation", "response"])
def test_other_fields(field):
    made = surface_of(rough(), (80, 80, 80), Level("level_rms", 1.0), closed=True, treatment=Treatment(field=field))
    assert made.mesh.unpaired_edges() == 0
    assert made.volume / TRICLINIC.volume == pytest.approx(made.fraction_above, abs=0.01)


SIGMA = assemble(
    TRICLINIC,
    Columns(
        indices=[[0, 1, 0, 1], [0, 0, 1, 1], [0, 0, 1, 0]],
        real=[2.0, 1.0, 0.0, 0.4],
        imag=[0.0, 0.0, 0.5, 0.2],
        sigma=[0.02, 0.1, 0.2, 0.05],
    ),
    values="density_coefficient",
)


def test_levels_in_uncertainties():
    made = surface_of(SIGMA, (24, 24, 24), Level("level_sigmas", 3.0))
    assert made.level == pytest.approx(3 * made.field.sigma.rms)
    assert made.scale.sigma == made.field.sigma.rms
    with pytest.raises(InputError) as caught:
        surface_of(rough(), (24, 24, 24), Level("level_sigmas", 3.0))
    assert caught.value.path == ("sigma",)


@pytest.mark.parametrize(("quantity", "level"), [("sigma", 0.2), ("significance", 5.0)])
def test_quantities(quantity, level):
    region = Region.of(full_cell(TRICLINIC, (24, 24, 24)))
    task = SurfaceTask(level=Level("level", level), quantity=quantity, closed=True)
    made = perform_surface(prepare_surface(SIGMA, region, task))
    assert made.mesh.unpaired_edges() == 0
    plain = evaluate(SIGMA, region.sampling(), uncertainty=True)
    expected = plain.sigma.values if quantity == "sigma" else plain.values / plain.sigma.values
    np.testing.assert_allclose(made.field.values, expected)
    with pytest.raises(InputError) as caught:
        SurfaceTask(level=Level("level_sigmas", level), quantity=quantity)
    assert caught.value.path == ("level_sigmas",)


@pytest.mark.parametrize("demand", [Demand(precision="single"), Demand(tolerance=1e-3), Demand(threads=2)], ids=str)
def test_demands(demand):
    made = surface_of(gyroid(), (32, 32, 32), Level("level", 0.0), closed=True, demand=demand)
    assert made.mesh.unpaired_edges() == 0
    assert made.volume == pytest.approx(CUBE.volume / 2, rel=5e-3)


@pytest.mark.parametrize("closed", [False, True])
@pytest.mark.parametrize("most", [400, 1_000, 7_000, 12_000])
def test_too_many_triangles_make_the_grid_coarser(closed, most):
    made = surface_of(gyroid(), (64, 64, 64), Level("level", 0.3), closed=closed, max_triangles=most)
    assert made.coarsened
    assert made.asked == (64, 64, 64)
    assert max(made.region.divisions) < 64
    assert most / 4 < len(made.mesh.triangles) <= most
    # The series was summed anew, at the same level.
    plain = evaluate(gyroid(), full_cell(CUBE, made.region.divisions)).values
    np.testing.assert_array_equal(made.field.values, plain)
    assert made.level == 0.3
    if closed:
        assert made.mesh.unpaired_edges() == 0


def test_few_enough_triangles_leave_the_grid_as_it_is():
    free = surface_of(gyroid(), (32, 32, 32), Level("level", 0.3))
    count = len(free.mesh.triangles)
    assert not surface_of(gyroid(), (32, 32, 32), Level("level", 0.3), max_triangles=count).coarsened
    assert surface_of(gyroid(), (32, 32, 32), Level("level", 0.3), max_triangles=count - 1).coarsened


def test_a_surface_that_no_grid_makes_small_enough_is_refused():
    terms = from_terms(CUBE, [[3, 4, 5], [5, -3, 4]], [0.5, 0.5])
    grid = box(CUBE, [0, 0, 0], 9.3 * np.eye(3), (5, 5, 5))
    task = SurfaceTask(level=Level("level", 0.0), closed=True, max_triangles=100)
    with pytest.raises(InputError, match="4 × 4 × 4") as caught:
        perform_surface(prepare_surface(terms, Region.of(grid), task))
    assert caught.value.path == ("max_triangles",)


@pytest.mark.parametrize("most", [99, 5_000_001])
def test_triangles_allowed_are_bounded(most):
    with pytest.raises(InputError) as caught:
        SurfaceTask(level=Level("level", 0.0), max_triangles=most)
    assert caught.value.path == ("max_triangles",)


@pytest.mark.parametrize(
    ("level", "path"),
    [
        (Level("level", 1.0), "level"),
        (Level("level", -1.0), "level"),
        (Level("level", 7.0), "level"),
        (Level("level_rms", -40.0), "level_rms"),
    ],
)
def test_a_level_outside_the_values_is_refused_with_their_range(level, path):
    with pytest.raises(InputError, match="-1 to 1") as caught:
        surface_of(wave(TRICLINIC), (16, 16, 16), level)
    assert caught.value.path == (path,)


def test_vectors_and_complex_densities_are_refused():
    with pytest.raises(InputError) as caught:
        surface_of(rough(), (8, 8, 8), Level("level", 0.0), treatment=Treatment(field="gradient"))
    assert caught.value.path == ("field",)
    complex_set = assemble(
        TRICLINIC,
        Columns(indices=[[1], [0], [0]], amplitude=[1.0], phase_deg=[20.0]),
        values="density_coefficient",
        density="complex",
    )
    with pytest.raises(InputError) as caught:
        surface_of(complex_set, (8, 8, 8), Level("level", 0.0))
    assert caught.value.path == ("density",)


def test_values_that_overflow_are_refused():
    huge = from_terms(TRICLINIC, [[1, 0, 0], [0, 1, 0]], [1e200, 1e200])
    with pytest.raises(InputError, match="not numbers"), np.errstate(over="ignore"):
        surface_of(huge, (8, 8, 8), Level("level", 0.0))


@pytest.mark.parametrize("scale", [1e-12, 1e-30, 1e60])
def test_units_do_not_matter(scale):
    """What lies between two samples is a question of ratios."""
    plain = rough()
    made = [
        surface_of(from_terms(TRICLINIC, plain.indices, plain.values * factor), (24, 24, 24), Level("level_rms", 1.0))
        for factor in (1.0, scale)
    ]
    np.testing.assert_array_equal(made[0].mesh.triangles, made[1].mesh.triangles)
    np.testing.assert_allclose(made[0].mesh.vertices, made[1].mesh.vertices, atol=1e-9)
    np.testing.assert_allclose(made[0].mesh.normals, made[1].mesh.normals, atol=1e-7)


def test_memory_is_bounded_beforehand():
    region = Region.of(full_cell(TRICLINIC, (100, 100, 100)))
    task = SurfaceTask(level=Level("level", 0.0), max_triangles=1_000_000)
    work = prepare_surface(rough(), region, task)
    assert work.bytes > 1_000_000 * module.BYTES_PER_TRIANGLE
    assert prepare_surface(rough(), region, task, max_bytes=work.bytes).bytes == work.bytes
    with pytest.raises(TooLargeError) as caught:
        prepare_surface(rough(), region, task, max_bytes=work.bytes - 1)
    assert caught.value.path == ("samples",)
    fewer = prepare_surface(rough(), region, SurfaceTask(level=Level("level", 0.0), max_triangles=1_000))
    assert fewer.bytes < work.bytes / 4


def test_progress_is_that_of_the_first_sum():
    told = []
    region = Region.of(full_cell(CUBE, (32, 32, 32)))
    task = SurfaceTask(level=Level("level", 0.0), max_triangles=1000)
    perform_surface(prepare_surface(gyroid(), region, task), progress=lambda done, total: told.append((done, total)))
    assert told[-1] == (32, 32)
    assert [done for done, _ in told] == sorted(done for done, _ in told)
