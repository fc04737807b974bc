"""The density of materials, each with its own range and where the range comes from."""

from scanmass.materials.table import MARKS, Material, find, materials, search
from scanmass.materials.wood import wood_density

__all__ = ["MARKS", "Material", "find", "materials", "search", "wood_density"]
