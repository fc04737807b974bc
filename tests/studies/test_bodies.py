"""Bodies: closed, and their exact figures against closed forms and another integrator."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import open3d as o3d
import pytest
import trimesh

from scanmass.geometry.moments import centroid
from scanmass.geometry.tensors import central_inertia
from scanmass.studies.bodies import Body, box, from_rings, turned, with_cavity
from scanmass.studies.bronze_body import bronze_figure
from scanmass.studies.casting_body import CORE_SHIFT, casting
from scanmass.studies.rotor_body import HOLE_DEPTH, HOLE_PLACE, HOLE_RADIUS, HOLE_SEGMENTS, rotor
from scanmass.studies.stone_body import stone_beast


def ball(radius: float, turns: int, levels: int) -> Body:
    polar = np.pi * np.arange(1, levels) / levels
    angle = 2 * np.pi * np.arange(turns) / turns
    p, a = np.meshgrid(polar, angle, indexing="ij")
    rings = radius * np.stack([np.sin(p) * np.cos(a), np.sin(p) * np.sin(a), -np.cos(p)], axis=2)
    return from_rings("ball", rings, (0.0, 0.0, -radius), (0.0, 0.0, radius))


@pytest.mark.parametrize("make", [stone_beast, bronze_figure, casting, rotor], ids=lambda f: f.__name__)
def test_figures_agree_with_another_integrator(make: Callable[[], Body]) -> None:
    body = make().moved(turned((10.0, -20.0, 30.0)), (0.3, -0.2, 0.5))
    moments = body.moments()
    other = trimesh.Trimesh(body.vertices, body.faces, process=False)
    assert other.is_watertight
    # Both are exact but for rounding: 1e5 faces in double precision, with room for trimesh's plain sums.
    assert moments[0] == pytest.approx(other.volume, rel=1e-9)
    np.testing.assert_allclose(centroid(moments), other.center_mass, atol=1e-9)
    inertia = central_inertia(moments)
    np.testing.assert_allclose(inertia, other.moment_inertia, atol=1e-9 * np.abs(inertia).max())


def test_rings_close_to_a_ball_at_second_order() -> None:
    exact = 4.0 / 3.0 * np.pi
    errors = [1.0 - ball(1.0, 4 * n, 2 * n).moments()[0] / exact for n in (8, 16, 32)]
    # Chords of a ring of n miss a share of order n**-2 of the area: halving the step quarters the error.
    assert errors[0] / errors[1] == pytest.approx(4.0, rel=0.05)
    assert errors[1] / errors[2] == pytest.approx(4.0, rel=0.02)


def test_a_cavity_counts_negative() -> None:
    shell = with_cavity(box("crate", (2.0, 2.0, 2.0)), box("hollow", (1.0, 1.0, 1.0), (0.25, 0.0, 0.0)))
    moments = shell.moments()
    assert moments[0] == pytest.approx(7.0, rel=1e-14)
    # Signed sum of first moments: -1 x 0.25 over 7.
    assert centroid(moments)[0] == pytest.approx(-0.25 / 7.0, rel=1e-13)


def test_an_open_body_is_refused() -> None:
    crate = box("crate", (1.0, 1.0, 1.0))
    with pytest.raises(ValueError, match=r"crate is not a closed mesh: EdgeCount\(open=3"):
        Body("crate", crate.vertices, crate.faces[1:])


def test_the_rotor_lost_just_its_hole() -> None:
    whole, drilled = rotor(with_hole=False).moments(), rotor().moments()
    area = 0.5 * HOLE_SEGMENTS * HOLE_RADIUS**2 * np.sin(2 * np.pi / HOLE_SEGMENTS)
    lost = whole - drilled
    # Differences of 1e-3 m3 in double precision, so 1e-16 of some 1e-6.
    assert lost[0] == pytest.approx(area * HOLE_DEPTH, rel=1e-8)
    np.testing.assert_allclose(centroid(lost), np.add(HOLE_PLACE, (0.5 * HOLE_DEPTH, 0.0, 0.0)), atol=1e-9)


def test_the_rotor_before_keyway_and_hole_is_on_its_axis() -> None:
    # Pappus: frusta of the profile, times what a ring of 240 corners has of a circle's area; the six through holes
    # of 64 corners less; then the keyway, whose outline's area is 37 x 8 mm and a circle of 48 corners.
    x, r = np.array(
        [(0, 14), (1, 15), (62, 15), (62, 20), (111, 20), (111, 80), (113, 82), (137, 82), (139, 80)]
        + [(139, 24), (252, 24), (252, 65), (276, 65), (276, 20), (332, 20), (332, 15), (399, 15), (400, 14)]
    ).T
    frusta = np.sum(np.diff(x) * (r[1:] ** 2 + r[1:] * r[:-1] + r[:-1] ** 2)) / 3.0

    def polygon(n: int) -> float:
        return 0.5 * n * float(np.sin(2 * np.pi / n))

    without_keyway = polygon(240) * frusta - 6 * polygon(64) * 11.0**2 * 28.0
    keyway_at_most = (37.0 * 8.0 + polygon(48) * 4.0**2) * 4.0
    lost = without_keyway - 1e9 * rotor(with_hole=False).moments()[0]
    # The shaft falls away from the key's flat by up to 0.55 mm: the metal lost is less than the full depth's.
    assert 0.9 * keyway_at_most < lost < keyway_at_most


def test_the_core_shift_moves_the_centre_the_other_way() -> None:
    drawn, cast = casting().moments(), casting(CORE_SHIFT).moments()
    moved = centroid(cast) - centroid(drawn)
    assert moved[1] > 1e-4
    assert moved[0] < 0.0
    # The drawn casting is the same on both sides of y = 0; its meshes' holes are polygons, even-sided.
    assert centroid(drawn)[1] == pytest.approx(0.0, abs=1e-9)
    # The core lies wholly in the barrel, so what it takes away is the same.
    assert cast[0] == pytest.approx(drawn[0], rel=1e-9)


def test_the_bronze_wall_is_five_to_eight_millimetres() -> None:
    figure = bronze_figure()
    half = len(figure.vertices) // 2
    outer, inner = figure.vertices[:half], figure.vertices[half:]
    skin = o3d.t.geometry.RaycastingScene()
    half_faces = figure.faces[: len(figure.faces) // 2]
    skin.add_triangles(o3d.core.Tensor(outer.astype(np.float32)), o3d.core.Tensor(half_faces.astype(np.uint32)))
    distance = skin.compute_distance(o3d.core.Tensor(inner.astype(np.float32)), nthreads=1).numpy()
    # Where folds are sharper than the wall is thick the nearest metal is a little nearer than along the normal.
    assert distance.min() > 0.0045
    assert distance.max() < 0.0081
    assert np.quantile(distance, 0.01) > 0.005


def test_the_stone_stands_on_a_flat_and_hides_places_from_its_middle() -> None:
    stone = stone_beast()
    assert stone.vertices[:, 2].min() == 0.0
    other = trimesh.Trimesh(stone.vertices, stone.faces, process=False)
    # Not star-shaped: from the centroid, many faces are seen from behind. And pierced: not a sphere's topology.
    towards = np.einsum("ij,ij->i", other.face_normals, other.triangles_center - other.center_mass)
    assert np.mean(towards < 0) > 0.02
    assert other.euler_number < 2


def test_rounding_for_a_file_is_kept_by_it() -> None:
    body = casting().rounded(0.001)
    again = (body.vertices / 0.001).astype(np.float32).astype(np.float64) * 0.001
    np.testing.assert_array_equal(again, body.vertices)
