"""Text to SI at the door, SI to text in reports: a closed grammar over a closed table of units."""

from scanmass.units.echo import rounded, show, system
from scanmass.units.place import parse_direction, parse_point
from scanmass.units.quantity import parse, parse_noted
from scanmass.units.table import STANDARD_GRAVITY, UNITS, Unit, allowed, metres_per, unit_named

__all__ = [
    "STANDARD_GRAVITY",
    "UNITS",
    "Unit",
    "allowed",
    "metres_per",
    "parse",
    "parse_direction",
    "parse_noted",
    "parse_point",
    "rounded",
    "show",
    "system",
    "unit_named",
]
