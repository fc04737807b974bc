import igl
import numpy as np
import pytest
import trimesh
from scipy.spatial.distance import cdist

from scanmass.geometry.polyhedron import face_areas, face_moments, polyhedron_moments
from scanmass.uncertainty import following, patches
from scanmass.uncertainty.distances import farthest_seeds, signed_distances, split_long


@pytest.mark.parametrize("shape", ["icosphere", "box", "annulus"])
def test_distances_against_brute_force(shape):
    mesh = {
        "icosphere": lambda: trimesh.creation.icosphere(3, 0.5),
        "box": lambda: trimesh.creation.box((1, 0.5, 0.2)),
        "annulus": lambda: trimesh.creation.annulus(0.3, 0.5, 0.4),
    }[shape]()
    rng = np.random.default_rng(0)
    vertices, faces = np.array(mesh.vertices), np.array(mesh.faces, np.int64)
    normals = face_areas(vertices, faces)[1]
    base, which = trimesh.sample.sample_surface(mesh, 2000, seed=1)
    points = base + 0.01 * rng.normal(size=(2000, 1)) * normals[which]
    signed, _ = signed_distances(points, *split_long(vertices, faces, 0.05)[:2])
    square, face, closest = igl.point_mesh_squared_distance(points, vertices, faces)
    distance, inside = np.sqrt(square), igl.winding_number(vertices, faces, points) > 0.5
    # At a convex edge the distance along the squarest normal is up to sqrt(2) smaller than the distance.
    # Six candidates by centre miss the nearest triangle just inside an edge of a box for a few points in ten thousand.
    assert np.mean(np.abs(signed) <= distance + 1e-12) >= 0.998
    near_face = np.abs(np.sum((points - closest) * normals[face], axis=1)) > distance * (1 - 1e-9)
    # The winding number is itself unsure within rounding of the surface.
    near_face &= distance > 1e-9
    assert near_face.mean() > 0.8
    wrong = np.abs(signed - np.where(inside, -distance, distance))[near_face] > 1e-12
    assert wrong.mean() <= 0.002


def test_split_keeps_the_surface():
    mesh = trimesh.creation.cylinder(0.1, 1.0)
    vertices, faces = np.array(mesh.vertices), np.array(mesh.faces, np.int64)
    points, pieces, owner = split_long(vertices, faces, 0.05)
    corners = points[pieces]
    assert np.linalg.norm(corners - np.roll(corners, 1, axis=1), axis=2).max() <= 0.05
    whole = np.zeros((len(faces), 10))
    np.add.at(whole, owner, face_moments(points, pieces))
    assert whole == pytest.approx(face_moments(vertices, faces), abs=1e-14)
    assert polyhedron_moments(points, pieces) == pytest.approx(
        polyhedron_moments(vertices, faces), rel=1e-11, abs=1e-14
    )


def test_seeds_are_the_farthest_each_time():
    points = np.random.default_rng(2).normal(size=(200, 4))
    seeds = farthest_seeds(points, 30)
    for k in range(1, 30):
        nearest = cdist(points, points[seeds[:k]]).min(axis=1)
        assert nearest[seeds[k]] == nearest.max()
    assert len(farthest_seeds(np.zeros((5, 3)), 3)) == 1


def test_moments_are_the_derivatives_of_the_volume_moments(surface_of):
    centre = np.array([0.1, -0.2, 0.3])
    mesh = trimesh.creation.icosphere(5, 0.5)
    found = patches.make(surface_of(mesh), None, centre=centre)
    assert 900 <= len(found.areas) <= 1000
    step, vertices = 1e-4, np.array(mesh.vertices)
    normal = vertices / 0.5
    ends = [polyhedron_moments(vertices + s * normal - centre, np.array(mesh.faces)) for s in (step, -step)]
    # A vertex moved along its normal moves faces by the cosine of half a face's angle: 1 - 2e-4 at this mesh.
    slope = (ends[0] - ends[1]) / (2 * step)
    assert found.moments.sum(axis=0) == pytest.approx(slope, rel=5e-4, abs=1e-6)
    assert found.areas.sum() == pytest.approx(mesh.area)
    assert found.normals == pytest.approx(
        (found.centres + centre) / np.linalg.norm(found.centres + centre, axis=1)[:, None], abs=0.02
    )


def test_residuals_of_each_view_are_found(surface_of, cloud_of, on_sphere):
    rng = np.random.default_rng(3)
    mesh = trimesh.creation.icosphere(5, 0.5)
    # The mesh lies inside the sphere of its corners by about edge^2 / (6 R) = 1e-4, on all views alike.
    view = rng.integers(0, 3, 120_000)
    offset, noise = np.array([0.001, 0.0, -0.002]), 0.0005
    direction = on_sphere(rng, len(view))
    points = direction * (0.5 + offset[view] + noise * rng.normal(size=len(view)))[:, None]
    shift = np.array([3.0, -2.0, 1.0])
    moved = trimesh.Trimesh(np.array(mesh.vertices) + shift, mesh.faces)
    scanners = np.array([[5.0, 0, 0], [0, 5, 0], [np.nan, np.nan, np.nan]]) + shift
    found = patches.make(surface_of(moved, source="mesh"), cloud_of(points + shift, view, scanners), centre=shift)
    assert found.seen.all()
    mean = np.average(np.nan_to_num(found.residuals), weights=found.counts, axis=0)
    assert mean == pytest.approx(offset + 9e-5, abs=2e-5)
    assert np.sqrt(np.nanmean(found.within)) == pytest.approx(noise, rel=0.03)
    assert found.counts.sum() == pytest.approx(len(view) * (1 - found.clipped))
    assert found.towards[:, 0] == pytest.approx(found.normals[:, 0], abs=0.2)
    assert np.isnan(found.towards[:, 2]).all()
    assert found.shares().sum(axis=1) == pytest.approx(np.ones(len(found.areas)))


def test_thinned_samples_count_as_their_points(surface_of, cloud_of, on_sphere):
    rng = np.random.default_rng(4)
    view = np.zeros(20_000, int)
    count = rng.integers(1, 9, 20_000)
    points = on_sphere(rng, len(view)) * (0.5 + 0.001 * rng.normal(size=len(view)) / np.sqrt(count))[:, None]
    found = patches.make(
        surface_of(trimesh.creation.icosphere(5, 0.5)), cloud_of(points, view, count=count), centre=np.zeros(3)
    )
    assert np.sqrt(np.nanmean(found.within)) == pytest.approx(0.001, rel=0.03)


def test_outliers_are_clipped_and_counted(surface_of, cloud_of, on_sphere):
    rng = np.random.default_rng(5)
    points = on_sphere(rng, 20_000) * (0.5 + 0.0005 * rng.normal(size=20_000))[:, None]
    points[:200] *= 1.2
    found = patches.make(
        surface_of(trimesh.creation.icosphere(5, 0.5)), cloud_of(points, np.zeros(20_000, int)), centre=np.zeros(3)
    )
    assert found.clipped == pytest.approx(0.01, abs=0.002)
    assert np.nanmax(found.residuals) < 0.003


def test_unseen_part_takes_the_weights_beside_it(surface_of, cloud_of, on_sphere):
    mesh = trimesh.creation.icosphere(4, 0.5)
    inferred = np.array(mesh.triangles_center)[:, 2] < 0
    rng = np.random.default_rng(6)
    points = 0.5 * on_sphere(rng, 40_000)
    points = points[points[:, 2] > 0]
    found = patches.make(
        surface_of(mesh, inferred), cloud_of(points, (points[:, 0] > 0).astype(int)), centre=np.zeros(3)
    )
    assert found.observed_fraction == pytest.approx(0.5, abs=0.01)
    assert found.shares().sum(axis=1) == pytest.approx(np.ones(len(found.areas)))
    below = found.centres[:, 2] < -0.2
    assert not found.seen[below].any()
    assert found.shares()[below & (found.centres[:, 0] > 0.2)][:, 1] == pytest.approx(1.0)


def test_two_sides_of_a_plate_are_different_patches(surface_of):
    mesh = trimesh.creation.box((1.0, 1.0, 0.01))
    found = patches.make(surface_of(mesh), None, centre=np.zeros(3))
    broad = np.abs(found.centres[:, 2]) > 0.004
    assert broad.sum() > 500
    # A patch that mixed the sides would lie between them.
    assert np.all((np.abs(found.centres[:, 2]) > 0.004) | (np.abs(found.normals[:, 2]) < 0.9))


def test_a_box_of_twelve_triangles_is_parted(surface_of):
    mesh = trimesh.creation.box((0.3, 0.2, 0.1))
    found = patches.make(surface_of(mesh), None, centre=np.zeros(3), count=500)
    assert len(found.areas) > 400
    assert found.areas.max() < 5 * found.areas.mean()


def test_what_the_surface_follows_is_given_back():
    """Three views' errors e seen against a surface that holds A e of them, unlike at each view's samples."""
    rng = np.random.default_rng(8)
    j, v = 50, 3
    counts = rng.integers(5, 60, (j, v)).astype(float)
    share = counts / counts.sum(axis=1, keepdims=True)
    # A mixture of the shares and of what lies nearest: rows sum to one, and each view leads at its own samples.
    lead = rng.uniform(0.0, 0.5, (j, 1, 1))
    weights = (1 - lead) * share[:, None, :] + lead * np.eye(v)
    errors = rng.normal(size=(j, v))
    seen = errors - np.einsum("jab,jb->ja", weights, errors)
    want = errors - (share * errors).sum(axis=1, keepdims=True)
    assert following.unfollowed(seen, counts, weights) == pytest.approx(want, abs=1e-12)
    assert np.abs(seen).mean() < 0.9 * np.abs(want).mean()


def test_a_view_that_is_all_there_is_says_nothing():
    residuals, counts = np.array([[0.0, np.nan], [1e-4, -1e-4]]), np.array([[9.0, 0.0], [9.0, 9.0]])
    weights = np.array([[[1.0, 0.0], [0.0, 0.0]], [[0.99, 0.01], [0.01, 0.99]]])
    found = following.unfollowed(residuals, counts, weights)
    assert found[0, 0] == 0.0
    assert np.isnan(found[1]).all()
    assert not np.isnan(following.unfollowed(residuals, counts, 0.5 * (weights + 0.5))[1]).any()


def test_weights_of_views_are_those_of_the_fit(surface_of, cloud_of, on_sphere):
    """Where views are mixed evenly each weighs as its points; across a border each side is its own view's."""
    rng = np.random.default_rng(9)
    mesh = trimesh.creation.icosphere(4, 0.5)
    points = 0.5 * on_sphere(rng, 60_000)
    for view, near in (((np.arange(60_000) % 4 == 0).astype(int), 0.25), ((points[:, 2] > 0).astype(int), 1.0)):
        cloud = cloud_of(points, view)
        _, face = signed_distances(points, np.array(mesh.vertices), np.array(mesh.faces, np.int64))
        weights = following.weights_of_views(
            np.array(mesh.vertices), np.array(mesh.faces, np.int64), cloud, points, face
        )
        assert weights.sum(axis=1) == pytest.approx(np.ones(60_000), abs=1e-9)
        inner = (view == 1) & (np.abs(points[:, 2]) > 0.2)
        # Twenty-four samples a vertex; three rounds on seven vertices raise the view's own by about a thirtieth.
        assert weights[inner, 1].mean() == pytest.approx(near, abs=0.05)


def test_groups_of_views_that_follow_only_each_other_are_left_alone():
    """Two views on one half of a patch, two on the other: nothing tells how the halves compare."""
    weights = np.kron(np.eye(2), np.full((2, 2), 0.5))[None]
    residuals = np.array([[1e-4, -1e-4, 2e-4, -2e-4]])
    assert following.unfollowed(residuals, np.full((1, 4), 9.0), weights) == pytest.approx(residuals)
