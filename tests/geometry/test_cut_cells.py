"""Exact cells against the polyhedral integrals, brute-force clipping, and awkward grids."""

from __future__ import annotations

import numpy as np
import pytest
import trimesh
from scipy.optimize import linprog
from scipy.spatial import ConvexHull, HalfspaceIntersection

from scanmass.density.cells import cut_solid
from scanmass.geometry.cut_cells import cut_cells
from scanmass.geometry.moments import translated
from scanmass.geometry.polyhedron import polyhedron_moments
from tests.geometry.test_polyhedron import TURN, bodies


@pytest.mark.parametrize("turn", [np.eye(3), TURN], ids=["along the grid", "turned"])
@pytest.mark.parametrize("name", bodies())
@pytest.mark.parametrize("cells", [1, 7, 32, 100])
def test_sum_of_cells_is_the_polyhedron(name: str, turn: np.ndarray, cells: int) -> None:
    vertices, faces = bodies()[name]
    vertices = vertices @ turn.T
    middle = vertices.mean(axis=0)
    exact = polyhedron_moments(vertices - middle, faces)
    summed = translated(cut_solid(vertices, faces, cells=cells).moments(), -middle)
    # The figure. Moments about an origin a thousand sizes away keep ten digits less those of its square.
    limit = 1e-7 if name == "far away" else 1e-9
    np.testing.assert_allclose(summed, exact, rtol=0, atol=limit * np.abs(exact).max())


def intersection(hull: ConvexHull, low: np.ndarray, high: np.ndarray) -> np.ndarray:
    """Moments of a convex body within a box, by scipy's half-space intersection."""
    sides = np.concatenate([np.c_[-np.eye(3), low], np.c_[np.eye(3), -high]])
    planes = np.concatenate([hull.equations, sides])
    # The deepest point within all planes, by a linear programme; no depth, no intersection.
    deepest = linprog(
        [0, 0, 0, -1], A_ub=np.c_[planes[:, :3], np.ones(len(planes))], b_ub=-planes[:, 3], bounds=(None, None)
    )
    if deepest.x[3] < 1e-9:
        return np.zeros(10)
    corners = HalfspaceIntersection(planes, deepest.x[:3]).intersections
    piece = ConvexHull(corners)
    faces = piece.simplices.astype(np.int64)
    normal = np.cross(corners[faces[:, 1]] - corners[faces[:, 0]], corners[faces[:, 2]] - corners[faces[:, 0]])
    inward = np.einsum("ij,ij->i", normal, piece.equations[:, :3]) < 0
    faces[inward] = faces[inward, ::-1]
    return polyhedron_moments(corners, faces)


def test_every_cell_against_brute_force_clipping() -> None:
    vertices = np.array([[0.1, 0, 0], [3, 0.2, 0.3], [0.5, 2.8, 0.1], [0.7, 0.9, 2.9], [2.5, 2.4, 2.2]])
    hull = ConvexHull(vertices)
    mesh = trimesh.convex.convex_hull(vertices)
    cells = cut_solid(np.array(mesh.vertices), np.array(mesh.faces, np.int64), cells=5)
    moments = np.zeros((cells.fraction.size, 10))
    moments[cells.cut] = cells.cut_moments
    whole = np.setdiff1d(np.flatnonzero(cells.fraction), cells.cut)
    moments[whole, 0] = cells.cell**3
    moments[whole, 4:7] = cells.cell**5 / 12
    centres = cells.centres(np.arange(cells.fraction.size))
    for k, centre in enumerate(centres):
        expected = translated(intersection(hull, centre - cells.cell / 2, centre + cells.cell / 2), -centre)
        np.testing.assert_allclose(moments[k], expected, atol=1e-9 * cells.cell**3)


def test_fractions_are_shares_and_far_cells_empty_or_full() -> None:
    vertices, faces = bodies()["hollow lump"]
    cells = cut_solid(vertices, faces, cells=40)
    assert cells.fraction.min() > -1e-6
    assert cells.fraction.max() < 1 + 1e-6
    middle = tuple(np.array(cells.fraction.shape) // 2)
    assert cells.fraction[middle] == 0  # the cavity
    assert not cells.fraction[0].any()
    assert not cells.fraction[:, :, -1].any()


def test_the_answer_does_not_depend_on_threads() -> None:
    import numba

    vertices, faces = bodies()["torus"]
    many = cut_solid(vertices @ TURN.T, faces, cells=50)
    before = numba.get_num_threads()
    numba.set_num_threads(1)
    one = cut_solid(vertices @ TURN.T, faces, cells=50)
    numba.set_num_threads(before)
    assert one.cut_moments.tobytes() == many.cut_moments.tobytes()
    assert one.fraction.tobytes() == many.fraction.tobytes()


def test_a_vertex_outside_the_grid_is_refused() -> None:
    vertices, faces = bodies()["block"]
    with pytest.raises(ValueError, match="vertices must lie within"):
        cut_cells(vertices, faces, 0.5, (4, 4, 4))
