"""Volume, centre, inertia, samples: against handbooks, a published example, a mesh library, twins, and symmetries."""

from __future__ import annotations

import math
import pickle

import numpy as np
import pytest
import trimesh
from hypothesis import given, settings
from hypothesis import strategies as st
from naive_shape import cube, tetrahedron, twin_mass
from numpy.testing import assert_allclose

from smallbody.errors import ShapeError, SizeMismatch
from smallbody.shape import Shape, facet_samples, make_shape


@pytest.fixture(scope="module")
def spool() -> Shape:
    return make_shape("twolobe", 500, seed=4)


def random_body(seed: int, facets: int = 80) -> Shape:
    """A star-shaped body with every radius drawn at random."""
    rng = np.random.default_rng(seed)
    ball = make_shape("sphere", facets)
    return Shape(ball.vertices_m * rng.uniform(0.5, 1.5, (len(ball.vertices_m), 1)), ball.facets)


def random_rotation(rng: np.random.Generator) -> np.ndarray:
    q, _ = np.linalg.qr(rng.standard_normal((3, 3)))
    return q * np.sign(np.linalg.det(q))


def test_a_cube_has_the_handbooks_moments():
    mass = cube(side_m=2.0).mass  # m a^2 / 6 about each axis through the centre (handbook)
    assert_allclose(mass.volume_m3, 8.0, rtol=1e-14)
    assert_allclose(mass.centre_m, [1.0, 1.0, 1.0], rtol=1e-14)
    assert_allclose(mass.inertia_m5, 8.0 * 4.0 / 6.0 * np.eye(3), atol=1e-13)


def test_a_regular_tetrahedron_has_the_handbooks_moments():
    corners = [(1, 1, 1), (1, -1, -1), (-1, 1, -1), (-1, -1, 1)]  # side 2 sqrt 2
    mass = tetrahedron(corners).mass  # volume a^3 / (6 sqrt 2), moment m a^2 / 20 (handbook)
    side = 2.0 * math.sqrt(2.0)
    assert_allclose(mass.volume_m3, side**3 / (6.0 * math.sqrt(2.0)), rtol=1e-14)
    assert_allclose(mass.moments_m5, mass.volume_m3 * side**2 / 20.0, rtol=1e-14)


def test_an_oblique_tetrahedron_agrees_with_a_published_worked_example():
    # F. Tonon 2004, J. Math. Stat. 1, 8, worked example; numbers from memory. The paper gives two of the products of
    # inertia under each other's name; they stand here where the definition puts them.
    corners = [(8.33220, -11.86875, 0.93355), (0.75523, 5.0, 16.37072), (52.61236, 5.0, -5.38580), (2.0, 5.0, 3.0)]
    mass = tetrahedron(corners).mass
    # x: the mean of the corners as printed is 15.92495
    assert_allclose(mass.centre_m, [15.92492, 0.78281, 3.72962], atol=3e-5)
    xx, yy, zz, yz, xz, xy = 43520.33257, 194711.28938, 191168.76173, 4417.66150, 11996.20119, -46343.16662
    published = np.array([[xx, -xz, -xy], [-xz, yy, -yz], [-xy, -yz, zz]])
    assert_allclose(np.abs(mass.inertia_m5), np.abs(published), rtol=1e-6)


@pytest.mark.parametrize("axes", [(0.34, 0.25, 0.19), (0.5, 0.3, 0.25), (0.3, 0.3, 0.2)])
def test_the_moments_of_a_triaxial_ellipsoid_converge_at_second_order(axes):
    a, b, c = axes
    exact = np.sort(np.array([b * b + c * c, a * a + c * c, a * a + b * b])) / 5.0 * 1e6  # m (b^2 + c^2) / 5 (handbook)
    error = {}
    for facets in (500, 8000, 32000):
        shape = make_shape("ellipsoid", facets, axes=axes)
        assert_allclose(shape.mass.volume_m3, 4.0 / 3.0 * math.pi * a * b * c * 1e9, rtol=1e-12)
        error[facets] = np.abs(shape.mass.moments_m5 / shape.mass.volume_m3 / exact - 1.0).max()
    assert error[8000] < error[500] / 10.0  # facets of a quarter the side: 16 at second order
    assert error[32000] < error[8000] / 3.5  # of half the side: 4
    assert error[32000] < 2e-4


@pytest.mark.parametrize("seed", range(5))
def test_mass_properties_agree_with_a_mesh_library_and_with_the_twin(seed):
    shape = random_body(seed).moved(np.array([3000.0, -200.0, 50.0]))
    mass = shape.mass
    mesh = trimesh.Trimesh(shape.vertices_m, shape.facets, process=False)
    volume, centre, inertia = twin_mass(shape.vertices_m, shape.facets)
    scale = np.abs(mass.inertia_m5).max()
    assert_allclose(mass.volume_m3, mesh.volume, rtol=1e-10)
    assert_allclose(mass.volume_m3, volume, rtol=1e-10)
    assert_allclose(mass.centre_m, mesh.center_mass, atol=1e-7)
    assert_allclose(mass.centre_m, centre, atol=1e-7)
    assert_allclose(mass.inertia_m5, inertia, atol=1e-7 * scale)
    assert_allclose(mass.inertia_m5, mesh.moment_inertia, atol=1e-7 * scale)
    assert_allclose(shape.areas_m2, mesh.area_faces, rtol=1e-10)
    assert_allclose(shape.normals, mesh.face_normals, atol=1e-10)


def test_moments_come_ascending_with_right_handed_axes(spool):
    mass = spool.turned(random_rotation(np.random.default_rng(2))).mass
    assert (np.diff(mass.moments_m5) >= 0.0).all()
    assert_allclose(mass.axes @ mass.axes.T, np.eye(3), atol=1e-12)
    assert_allclose(np.linalg.det(mass.axes), 1.0, rtol=1e-12)
    assert mass.axes[2, 2] >= 0.0
    for row, moment in zip(mass.axes, mass.moments_m5):
        assert_allclose(mass.inertia_m5 @ row, moment * row, atol=1e-9 * mass.moments_m5[2])


@settings(max_examples=30, deadline=None)
@given(seed=st.integers(0, 10**6), size=st.floats(1e-3, 1e6), far=st.floats(0.0, 100.0))
def test_mass_follows_a_body_that_is_turned_moved_scaled_and_renumbered(seed, size, far):
    rng = np.random.default_rng(seed)
    body = random_body(seed, 20)
    turn, shift = random_rotation(rng), far * 1000.0 * rng.standard_normal(3)
    new_number = rng.permutation(len(body.vertices_m))
    order, first = rng.permutation(len(body.facets)), rng.integers(0, 3, len(body.facets))
    facets = new_number[np.take_along_axis(body.facets, (first[:, None] + np.arange(3)) % 3, axis=1)][order]
    vertices = np.empty_like(body.vertices_m)
    vertices[new_number] = body.vertices_m
    other = Shape(vertices, facets).turned(turn).moved(shift).scaled(size)

    assert_allclose(other.mass.volume_m3, body.mass.volume_m3 * size**3, rtol=1e-9)
    assert_allclose(other.mass.centre_m, size * (turn @ body.mass.centre_m + shift), rtol=1e-9, atol=1e-6 * size)
    expected = turn @ body.mass.inertia_m5 @ turn.T * size**5
    assert_allclose(other.mass.inertia_m5, expected, atol=1e-8 * size**5 * body.mass.moments_m5[2])
    assert_allclose(other.areas_m2, body.areas_m2[order] * size**2, rtol=1e-8)


def test_a_mirrored_body_keeps_its_mass_and_its_outside(spool):
    mirror = spool.mirrored()
    flip = np.diag([-1.0, 1.0, 1.0])
    assert_allclose(mirror.mass.volume_m3, spool.mass.volume_m3, rtol=1e-13)
    assert_allclose(mirror.mass.inertia_m5, flip @ spool.mass.inertia_m5 @ flip, rtol=1e-10, atol=1.0)
    assert_allclose(mirror.normals, spool.normals @ flip, atol=1e-13)


def test_arrays_of_a_shape_cannot_be_scribbled_on(spool):
    for array in (spool.vertices_m, spool.facets, spool.normals, spool.areas_m2, spool.centroids_m, spool.extents_m):
        with pytest.raises(ValueError, match="read-only"):
            array[0] = 0
    for array in (spool.mass.centre_m, spool.mass.inertia_m5, spool.mass.axes, spool.mass.moments_m5):
        with pytest.raises(ValueError, match="read-only"):
            array[0] = 0


def test_a_shape_keeps_its_own_copy_of_what_it_is_given():
    vertices = cube().vertices_m.copy()
    shape = Shape(vertices, cube().facets)
    vertices[:] = 7.0
    assert shape.mass.volume_m3 == pytest.approx(1.0)


def test_the_hash_tells_shapes_apart_and_survives_pickling(spool):
    assert spool.sha256 == pickle.loads(pickle.dumps(spool)).sha256
    assert len({spool.sha256, spool.scaled(1.0 + 1e-15).sha256, spool.mirrored().sha256, cube().sha256}) == 4
    # fixed for good: archives hold it
    assert cube().sha256 == "016b542fce696049b4c3a0ae74696786b580a5adfcbc9aef5f9282ec11c38752"


def test_extents_leave_idle_vertices_out():
    shape = cube(2.0)
    more = Shape(np.vstack([shape.vertices_m, [[99.0, 0.0, 0.0]]]), shape.facets)
    assert more.extents_m.tolist() == [2.0, 2.0, 2.0]


@pytest.mark.parametrize(
    ("vertices", "facets", "error"),
    [
        (np.zeros((4, 2)), np.zeros((1, 3), int), SizeMismatch),
        (np.zeros((4, 3)), np.zeros((1, 4), int), SizeMismatch),
        (np.zeros((4, 3)), np.array([[0, 1, 4]]), ShapeError),
        (np.zeros((4, 3)), np.array([[0, 1, -1]]), ShapeError),
        (np.zeros((4, 3)), np.array([[0.0, 1.0, 2.0]]), ShapeError),
    ],
)
def test_arrays_that_are_no_shape_are_refused(vertices, facets, error):
    with pytest.raises(error):
        Shape(vertices, facets)


@pytest.mark.parametrize("k", [0.0, -1.0, math.nan, math.inf])
def test_scaling_wants_a_positive_number(k, spool):
    with pytest.raises(ShapeError, match="positive"):
        spool.scaled(k)


def test_turning_wants_a_rotation(spool):
    for matrix in (np.diag([1.0, 1.0, -1.0]), 2.0 * np.eye(3), np.eye(2)):
        with pytest.raises(ShapeError, match="rotation"):
            spool.turned(matrix)


@pytest.mark.parametrize("samples", [1, 4, 16])
def test_samples_spread_evenly_and_average_to_the_centroid(samples, spool):
    points = facet_samples(spool, samples)
    assert points.shape == (len(spool.facets), samples, 3)
    assert_allclose(points.mean(axis=1), spool.centroids_m, atol=1e-10)
    above = np.einsum("fsx,fx->fs", points - spool.centroids_m[:, None], spool.normals)
    assert np.abs(above).max() < 1e-10
    if (
        samples > 1
    ):  # each is the centroid of a triangle of 1/samples the area: none is nearer than a third of its height
        distance = np.linalg.norm(points[:, :, None] - points[:, None], axis=3) + 1e9 * np.eye(samples)
        side = np.sqrt(spool.areas_m2 / samples)
        assert (distance.min(axis=(1, 2)) > 0.2 * side).all()


def test_four_samples_are_the_middles_of_the_four_midedge_triangles():
    shape = tetrahedron([(0, 0, 0), (6, 0, 0), (0, 6, 0), (0, 0, 6)])
    at = int(np.flatnonzero(shape.normals[:, 2] < -0.99)[0])  # the facet in z = 0
    found = {tuple(np.round(p, 9)) for p in facet_samples(shape, 4)[at].tolist()}
    assert found == {(1.0, 1.0, 0.0), (4.0, 1.0, 0.0), (1.0, 4.0, 0.0), (2.0, 2.0, 0.0)}


@pytest.mark.parametrize("samples", [0, 2, 64, "4"])
def test_other_numbers_of_samples_are_refused(samples, spool):
    with pytest.raises(ShapeError, match="1, 4 or 16"):
        facet_samples(spool, samples)


def test_half_the_facets_of_a_read_shape_keep_its_volume_and_centre(spool):
    read = Shape(make_shape("gaussian", 5000, seed=6).vertices_m, make_shape("gaussian", 5000, seed=6).facets)
    half = read.moved(np.array([10.0, 20.0, 30.0])).halved()
    assert abs(len(half.facets) / len(read.facets) - 0.5) < 0.01
    assert_allclose(half.mass.volume_m3, read.mass.volume_m3, rtol=1e-10)
    assert_allclose(half.mass.centre_m, np.array([10.0, 20.0, 30.0]) + read.mass.centre_m, atol=1e-6)
    assert_allclose(half.mass.moments_m5, read.mass.moments_m5, rtol=5e-3)


def test_half_the_facets_of_a_made_shape_are_made_again_in_the_same_frame():
    body = make_shape("cratered", 2000, seed=2).mirrored().scaled(0.5)
    turn = random_rotation(np.random.default_rng(1))
    half = body.turned(turn).halved()
    assert len(half.facets) == 980
    assert_allclose(half.mass.volume_m3, body.mass.volume_m3, rtol=1e-10)
    assert_allclose(half.mass.inertia_m5, turn @ body.mass.inertia_m5 @ turn.T, atol=0.01 * body.mass.moments_m5[2])


def test_the_smallest_shapes_cannot_be_halved():
    with pytest.raises(ShapeError, match="half"):
        make_shape("sphere", 20).halved()
    with pytest.raises(ShapeError, match="halved"):
        tetrahedron([(0, 0, 0), (1, 0, 0), (0, 1, 0), (0, 0, 1)]).halved()


def test_importing_the_room_imports_nothing_heavy():
    import subprocess
    import sys

    code = "import sys, smallbody.shape; print([m for m in ('trimesh', 'scipy', 'numba', 'numpy') if m in sys.modules])"
    assert subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True).stdout == "[]\n"
    code = (
        "import sys; from smallbody.shape import Shape, check_shape, describe, make_shape, mend_shape, prepare_shape; "
        "from smallbody.shape import read_shape; print([m for m in ('trimesh', 'scipy', 'numba') if m in sys.modules])"
    )
    assert subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True).stdout == "[]\n"
