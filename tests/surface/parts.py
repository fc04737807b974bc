"""Exact CAD parts: B-rep solids with their integrals by OpenCASCADE, and their tessellations."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from OCP.BRep import BRep_Tool
from OCP.BRepAlgoAPI import BRepAlgoAPI_Cut, BRepAlgoAPI_Fuse
from OCP.BRepBuilderAPI import BRepBuilderAPI_MakePolygon
from OCP.BRepFilletAPI import BRepFilletAPI_MakeFillet
from OCP.BRepGProp import BRepGProp
from OCP.BRepMesh import BRepMesh_IncrementalMesh
from OCP.BRepOffsetAPI import BRepOffsetAPI_ThruSections
from OCP.BRepPrimAPI import BRepPrimAPI_MakeBox, BRepPrimAPI_MakeCylinder, BRepPrimAPI_MakeTorus
from OCP.gp import gp_Ax2, gp_Dir, gp_Pnt
from OCP.GProp import GProp_GProps
from OCP.TopAbs import TopAbs_EDGE, TopAbs_FACE, TopAbs_REVERSED
from OCP.TopExp import TopExp_Explorer
from OCP.TopLoc import TopLoc_Location
from OCP.TopoDS import TopoDS, TopoDS_Shape

CHORD = 2e-5
"""Greatest distance of the tessellation from the solid, of sizes about 1: volumes fall short by under 1e-4."""


def _cylinder(at: tuple[float, float, float], way: tuple[float, float, float], r: float, h: float) -> TopoDS_Shape:
    return BRepPrimAPI_MakeCylinder(gp_Ax2(gp_Pnt(*at), gp_Dir(*way)), r, h).Shape()


def _box(low: tuple[float, float, float], high: tuple[float, float, float]) -> TopoDS_Shape:
    return BRepPrimAPI_MakeBox(gp_Pnt(*low), gp_Pnt(*high)).Shape()


def _filleted_block() -> TopoDS_Shape:
    block = _box((0, 0, 0), (1, 0.7, 0.4))
    fillet = BRepFilletAPI_MakeFillet(block)
    edges = TopExp_Explorer(block, TopAbs_EDGE)
    while edges.More():
        fillet.Add(0.05, TopoDS.Edge(edges.Current()))
        edges.Next()
    part = fillet.Shape()
    for bore in (
        _cylinder((0.3, 0.35, -1), (0, 0, 1), 0.12, 3),
        _cylinder((0.7, 0.35, -1), (0, 0, 1), 0.08, 3),
        _cylinder((-1, 0.35, 0.2), (1, 0, 0), 0.05, 3),
    ):
        part = BRepAlgoAPI_Cut(part, bore).Shape()
    return part


def _torus_segment() -> TopoDS_Shape:
    return BRepPrimAPI_MakeTorus(gp_Ax2(), 0.6, 0.2, np.deg2rad(220)).Shape()


def _loft() -> TopoDS_Shape:
    sections = BRepOffsetAPI_ThruSections(True, False)
    for z, a, b in ((0, 0.3, 0.5), (0.5, 0.2, 0.2), (1, 0.4, 0.25)):
        corners = [gp_Pnt(x, y, z) for x, y in ((-a, -b), (a, -b), (a, b), (-a, b))]
        sections.AddWire(BRepBuilderAPI_MakePolygon(*corners, True).Wire())
    sections.Build()
    return sections.Shape()


def _ribbed_plate() -> TopoDS_Shape:
    plate = _box((0, 0, 0), (1, 0.8, 0.06))
    for x in (0.2, 0.5, 0.8):
        plate = BRepAlgoAPI_Fuse(plate, _box((x - 0.03, 0, 0.06), (x + 0.03, 0.8, 0.25))).Shape()
    return plate


def _stepped_shaft() -> TopoDS_Shape:
    shaft = _cylinder((0, 0, 0), (0, 0, 1), 0.1, 0.4)
    for z, r, h in ((0.4, 0.16, 0.2), (0.6, 0.12, 0.25), (0.85, 0.06, 0.15)):
        shaft = BRepAlgoAPI_Fuse(shaft, _cylinder((0, 0, z), (0, 0, 1), r, h)).Shape()
    return shaft


PARTS: dict[str, Callable[[], TopoDS_Shape]] = {
    "filleted block with bores": _filleted_block,
    "torus segment": _torus_segment,
    "loft": _loft,
    "plate with ribs": _ribbed_plate,
    "stepped shaft": _stepped_shaft,
}


@dataclass(frozen=True)
class Exact:
    """Volume, centre (3,) and principal moments (3,), ascending, at unit density."""

    volume: float
    centre: np.ndarray
    principal: np.ndarray


def exact(shape: TopoDS_Shape) -> Exact:
    """Integrals over the B-rep itself, to 1e-10."""
    found = GProp_GProps()
    BRepGProp.VolumeProperties_s(shape, found, 1e-10, False, False)
    centre, inertia = found.CentreOfMass(), found.MatrixOfInertia()
    tensor = np.array([[inertia.Value(i, j) for j in (1, 2, 3)] for i in (1, 2, 3)])
    return Exact(found.Mass(), np.array([centre.X(), centre.Y(), centre.Z()]), np.linalg.eigvalsh(tensor))


def tessellated(shape: TopoDS_Shape) -> tuple[np.ndarray, np.ndarray]:
    """Triangles within CHORD of the solid, face by face (not joined along the edges)."""
    BRepMesh_IncrementalMesh(shape, CHORD, False, 0.05, False)
    vertices: list[tuple[float, float, float]] = []
    faces = []
    explorer = TopExp_Explorer(shape, TopAbs_FACE)
    while explorer.More():
        face, place = TopoDS.Face(explorer.Current()), TopLoc_Location()
        mesh = BRep_Tool.Triangulation_s(face, place)
        move = place.Transformation()
        nodes = [mesh.Node(i + 1).Transformed(move) for i in range(mesh.NbNodes())]
        triangles = np.array([mesh.Triangle(i + 1).Get() for i in range(mesh.NbTriangles())]) - 1 + len(vertices)
        faces.append(triangles[:, ::-1] if face.Orientation() == TopAbs_REVERSED else triangles)
        vertices += [(p.X(), p.Y(), p.Z()) for p in nodes]
        explorer.Next()
    return np.array(vertices), np.concatenate(faces).astype(np.int64)
