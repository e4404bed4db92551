"""From a body description to the shape that is worked on."""

from __future__ import annotations

import warnings
from pathlib import Path

import numpy as np
import pytest
from naive_shape import cube
from numpy.testing import assert_allclose

from smallbody.body import ShapeSource
from smallbody.errors import Note, ShapeError
from smallbody.shape import Shape, make_shape, prepare_shape, write_shape


@pytest.fixture
def brick(tmp_path) -> Path:
    """A file of a brick 3 x 2 x 1 km, far from the origin: the greatest moment is about z."""
    path = tmp_path / "brick.obj"
    write_shape(Shape(cube().vertices_m * [3000.0, 2000.0, 1000.0] + [500.0, -70.0, 9000.0], cube().facets), path)
    return path


def turned_about_x(path: Path, degrees: float) -> Path:
    from smallbody.shape import read_shape

    c, s = np.cos(np.radians(degrees)), np.sin(np.radians(degrees))
    out = path.with_name("turned.obj")
    write_shape(read_shape(path).turned(np.array([[1.0, 0.0, 0.0], [0.0, c, -s], [0.0, s, c]])), out)
    return out


def quietly(source: ShapeSource) -> Shape:
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        return prepare_shape(source)


def test_a_file_is_brought_to_the_origin_and_left_as_it_lies(brick):
    shape = quietly(ShapeSource(file=brick))
    assert_allclose(shape.mass.centre_m, 0.0, atol=1e-9)
    assert_allclose(shape.extents_m, [3000.0, 2000.0, 1000.0])


def test_metres_are_metres(brick):
    assert_allclose(quietly(ShapeSource(file=brick, length_unit="m")).extents_m, [3.0, 2.0, 1.0])


def test_a_diameter_rescales_the_body(brick):
    shape = quietly(ShapeSource(file=brick, diameter_km=0.5))
    assert shape.diameter_m == pytest.approx(500.0)
    assert_allclose(shape.extents_m / shape.extents_m[2], [3.0, 2.0, 1.0])


@pytest.mark.parametrize("degrees", [0.0, 3.0, 30.0, 80.0, -60.0])
def test_the_principal_axis_is_turned_to_z_by_the_shortest_way(brick, degrees):
    shape = quietly(ShapeSource(file=turned_about_x(brick, degrees), spin_axis="principal"))
    assert_allclose(shape.extents_m, [3000.0, 2000.0, 1000.0], rtol=1e-6)
    assert_allclose(shape.mass.axes[2], [0.0, 0.0, 1.0], atol=1e-9)


def test_the_principal_axis_keeps_to_the_side_of_the_files_z(brick):
    upright = quietly(ShapeSource(file=brick, spin_axis="principal"))
    # upside down: the file's +z is the other end of the axis now, so the body stays upside down
    over = quietly(ShapeSource(file=turned_about_x(brick, 180.0 - 1e-4), spin_axis="principal"))
    assert_allclose(over.vertices_m[:, 1:], -upright.vertices_m[:, 1:], atol=1e-2)


def test_a_file_axis_far_from_the_greatest_moment_is_noted(brick):
    with pytest.warns(Note, match=r"z axis is 30\.0 degrees from the axis of greatest moment"):
        prepare_shape(ShapeSource(file=turned_about_x(brick, 30.0)))
    quietly(ShapeSource(file=turned_about_x(brick, 4.9)))


def test_a_body_with_two_equal_greatest_moments_may_spin_about_either(tmp_path):
    path = tmp_path / "pencil.obj"  # long along y: the moments about x and z are equal
    write_shape(Shape(cube().vertices_m * [100.0, 900.0, 100.0], cube().facets), path)
    quietly(ShapeSource(file=path))


def test_wrong_units_that_make_a_body_of_planet_size_are_noted(brick):
    with pytest.warns(Note, match=r"the body is 2,254 km across; is shape\.length_unit right\?"):
        prepare_shape(ShapeSource(file=brick, diameter_km=2254.0))


def test_faults_that_stop_nothing_are_noted(brick):
    from smallbody.shape import read_shape

    shape = read_shape(brick)
    write_shape(Shape(np.vstack([shape.vertices_m, [[0.0, 0.0, 0.0]]]), shape.facets), brick)
    with pytest.warns(Note, match=r"brick\.obj: 1 vertex belongs to no facet \(the first: vertex 9, line 10\)"):
        prepare_shape(ShapeSource(file=brick))


def test_spheres_and_ellipsoids_are_made():
    ball = quietly(ShapeSource(sphere_facets=500, diameter_km=0.2))
    assert (len(ball.facets), round(ball.diameter_m, 6)) == (500, 200.0)
    egg = quietly(ShapeSource(ellipsoid_axes=(0.3, 0.2, 0.1), facets=500))
    assert_allclose(egg.diameter_m, 2000.0 * np.cbrt(0.3 * 0.2 * 0.1))
    small = quietly(ShapeSource(ellipsoid_axes=(300.0, 200.0, 100.0), facets=500, length_unit="m"))
    assert_allclose(small.vertices_m, egg.vertices_m, rtol=1e-9, atol=1e-9)
    assert quietly(
        ShapeSource(ellipsoid_axes=(3.0, 2.0, 1.0), facets=500, diameter_km=0.1)
    ).diameter_m == pytest.approx(100)


def test_an_upright_ellipsoid_with_z_longest_is_noted():
    with pytest.warns(Note, match="90.0 degrees"):
        prepare_shape(ShapeSource(ellipsoid_axes=(0.1, 0.2, 0.3), facets=500))


def test_prepared_shapes_can_be_halved_and_stay_prepared(brick):
    made = quietly(ShapeSource(sphere_facets=2000, diameter_km=0.2))
    half = made.halved()
    assert (len(half.facets), half.diameter_m) == (980, pytest.approx(200.0))
    path = brick.with_name("potsherd.obj")
    write_shape(make_shape("gaussian", 2000), path)
    half = prepare_shape(ShapeSource(file=path, diameter_km=0.3)).halved()
    assert half.diameter_m == pytest.approx(300.0)
    assert_allclose(half.mass.centre_m, 0.0, atol=1e-9)


def test_a_file_that_is_no_usable_shape_is_refused_by_name(tmp_path):
    path = tmp_path / "open.obj"
    write_shape(Shape(cube().vertices_m, cube().facets[1:]), path)
    with pytest.raises(ShapeError, match=r"open\.obj: 3 edges belong to one facet only"):
        prepare_shape(ShapeSource(file=path))
