"""Exact moments against two independent integrators, printed answers, and invariances."""

from __future__ import annotations

import igl
import mujoco
import numpy as np
import pytest
import trimesh

from scanmass.geometry.moments import centroid, rotated, scaled, translated
from scanmass.geometry.polyhedron import face_areas, face_moments, polyhedron_moments
from scanmass.geometry.tensors import central_inertia, principal
from tests.geometry.shapes import block, revolved, ring

TURN = np.linalg.qr(np.array([[2.0, 1, 0], [-1, 2, 1], [0.3, 0.1, 1]]))[0]


def bodies() -> dict[str, tuple[np.ndarray, np.ndarray]]:
    rng = np.random.default_rng(5)
    lump = trimesh.creation.icosphere(4)
    rough = np.array(lump.vertices) * (1 + 0.2 * rng.random(len(lump.vertices)))[:, None]
    hollow = np.concatenate([rough, 0.5 * rough])
    faces = np.array(lump.faces, np.int64)
    inward = faces[:, ::-1] + len(rough)
    return {
        "block": block([0, 0, 0], [1, 2, 3]),
        "torus": ring(1.0, 0.3, 60),
        "rough lump": (rough, faces),
        "hollow lump": (hollow, np.concatenate([faces, inward])),
        "far away": (rough + [1e3, -2e3, 5e2], faces),
        "spool": revolved(np.array([[0, 0], [2, 0], [2, 0.3], [0.5, 0.4], [0.5, 2], [1.5, 2.2], [0, 2.2]]), 37),
    }


@pytest.mark.parametrize("name", bodies())
def test_agrees_with_trimesh_and_libigl(name: str) -> None:
    vertices, faces = bodies()[name]
    vertices = vertices @ TURN.T
    moments = polyhedron_moments(vertices, faces)
    centre = vertices.mean(axis=0)
    peer = trimesh.Trimesh(vertices - centre, faces, process=False)
    inertia = central_inertia(moments)
    assert moments[0] == pytest.approx(peer.volume, rel=1e-9)
    size = np.ptp(vertices, axis=0).max()
    np.testing.assert_allclose(centroid(moments), peer.center_mass + centre, rtol=0, atol=1e-9 * size)
    np.testing.assert_allclose(inertia, peer.moment_inertia, rtol=0, atol=1e-9 * np.abs(inertia).max())
    middle, volume = igl.centroid(vertices - centre, faces)
    assert moments[0] == pytest.approx(volume, rel=1e-9)
    np.testing.assert_allclose(centroid(moments), middle + centre, rtol=0, atol=1e-9 * size)


def test_agrees_with_mujoco() -> None:
    vertices, faces = bodies()["rough lump"]
    text = (
        "<mujoco><asset><mesh name='m' inertia='exact' vertex='{}' face='{}'/></asset>"
        "<worldbody><body><freejoint/><geom type='mesh' mesh='m' density='1000'/></body></worldbody></mujoco>"
    )
    vertices = vertices.astype(np.float32).astype(float)  # it keeps meshes in single precision
    model = mujoco.MjModel.from_xml_string(
        text.format(" ".join(f"{x:.9g}" for x in vertices.ravel()), " ".join(map(str, faces.ravel())))
    )
    moments = 1000 * polyhedron_moments(vertices, faces)
    assert model.body_mass[1] == pytest.approx(moments[0], rel=1e-5)  # single precision, summed over 5120 faces
    expected = principal(central_inertia(moments))[0]
    np.testing.assert_allclose(np.sort(model.body_inertia[1]), expected, rtol=1e-5)


def test_openstax_tetrahedron() -> None:
    """x + 2y + 3z <= 6 in the first octant (OpenStax Calculus Volume 3, section 5.6): volume 6."""
    vertices = np.array([[0, 0, 0], [6, 0, 0], [0, 3, 0], [0, 0, 2]], dtype=float)
    faces = np.array([[0, 2, 1], [0, 1, 3], [0, 3, 2], [1, 2, 3]])
    moments = polyhedron_moments(vertices, faces)
    np.testing.assert_allclose(moments[:4], [6, 9, 4.5, 3], rtol=1e-14)


def test_openstax_pappus_torus() -> None:
    """Tube 2 about a circle of 4: V = 32 pi^2 (OpenStax Calculus Volume 2, section 2.6)."""
    # 800 x 400 steps: chord errors (pi/400)^2 * 2/3 and (pi/800)^2 * 2/3 add to 5e-5.
    assert polyhedron_moments(*ring(4.0, 2.0, 800))[0] == pytest.approx(32 * np.pi**2, rel=6e-5)


def test_concrete_block_with_hole_and_steel_wedge() -> None:
    """Baker & Haynes, Engineering Statics, chapter 7: 26 633 lb, centre (-3.22, 2.59, 3.37) ft.

    The printed data do not fix the block's sides, only volumes and centroids: signed sums of moments up to the
    first, as the worked example does.
    """
    pieces = [(125.0, 216.0, [-3, 2, 4.5]), (-125.0, 50.27, [-3, 2, 6]), (493.0, 12.0, [-4, 4.67, 1])]
    weight = sum(d * v for d, v, _ in pieces)
    first = sum(d * v * np.array(c) for d, v, c in pieces)
    assert weight == pytest.approx(26633, abs=1)
    np.testing.assert_allclose(first / weight, [-3.22, 2.59, 3.37], atol=0.006)  # printed to 0.01


def test_moves_turns_scales_mirrors_and_splits() -> None:
    vertices, faces = bodies()["rough lump"]
    moments = polyhedron_moments(vertices, faces)
    shift = np.array([0.3, -2.0, 5.0])
    close = {"rtol": 0, "atol": 1e-12 * np.abs(polyhedron_moments(vertices + shift, faces)).max()}
    np.testing.assert_allclose(polyhedron_moments(vertices + shift, faces), translated(moments, shift), **close)
    np.testing.assert_allclose(polyhedron_moments(vertices @ TURN.T, faces), rotated(moments, TURN), **close)
    np.testing.assert_allclose(polyhedron_moments(3 * vertices, faces), scaled(moments, 3.0), rtol=1e-11, atol=1e-9)
    mirrored = polyhedron_moments(vertices * [-1, 1, 1], faces)
    assert mirrored[0] == pytest.approx(-moments[0], rel=1e-12)  # an inside-out mesh is negative
    low, high = block([0, 0, 0], [1, 2, 1]), block([0, 0, 1], [1, 2, 3])
    whole = polyhedron_moments(*block([0, 0, 0], [1, 2, 3]))
    np.testing.assert_allclose(polyhedron_moments(*low) + polyhedron_moments(*high), whole, rtol=1e-13)


def test_closed_meshes_do_not_depend_on_the_apex() -> None:
    vertices, faces = bodies()["torus"]
    far = polyhedron_moments(vertices, faces, apex=np.array([7.0, -3.0, 2.0]))
    np.testing.assert_allclose(far, polyhedron_moments(vertices, faces), rtol=0, atol=1e-10)
    half = faces[: len(faces) // 2]
    assert abs(polyhedron_moments(vertices, half, apex=np.ones(3))[0] - polyhedron_moments(vertices, half)[0]) > 0.01


def test_face_moments_are_the_derivative_of_the_volume_moments() -> None:
    vertices, faces = bodies()["rough lump"]
    step = 1e-6
    area, normals = face_areas(vertices, faces)
    assert area.sum() == pytest.approx(trimesh.Trimesh(vertices, faces, process=False).area, rel=1e-12)
    # Growth by a factor moves each face outward by x.n: d(moment)/ds = sum over faces of int (x.n) monomial.
    grown = (polyhedron_moments(vertices * (1 + step), faces) - polyhedron_moments(vertices * (1 - step), faces)) / (
        2 * step
    )
    heights = np.einsum("ij,ij->i", vertices[faces[:, 0]], normals)  # x.n is constant on a flat face
    np.testing.assert_allclose((heights[:, None] * face_moments(vertices, faces)).sum(axis=0), grown, atol=1e-7)
