"""Where an object without a support in its scan ends below, and whether it may go on out of sight."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy.spatial import ConvexHull

from scanmass.cloud.cloud import Cloud
from scanmass.geometry.moments import centroid
from scanmass.geometry.polyhedron import polyhedron_moments
from scanmass.surface.from_cloud import surface_from_cloud
from scanmass.surface.level import foot, standing_level
from scanmass.surface.surface import Surface
from tests.surface.scanned import cloud_of, on_frustum

UP = np.array([0.0, 0.0, 1.0])


def seen_from(cloud: Cloud, elevation: float) -> Cloud:
    """The cloud shared out among eight stations at ``elevation`` degrees all round, each with what faces it most."""
    turn, lift = 2.0 * np.pi * np.arange(8) / 8.0, np.radians(elevation)
    ways = np.stack([np.cos(lift) * np.cos(turn), np.cos(lift) * np.sin(turn), np.full(8, np.sin(lift))], axis=1)
    view = np.argmax(cloud.points[:, :2] @ ways[:, :2].T, axis=1).astype(np.int32)
    return replace(cloud, view=view, view_names=tuple("abcdefgh"), scanners=5.0 * ways)


def volumes(surface: Surface) -> dict[str, float]:
    return {closure.name: float(closure.moments[0]) for closure in surface.closures}


@pytest.mark.parametrize(
    ("height", "elevation", "may_go_on"),
    # Walls that lean over by 34 and 25 degrees; the last two are seen by stations that nobody knows.
    [(0.3, 12.0, False), (0.3, 50.0, True), (0.3, None, True), (0.43, None, False)],
)
def test_a_wall_in_full_sight_ends_where_its_samples_end(
    height: float, elevation: float | None, may_go_on: bool
) -> None:
    cloud = cloud_of(*on_frustum(20_000, 0.3, 0.5, height), noise=0.0005)
    cloud = cloud if elevation is None else seen_from(cloud, elevation)
    surface = surface_from_cloud(cloud, underside="unknown", up=UP)
    found = volumes(surface)
    text = {note.code: note.text for note in surface.assumptions}["nothing-recessed-above-rim"]
    assert ("may also close below the lowest points" in text) == may_go_on
    # The outer limit of what stands on its lowest samples: their convex hull, and its foot a pitch farther down; half
    # of that is where the wall may go on, half what the hull of samples lacks of a round wall.
    area = np.pi * (0.5**2 + 0.8 * np.hypot(height, 0.2))
    limit = ConvexHull(cloud.points).volume + np.sqrt(area / 20_000) * np.pi * 0.3**2
    assert found["filled"] <= limit
    if may_go_on:
        # A wall that was seen at a grazing angle goes on at its slope, to a cone of height 0.3 height/0.2.
        cone = np.pi * 0.3**2 / 3.0 * 0.3 * height / 0.2
        assert found["greatest volume"] - found["filled"] == pytest.approx(cone, rel=0.15)
    else:
        assert max(found.values()) <= limit


@pytest.mark.parametrize("seed", range(6))
def test_the_contact_plane_is_between_the_ends_of_the_foot(seed: int) -> None:
    # A wall sampled evenly from 0 up, of which cleaning took three quarters of the lowest four pitches.
    rng = np.random.default_rng(seed)
    pitch = 0.01
    heights = rng.uniform(0.0, 1.0, 20_000) + rng.normal(0.0, 0.001, 20_000)
    taken = (heights < 4.0 * pitch) & (rng.random(len(heights)) < 0.75)
    whole = foot(heights[~taken], heights[taken], pitch)
    assert whole.lowest < 0.0 < whole.highest
    # A thousand samples in either half of a band of ten pitches: 5 sqrt(2/1000) pitches is one deviation; three.
    assert abs(whole.level) < 0.67 * pitch
    assert whole.highest - whole.lowest < 2.0 * pitch
    assert standing_level(heights[~taken], pitch) > pitch
    # Two strays at a grid's edge move the end by no more than the two lowest samples, which no longer count as astray:
    # in the tail of noise of a tenth of a pitch.
    assert foot(heights[~taken], np.append(heights[taken], [-0.2, -0.1]), pitch).lowest == pytest.approx(
        whole.lowest, abs=0.3 * pitch
    )


def test_a_flat_underside_below_thinned_samples() -> None:
    points, normals = on_frustum(40_000, 0.4, 0.3, 0.6, seed=4)
    n = 0.4**2 + 0.4 * 0.3 + 0.3**2
    truth, height = np.pi * 0.6 * n / 3, 0.6 * (0.4**2 + 2 * 0.4 * 0.3 + 3 * 0.3**2) / (4 * n)
    taken = (points[:, 2] < 0.025) & (np.random.default_rng(1).random(len(points)) < 0.75)
    cloud = cloud_of(points[~taken], normals[~taken], noise=0.0005)
    # Far from the object, as of a table that was cut away: no part of it.
    clutter = np.array([[1.5, 0.0, -0.4]] * 50)
    surface = surface_from_cloud(cloud, underside="flat", up=UP, edge_samples=np.concatenate([points[taken], clutter]))
    found = polyhedron_moments(surface.vertices, surface.faces)
    # The foot is found to a fifth of a pitch of 6 mm (above): 0.0012 * 0.503 of 0.233.
    assert found[0] == pytest.approx(truth, rel=0.003)
    moments = np.array([closure.moments for closure in surface.closures])
    assert moments[:, 0].min() < truth < moments[:, 0].max()
    assert np.ptp(moments[:, 0]) < 0.02 * truth
    assert centroid(moments)[:, 2].min() < height < centroid(moments)[:, 2].max()
    text = {note.code: note.text for note in surface.assumptions}["underside-as-declared"]
    assert "where it ends is told by samples alone, to " in text
