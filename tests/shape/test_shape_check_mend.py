"""Faults of surfaces: found, named with facets and lines, mended where that needs no guess."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from naive_shape import cube, same_facets, twin_crossing, twin_edge_faults, twin_pieces
from numpy.testing import assert_allclose

from smallbody.errors import ShapeError
from smallbody.shape import (
    KINDS,
    Shape,
    check_shape,
    describe,
    make_shape,
    mend_shape,
    parse_shape,
    require_usable,
    shape_bytes,
)
from smallbody.shape.check import Edges, crossing_facets


@pytest.fixture(scope="module")
def spool() -> Shape:
    return make_shape("twolobe", 500, seed=4)


def kinds(shape: Shape) -> list[str]:
    return [fault.kind for fault in check_shape(shape)]


def soup(shape: Shape) -> Shape:
    """Every facet with corners of its own."""
    return Shape(shape.vertices_m[shape.facets].reshape(-1, 3), np.arange(3 * len(shape.facets)).reshape(-1, 3))


def together(*shapes: Shape) -> Shape:
    starts = np.cumsum([0, *(len(s.vertices_m) for s in shapes)])
    facets = np.concatenate([s.facets + start for s, start in zip(shapes, starts)])
    return Shape(np.concatenate([s.vertices_m for s in shapes]), facets)


def with_facets(shape: Shape, facets: np.ndarray) -> Shape:
    return Shape(shape.vertices_m, facets)


def moebius() -> Shape:
    """A closed strip with one side: five triangles."""
    vertices = [(np.cos(a), np.sin(a), 0.3 * (-1) ** k) for k, a in enumerate(np.arange(5) * 2 * np.pi / 5)]
    return Shape(np.array(vertices), np.array([(k, (k + 1) % 5, (k + 2) % 5) for k in range(5)]))


def faulty(body: Shape) -> dict[str, tuple[Shape, list[str]]]:
    v, f = body.vertices_m, body.facets
    third = np.arange(len(f)) % 3 == 0
    nan = v.copy()
    nan[7, 1] = np.nan
    return {
        "sound": (body, []),
        "open": (with_facets(body, f[1:]), ["open"]),
        "inverted": (with_facets(body, f[:, ::-1]), ["inverted"]),
        "some turned": (with_facets(body, np.where(third[:, None], f[:, ::-1], f)), ["sense"]),
        "one turned": (with_facets(body, np.concatenate([f[:1, ::-1], f[1:]])), ["sense"]),
        "doubled": (with_facets(body, np.concatenate([f, f])), ["duplicate", "crowded"]),
        "one doubled": (with_facets(body, np.concatenate([f, f[:1]])), ["duplicate", "crowded"]),
        "doubled apart": (together(body, body), ["pieces"]),
        "two bodies": (together(body, body.moved(np.array([1e4, 0.0, 0.0]))), ["pieces"]),
        "nested": (together(body, with_facets(body.scaled(0.5), f[:, ::-1])), ["pieces"]),
        "soup": (soup(body), ["open", "pieces"]),
        "collapsed facet": (with_facets(body, np.concatenate([f, [[3, 3, 9]]])), ["degenerate", "open", "pieces"]),
        "not finite": (with_facets(Shape(nan, f), f), ["coordinate"]),
        "idle vertex": (Shape(np.vstack([v, [[0.0, 0.0, 0.0]]]), f), ["unused"]),
        "nothing": (Shape(np.zeros((0, 3)), np.zeros((0, 3), int)), ["empty"]),
        "no facets": (Shape(v, np.zeros((0, 3), int)), ["empty"]),
        "one side": (moebius(), ["open", "sense"]),
        "flat": (Shape(v * [1.0, 1.0, 0.0], f), ["inverted"]),
    }


@pytest.mark.parametrize("name", faulty(make_shape("sphere", 20)))
def test_every_fault_is_found_under_its_name(name, spool):
    shape, expected = faulty(spool)[name]
    assert kinds(shape) == expected
    for fault in check_shape(shape):
        assert "\n" not in fault.message
        assert fault.serious is (fault.kind not in ("unused", "crossing"))
    if expected in ([], ["unused"]):
        require_usable(shape)
    else:
        with pytest.raises(ShapeError) as caught:
            require_usable(shape)
        assert str(caught.value).startswith(check_shape(shape)[0].message)


def test_an_edge_shared_by_four_facets_is_crowded():
    a, b = cube(), cube().moved(np.array([1.0, 1.0, 0.0]))
    merged, _ = mend_or_merge(together(a, b))
    assert "crowded" in kinds(merged)


def mend_or_merge(shape: Shape) -> tuple[Shape, list[str]]:
    from smallbody.shape.mend import _merge

    merged, said = _merge(shape)
    return merged, [said]


def test_two_bodies_that_share_an_edge_cannot_be_mended():
    with pytest.raises(ShapeError, match="guess: 1 edge belongs to more than two facets"):
        mend_shape(together(cube(), cube().moved(np.array([1.0, 1.0, 0.0]))))


def test_faults_name_the_lines_of_the_file(spool):
    lines = shape_bytes(spool, ".obj").decode().splitlines()
    first = next(k for k, line in enumerate(lines) if line.startswith("f "))
    words = lines[first + 4].split()
    lines[first + 4] = " ".join([words[0], *words[:0:-1]])  # the fifth facet turned
    shape = parse_shape("\n".join(lines).encode(), "spool.obj")
    (fault,) = check_shape(shape)
    assert fault.kind == "sense"
    assert 5 in fault.facets
    assert len(fault.facets) == 4  # with its three neighbours
    assert fault.lines[fault.facets.index(5)] == first + 5
    assert f"line{'s' if len(fault.lines) > 1 else ''} {fault.lines[0]}" in fault.message
    with pytest.raises(ShapeError, match=r"^spool\.obj: 3 edges are run along in the same sense"):
        require_usable(shape)


def test_facets_are_numbered_as_in_the_file_when_polygons_were_split():
    text = shape_bytes(cube(), ".obj").decode().replace("f 1 2 4\nf 1 4 3\n", "f 1 2 4 3\n")
    shape = parse_shape((text.rsplit("f ", 1)[0]).encode(), "cube.obj")  # the last facet gone
    (fault,) = check_shape(shape)
    assert fault.kind == "open"
    assert max(fault.facets) == 10  # of 10 left in the file, not of 11 triangles


def test_a_coordinate_that_is_not_finite_is_named_with_its_vertex():
    vertices = cube().vertices_m.copy()
    vertices[5, 2] = np.inf
    (fault,) = check_shape(Shape(vertices, cube().facets))
    assert "vertex 6 is at [1.0, 0.0, inf]" in fault.message
    assert set(fault.facets) == {k + 1 for k, f in enumerate(cube().facets.tolist()) if 5 in f}


@settings(max_examples=60, deadline=None)
@given(seed=st.integers(0, 10**6))
def test_edges_and_pieces_agree_with_their_twins_on_any_jumble_of_facets(seed):
    rng = np.random.default_rng(seed)
    n_vertices, n_facets = int(rng.integers(3, 9)), int(rng.integers(1, 30))
    facets = np.array([rng.permutation(n_vertices)[:3] for _ in range(n_facets)])
    edges = Edges(facets)
    found = {"open": edges.single.size, "crowded": edges.crowded.size, "sense": edges.same_sense.size}
    assert found == twin_edge_faults(facets)
    assert edges.pieces().max() + 1 == twin_pieces(facets)
    for chosen in (edges.single, edges.crowded, edges.same_sense):
        assert set(edges.facets_of(chosen).tolist()) <= set(range(n_facets))


@settings(max_examples=40, deadline=None)
@given(seed=st.integers(0, 10**6))
def test_crossings_agree_with_their_twin_on_any_jumble_of_facets(seed):
    rng = np.random.default_rng(seed)
    n_vertices, n_facets = int(rng.integers(4, 20)), int(rng.integers(1, 15))
    facets = np.array([rng.permutation(n_vertices)[:3] for _ in range(n_facets)])
    vertices = rng.standard_normal((n_vertices, 3)) * rng.choice([1.0, 1.0, 0.2], 3)
    vertices.flags.writeable = facets.flags.writeable = False
    assert set(crossing_facets(vertices, facets).tolist()) == twin_crossing(vertices, facets)


def test_a_vertex_pushed_through_the_body_is_found_but_stops_nothing():
    ball = make_shape("sphere", 320)
    vertices = ball.vertices_m.copy()
    vertices[20] *= -1.2
    (fault,) = check_shape(Shape(vertices, ball.facets))
    assert (fault.kind, fault.serious) == ("crossing", False)
    assert "cut through others" in fault.message
    assert {k + 1 for k, f in enumerate(ball.facets.tolist()) if 20 in f} <= set(fault.facets)
    assert [f.kind for f in require_usable(Shape(vertices, ball.facets))] == ["crossing"]


def test_a_surface_turned_inside_out_in_part_has_the_moments_of_no_solid():
    ball = make_shape("sphere", 20)
    vertices = ball.vertices_m * np.random.default_rng(1).uniform(0.9, 1.1, (12, 1))
    vertices[[2, 5]] = vertices[[5, 2]]  # two corners change places
    faults = check_shape(Shape(vertices, ball.facets))
    assert [f.kind for f in faults] == ["solid", "crossing"]
    with pytest.raises(ShapeError, match="inside out"):
        require_usable(Shape(vertices, ball.facets))


def test_a_closed_surface_without_volume_is_refused():
    ball = make_shape("sphere", 20)
    vertices = ball.vertices_m.copy()
    vertices[[6, 4]] = vertices[[4, 6]]
    assert "inverted" in kinds(Shape(vertices, ball.facets))


@pytest.mark.parametrize("kind", KINDS)
def test_made_bodies_do_not_cut_through_themselves(kind):
    assert check_shape(make_shape(kind, 2000, 7)) == []


MENDABLE = {
    "inverted": ["500 facets turned outwards"],
    "some turned": ["167 facets turned outwards"],
    "one turned": ["1 facet turned outwards"],
    "doubled": ["500 repeated facets dropped"],
    "one doubled": ["1 repeated facet dropped"],
    "doubled apart": ["252 coincident vertices merged", "500 repeated facets dropped"],
    "soup": ["1,248 coincident vertices merged"],
    "collapsed facet": ["1 facet without area dropped"],
    "idle vertex": ["1 idle vertex dropped"],
    "sound": [],
}


@pytest.mark.parametrize("name", MENDABLE)
def test_what_needs_no_guess_is_mended_and_told(name, spool):
    shape, _ = faulty(spool)[name]
    mended, done = mend_shape(shape)
    assert done == MENDABLE[name]
    assert check_shape(mended) == []
    assert_allclose(mended.mass.volume_m3, spool.mass.volume_m3, rtol=1e-9)
    assert_allclose(mended.mass.inertia_m5, spool.mass.inertia_m5, atol=1e-9 * spool.mass.moments_m5[2])


@pytest.mark.parametrize(
    "name", ["open", "two bodies", "nested", "not finite", "nothing", "no facets", "one side", "flat"]
)
def test_what_needs_a_guess_is_refused(name, spool):
    with pytest.raises(ShapeError, match=r"guess|cannot be mended|no facets"):
        mend_shape(faulty(spool)[name][0])


def test_a_sound_shape_comes_back_as_it_is(spool):
    assert mend_shape(spool)[0] is spool


def test_a_flat_facet_on_an_edge_gives_the_edge_to_its_neighbour(spool):
    v, f = spool.vertices_m, spool.facets
    a, b, c = f[0]
    middle = len(v)
    capped = Shape(
        np.vstack([v, [0.3 * v[a] + 0.7 * v[b]]]), np.vstack([f[1:], [[a, middle, c], [middle, b, c], [a, b, middle]]])
    )
    assert kinds(capped) == ["degenerate"]
    mended, done = mend_shape(capped)
    assert done == ["1 flat facet merged into the facet beside"]
    assert check_shape(mended) == []
    assert_allclose(mended.mass.volume_m3, spool.mass.volume_m3, rtol=1e-12)


def test_a_pair_of_facets_that_face_each_other_cancels(spool):
    a, b, c = spool.facets[0]
    flap = with_facets(spool, np.vstack([spool.facets, [[a, b, c], [a, c, b]]]))
    mended, done = mend_shape(flap)
    assert done == ["2 repeated facets dropped"]
    assert same_facets(mended, spool, 0.0)


@settings(max_examples=25, deadline=None)
@given(seed=st.integers(0, 10**6))
def test_any_mixture_of_mendable_faults_is_mended(seed):
    rng = np.random.default_rng(seed)
    body = make_shape("gaussian", 80, seed=seed % 50)
    shape = soup(body) if rng.random() < 0.5 else body
    facets = shape.facets.copy()
    turned = rng.random(len(facets)) < rng.random()
    facets[turned] = facets[turned, ::-1]
    facets = np.vstack([facets, facets[rng.integers(0, len(facets), rng.integers(0, 5))]])
    facets = facets[rng.permutation(len(facets))]
    facets = np.take_along_axis(facets, (rng.integers(0, 3, len(facets))[:, None] + np.arange(3)) % 3, axis=1)
    mended, _ = mend_shape(Shape(np.vstack([shape.vertices_m, rng.standard_normal((3, 3))]), facets))
    assert check_shape(mended) == []
    assert len(mended.facets) == len(body.facets)
    assert_allclose(mended.mass.volume_m3, body.mass.volume_m3, rtol=1e-9)


def test_mended_shapes_still_know_their_lines(spool):
    text = shape_bytes(with_facets(spool, spool.facets[:, ::-1]), ".obj").decode()
    shape = parse_shape((text + "f 1 1 2\nv 9 9 9\n").encode(), "spool.obj")
    mended, done = mend_shape(shape)
    assert done == ["1 facet without area dropped", "500 facets turned outwards", "1 idle vertex dropped"]
    assert len(mended.source.facet_lines) == len(mended.facets)
    assert len(mended.source.vertex_lines) == len(mended.vertices_m)


def test_a_description_holds_plain_numbers_and_faults(spool):
    import json

    told = describe(spool)
    assert json.loads(json.dumps(told, allow_nan=False)) == told
    assert told["facets"] == 500
    assert told["handles"] == 0
    assert told["usable"] is True
    assert told["faults"] == []
    assert told["diameter_m"] == pytest.approx(1000.0)
    assert told["edge_m"]["min"] < told["edge_m"]["median"] < told["edge_m"]["max"]
    assert told["principal_extents_m"][0] > 1.5 * told["principal_extents_m"][2]
    assert told["spin_tilt_deg"] < 1.0
    for shape, expected in faulty(spool).values():
        told = describe(shape)
        json.dumps(told, allow_nan=False)
        assert [fault["kind"] for fault in told["faults"]] == expected
        assert (told["volume_m3"] is not None) is told["usable"]


def test_a_description_counts_handles():
    n, m = 12, 8  # a torus: the vertices of a grid that closes on itself both ways
    i, j = (a.ravel() for a in np.meshgrid(np.arange(n), np.arange(m), indexing="ij"))
    a, b = 2 * np.pi * i / n, 2 * np.pi * j / m
    vertices = np.stack([(3 + np.cos(b)) * np.cos(a), (3 + np.cos(b)) * np.sin(a), np.sin(b)], axis=1)

    def at(i: np.ndarray, j: np.ndarray) -> np.ndarray:
        return (i % n) * m + j % m

    one = np.stack([at(i, j), at(i + 1, j), at(i + 1, j + 1)], axis=1)
    two = np.stack([at(i, j), at(i + 1, j + 1), at(i, j + 1)], axis=1)
    ring = Shape(vertices, np.concatenate([one, two]))
    assert check_shape(ring) == []
    assert describe(ring)["handles"] == 1


def test_angles_and_edges_of_a_cube_are_those_of_school():
    told = describe(cube(2.0))
    assert told["smallest_angle_deg"] == pytest.approx(45.0)
    assert told["edge_m"] == pytest.approx({"min": 2.0, "median": 2.0, "max": np.sqrt(8.0)})
    assert told["area_m2"] == pytest.approx(24.0)
    assert told["spin_tilt_deg"] == pytest.approx(0.0)
    assert told["centre_m"] == pytest.approx([1.0, 1.0, 1.0])
