"""Doubt of edges finer than the samples: by hand on a box, nothing on what is resolved."""

from __future__ import annotations

import numpy as np
import pytest
import trimesh

from scanmass.cloud.cloud import Cloud
from scanmass.surface.from_cloud import surface_from_cloud
from scanmass.uncertainty.detail import CARRIED, detail_rows
from tests.surface.scanned import cloud_of, on_mesh, on_sphere


def box_cloud(n: int) -> Cloud:
    box = trimesh.creation.box((0.1, 0.2, 0.05))
    return cloud_of(*on_mesh(np.array(box.vertices), np.array(box.faces), n))


def test_a_box_owes_its_edges() -> None:
    cloud = box_cloud(20_000)
    surface = surface_from_cloud(cloud, underside="seen")
    convex, concave = detail_rows(surface, cloud, np.zeros(3))
    # 1.4 m of square edges, the integral of H over each metre pi/4; pitch: 0.07 m2 over 20 000 samples.
    by_hand = CARRIED * 1.4 * np.pi / 4 * (0.07 / 20_000)
    assert convex[0] == pytest.approx(by_hand, rel=0.25)  # rounding spreads the edge: some falls below the limit
    assert abs(concave[0]) < 0.05 * convex[0]
    # The edges lie evenly about the middle; their sampling does not quite.
    np.testing.assert_allclose(convex[1:4], 0.0, atol=0.05 * 0.1 * convex[0])


def test_what_the_box_is_off_by_is_within_two_deviations() -> None:
    for n in (5_000, 20_000, 80_000):
        cloud = box_cloud(n)
        surface = surface_from_cloud(cloud, underside="seen")
        off = trimesh.Trimesh(surface.vertices, surface.faces, process=False).volume - 0.001
        assert abs(off) < 2.0 * detail_rows(surface, cloud, np.zeros(3))[0, 0]


def test_a_resolved_sphere_owes_nothing() -> None:
    points = on_sphere(20_000)
    cloud = cloud_of(points, points, noise=0.001)
    surface = surface_from_cloud(cloud, underside="seen")
    # Noise roughens a few places in 20 000: a millionth of the volume each.
    assert np.abs(detail_rows(surface, cloud, np.zeros(3))[:, 0]).max() < 1e-5 * 4.19
