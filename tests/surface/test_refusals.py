"""What must not come out as a confident figure: too little seen, several objects, bubbles."""

from __future__ import annotations

import numpy as np
import pytest
import trimesh

from scanmass.errors import Declined
from scanmass.surface.close import close
from scanmass.surface.mesh import Mesh
from scanmass.surface.onesided import require_all_round
from scanmass.surface.reconstruct import reconstruct
from scanmass.surface.shells import require_one_object
from tests.surface.scanned import cloud_of, on_sphere


def two(apart: float, ratio: float = 1.0) -> trimesh.Trimesh:
    one = trimesh.creation.icosphere(2)
    other = trimesh.creation.icosphere(2, radius=ratio)
    other.apply_translation([apart, 0, 0])
    return trimesh.util.concatenate([one, other])


def test_two_solids_apart_are_refused() -> None:
    mesh = two(3.0)
    with pytest.raises(Declined, match=r"several separate objects of similar size \(2000 mm and 2000 mm\); crop"):
        require_one_object(np.array(mesh.vertices), np.array(mesh.faces))


def test_a_small_piece_or_a_touching_part_passes() -> None:
    for mesh in (two(3.0, 0.2), two(1.9)):
        require_one_object(np.array(mesh.vertices), np.array(mesh.faces))


def test_half_a_body_closed_by_a_lid_is_declined() -> None:
    # Half of an ellipsoid: its lid is over a quarter of the closed surface, but few directions look mostly at it.
    points = on_sphere(30_000) * [1.0, 1.0, 2.5]
    normals = points / np.array([1.0, 1.0, 2.5]) ** 2
    half = points[:, 0] > 0
    cloud = cloud_of(points[half], normals[half])
    with pytest.raises(Declined, match=r"the scan is (one-sided|patchy): .* look"):
        close(reconstruct(cloud), cloud)


def test_patches_of_a_surface_are_not_a_body() -> None:
    mesh = trimesh.creation.icosphere(4)
    inferred = np.random.default_rng(0).random(len(mesh.faces)) < 0.35
    with pytest.raises(Declined, match=r"the scan is patchy: 3\d % of the surface was not seen, and 0 % of all"):
        require_all_round(Mesh(np.array(mesh.vertices), np.array(mesh.faces), 0.05), inferred, None)


def test_bubbles_without_samples_are_dropped_and_said() -> None:
    points = on_sphere(20_000)
    cloud = cloud_of(points, points)
    ball = reconstruct(cloud)
    bubble = trimesh.creation.icosphere(2, radius=0.1)
    n = len(ball.vertices)
    both = Mesh(
        np.concatenate([ball.vertices, np.array(bubble.vertices) + [3.0, 0, 0]]),
        np.concatenate([ball.faces, np.array(bubble.faces) + n]),
        ball.resolution,
    )
    surface = close(both, cloud)
    assert surface.shells == 1
    assert "bubbles-dropped" in [note.code for note in surface.warnings]
