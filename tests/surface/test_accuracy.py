"""Reconstruction and refinement against exact bodies."""

from __future__ import annotations

import numpy as np
import pytest

from scanmass.cloud.cloud import Cloud
from scanmass.geometry.edges import count_edges
from scanmass.geometry.moments import centroid
from scanmass.geometry.tensors import central_inertia
from scanmass.surface.mesh import Mesh
from scanmass.surface.reconstruct import reconstruct
from scanmass.surface.refine import refine
from tests.surface.parts import PARTS, exact, tessellated
from tests.surface.scanned import cloud_of, on_mesh, on_sphere

QUICK = ("filleted block with bores", "plate with ribs")


def measured(cloud: Cloud) -> Mesh:
    mesh = refine(reconstruct(cloud), cloud)
    assert count_edges(mesh.faces).closed
    return mesh


@pytest.mark.parametrize("name", [n if n in QUICK else pytest.param(n, marks=pytest.mark.study) for n in PARTS])
def test_noisy_cad_parts(name: str) -> None:
    shape = PARTS[name]()
    truth = exact(shape)
    points, normals = on_mesh(*tessellated(shape), 200_000, seed=1)
    size = float(np.ptp(points, axis=0).max())
    found = measured(cloud_of(points, normals, noise=0.001 * size, seed=2)).moments
    # The project's stated figures: 0.15 %, 0.03 % of the size, 0.4 %. Seen over all five parts: 0.05, 0.007, 0.14.
    assert found[0] == pytest.approx(truth.volume, rel=0.0015)
    np.testing.assert_allclose(centroid(found), truth.centre, atol=0.0003 * size)
    np.testing.assert_allclose(np.linalg.eigvalsh(central_inertia(found)), truth.principal, rtol=0.004)


def test_uneven_sampling_far_from_the_origin_twice_the_same() -> None:
    # A unit box, 25 times denser at x = 1 than at x = 0, a hundred kilometres away.
    rng = np.random.default_rng(5)
    corner = rng.random((200_000, 3))
    axis = rng.integers(0, 3, len(corner))
    side = rng.integers(0, 2, len(corner))
    corner[np.arange(len(corner)), axis] = side
    normals = np.zeros_like(corner)
    normals[np.arange(len(corner)), axis] = 2.0 * side - 1.0
    kept = rng.random(len(corner)) < 25.0 ** (corner[:, 0] - 1.0)
    near = cloud_of(corner[kept], normals[kept], noise=0.0005, seed=6)
    far = Cloud(near.points + 1e5, near.view, near.count, near.view_names, near.scanners, near.spacing, near.normals)
    first, again = measured(far), measured(far)
    # The design measured 0.23 % at this unevenness on a box, from its edges where samples are few.
    assert measured(near).moments[0] == pytest.approx(1.0, abs=0.0025)
    assert Mesh(first.vertices - 1e5, first.faces, first.resolution).moments[0] == pytest.approx(1.0, abs=0.0025)
    assert first.vertices.tobytes() == again.vertices.tobytes()
    assert first.faces.tobytes() == again.faces.tobytes()


def test_cavity_is_kept_and_counts_negative() -> None:
    outer, inner = on_sphere(40_000), on_sphere(12_000, seed=1)
    cloud = cloud_of(np.concatenate([outer, 0.5 * inner]), np.concatenate([outer, -inner]))
    mesh = measured(cloud)
    # Smooth bodies: 0.1 % (design section 4: 0.08 % at depth 7).
    assert mesh.moments[0] == pytest.approx(4 / 3 * np.pi * (1 - 1 / 8), rel=0.001)


def test_refinement_takes_a_shrunken_sphere_back() -> None:
    points = on_sphere(30_000)
    cloud = cloud_of(points, points)
    mesh = reconstruct(cloud)
    shrunk = mesh.moved(0.99 * mesh.vertices)
    assert shrunk.moments[0] < 0.975 * 4 / 3 * np.pi
    # Three rounds leave the chord error of the mesh: (edge/radius)^2 / 10, edge 0.02.
    assert refine(shrunk, cloud).moments[0] == pytest.approx(4 / 3 * np.pi, rel=1e-3)


def test_quiet_on_standard_output(capfd: pytest.CaptureFixture[str]) -> None:
    points = on_sphere(2_000)
    reconstruct(cloud_of(points, points))
    assert capfd.readouterr().out == ""


def test_normals_are_needed() -> None:
    points = on_sphere(100)
    one = np.ones(100, np.int32)
    cloud = Cloud(points, one - 1, one, ("view",), np.full((1, 3), np.nan), 0.1)
    with pytest.raises(ValueError, match="needs oriented normals"):
        reconstruct(cloud)
