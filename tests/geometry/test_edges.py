"""Edges, shells and rims of small meshes whose answer can be counted by hand."""

from __future__ import annotations

import numpy as np

from scanmass.geometry.edges import boundary_loops, count_edges, shell_labels, welded
from tests.geometry.shapes import BOX_FACES, block


def test_closed_open_clashing_and_crowded() -> None:
    assert count_edges(BOX_FACES).closed
    assert count_edges(BOX_FACES[2:]).open == 4  # the bottom is two triangles round four outer edges
    turned = BOX_FACES.copy()
    turned[0] = turned[0, ::-1]
    assert count_edges(turned).clashing == 3
    fin = np.concatenate([BOX_FACES, [[0, 6, 8]]])  # a fin on the diagonal of nothing: three open edges
    assert count_edges(fin).open == 3
    wall = np.concatenate([BOX_FACES, [[0, 1, 8], [1, 0, 9]]])
    counted = count_edges(wall)
    assert (counted.crowded, counted.open) == (1, 4)


def test_shells_are_joined_by_edges_not_by_corners() -> None:
    two = np.concatenate([BOX_FACES, BOX_FACES + 8])
    n, labels = shell_labels(two)
    assert n == 2
    assert (labels[:12] == labels[0]).all()
    assert (labels[12:] != labels[0]).all()


def test_rims_are_loops() -> None:
    loops, simple = boundary_loops(BOX_FACES[4:])  # an open-ended tube
    assert simple
    assert sorted(sorted(loop.tolist()) for loop in loops) == [[0, 1, 2, 3], [4, 5, 6, 7]]
    assert boundary_loops(BOX_FACES) == ([], True)
    bow_tie = np.array([[0, 1, 2], [0, 3, 4]])
    assert boundary_loops(bow_tie) == ([], False)


def test_welding_joins_equal_corners() -> None:
    vertices, faces = block([0, 0, 0], [1, 1, 1])
    soup = vertices[faces].reshape(-1, 3)
    joined, numbered = welded(soup, np.arange(36).reshape(-1, 3))
    assert len(joined) == 8
    assert count_edges(numbered).closed
