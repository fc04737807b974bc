"""Scans that are meshes: used as they are, mended where that is plain, closed where open, refused where unclear."""

from __future__ import annotations

import numpy as np
import pytest
import trimesh

from scanmass.errors import Declined
from scanmass.geometry.edges import count_edges
from scanmass.geometry.moments import centroid
from scanmass.geometry.polyhedron import polyhedron_moments
from scanmass.surface.check import thin_walls
from scanmass.surface.from_mesh import from_mesh
from scanmass.surface.surface import Surface
from scanmass.surface.winding import winding_numbers

UP = np.array([0.0, 0.0, 1.0])
BOX = trimesh.creation.box((1.0, 1.0, 1.0))
CORNERS, SIDES = np.array(BOX.vertices), np.array(BOX.faces, np.int64)
BALL = trimesh.creation.icosphere(4)
POINTS, FACES = np.array(BALL.vertices), np.array(BALL.faces, np.int64)
MIDDLES = POINTS[FACES].mean(axis=1)
REVERSED = SIDES[:, ::-1]


def moments(surface: Surface) -> np.ndarray:
    return polyhedron_moments(surface.vertices, surface.faces)


def codes(surface: Surface) -> set[str]:
    return {note.code for note in surface.assumptions + surface.warnings}


def one_turned() -> np.ndarray:
    faces = SIDES.copy()
    faces[3] = faces[3, ::-1]
    return faces


@pytest.mark.parametrize(
    ("vertices", "faces", "volume", "noted"),
    [
        (CORNERS, SIDES, 1.0, set()),
        (CORNERS[SIDES].reshape(-1, 3), np.arange(36).reshape(-1, 3), 1.0, set()),
        (CORNERS, REVERSED, 1.0, {"inside-out"}),
        (CORNERS, one_turned(), 1.0, {"winding-repaired"}),
        (CORNERS, np.concatenate([SIDES, SIDES]), 1.0, {"duplicate-faces-dropped"}),
        (CORNERS, np.concatenate([SIDES, [[0, 0, 1]]]), 1.0, {"degenerate-faces-dropped"}),
        (
            np.concatenate([CORNERS, CORNERS / 2]),
            np.concatenate([SIDES, REVERSED + 8]),
            0.875,
            {"inner-cavities"},
        ),
        (np.concatenate([CORNERS, CORNERS + 3]), np.concatenate([SIDES, REVERSED + 8]), 2.0, {"inside-out"}),
        (np.concatenate([CORNERS, CORNERS + 0.3]), np.concatenate([SIDES, SIDES + 8]), 2.0, {"shells-overlap"}),
    ],
    ids=["plain", "soup", "inside out", "one turned", "twice", "flat face", "cavity", "one shell reversed", "overlap"],
)
def test_closed_meshes(vertices: np.ndarray, faces: np.ndarray, volume: float, noted: set[str]) -> None:
    surface = from_mesh(vertices + 100.0, faces)
    # Rounding only: coordinates of 100 hold 1e-14, and so do their products about the middle.
    assert moments(surface)[0] == pytest.approx(volume, abs=1e-11)
    assert codes(surface) == noted
    assert surface.source == "mesh"
    assert surface.observed_fraction == 1.0
    assert surface.closures == ()


def test_what_counts_twice_is_refused() -> None:
    with pytest.raises(Declined, match="lie inside another and both count as solid"):
        from_mesh(np.concatenate([CORNERS, CORNERS / 2]), np.concatenate([SIDES, SIDES + 8]))


def test_one_sided_strip_is_refused() -> None:
    turn = np.linspace(0, 2 * np.pi, 40, endpoint=False)
    centre = np.stack([np.cos(turn), np.sin(turn), 0 * turn], axis=1)
    across = 0.3 * (np.cos(turn / 2)[:, None] * centre + np.sin(turn / 2)[:, None] * UP)
    strip = np.concatenate([centre + across, centre - across])
    a, b = np.arange(40), np.arange(40) + 40
    c, d = np.append(a[1:], 40), np.append(b[1:], 0)
    moebius = np.concatenate([np.stack([a, b, c], axis=1), np.stack([c, b, d], axis=1)])
    with pytest.raises(Declined, match="faces disagree about which side is outside"):
        from_mesh(strip, moebius)


def test_open_hemisphere() -> None:
    dome = FACES[MIDDLES[:, 2] > 0]
    flat = from_mesh(POINTS + 5.0, dome, underside="flat", up=UP)
    # The faceted ball is 0.25 % short of the round one (edge 0.07: edge^2 / 2).
    assert moments(flat)[0] == pytest.approx(2 / 3 * np.pi, rel=0.004)
    np.testing.assert_allclose(centroid(moments(flat)), [5, 5, 5.375], atol=0.001)
    assert count_edges(flat.faces).closed
    assert codes(flat) == {"rims-filled", "contact-at-lowest-point", "underside-as-declared"}
    with pytest.raises(Declined, match="one-sided"):
        from_mesh(POINTS, dome)


def test_open_box_flat_is_exact() -> None:
    open_box = SIDES[CORNERS[SIDES][:, :, 2].max(axis=1) > -0.5]
    for kind in ("flat", "unknown"):
        surface = from_mesh(CORNERS, open_box, underside=kind, up=UP)
        assert moments(surface)[0] == pytest.approx(1.0, abs=1e-12)
    for closure in surface.closures:
        assert closure.moments[0] == pytest.approx(1.0, abs=1e-12)


def test_hole_in_the_side_of_a_ball() -> None:
    whole = moments(from_mesh(POINTS, FACES))
    surface = from_mesh(POINTS, FACES[MIDDLES[:, 0] < 0.9], underside="seen", up=UP)
    found = np.array([closure.moments for closure in surface.closures])
    assert found[:, 0].min() < whole[0] < found[:, 0].max()
    assert centroid(found)[:, 0].min() < 0 < centroid(found)[:, 0].max()
    assert "hole-closed" in codes(surface)


def test_tangled_mesh_is_sampled() -> None:
    # A fin stands on an edge of the ball (three faces there), and its underside is open.
    fin = [[FACES[0, 0], FACES[0, 1], len(POINTS)]]
    vertices = np.concatenate([POINTS, 1.02 * POINTS[FACES[0, :2]].mean(axis=0, keepdims=True)])
    surface = from_mesh(vertices, np.concatenate([FACES[MIDDLES[:, 2] > -0.95], fin]), underside="flat", up=UP)
    assert "mesh-resampled" in codes(surface)
    assert surface.source == "points"
    # The cap below z = -0.95 is lost: pi h^2 (3 - h)/3 = 0.008, and the facets take 0.25 %.
    assert moments(surface)[0] == pytest.approx(4 / 3 * np.pi - 0.008, rel=0.005)


def test_thin_wall_is_told() -> None:
    plate = from_mesh(CORNERS * [1, 1, 0.02], SIDES)
    (note,) = thin_walls(plate)
    assert note.code == "thin-wall"
    assert "walls of about 20 mm" in note.text
    assert thin_walls(from_mesh(CORNERS, SIDES)) == ()


def test_winding_numbers_against_distance() -> None:
    places = np.random.default_rng(0).uniform(-1.2, 1.2, (50, 3))
    radius = np.linalg.norm(places, axis=1)
    clear = np.abs(radius - 1) > 0.01  # facets are within 0.002 of the sphere
    inside = winding_numbers(places, POINTS, FACES) > 0.5
    np.testing.assert_array_equal(inside[clear], (radius < 1)[clear])
