"""The density of wood from its specific gravity and its moisture."""

from __future__ import annotations

WATER = 1000.0
"""kg/m3, as the formula takes it."""


def wood_density(specific_gravity: float, moisture: float) -> float:
    """Density in kg/m3: rho = rho_water G (1 + MC/100).

    Parameters
    ----------
    specific_gravity
        G: oven-dry mass over the volume at that moisture, over the density of water.
    moisture
        MC/100: the mass of the water over the oven-dry mass. Indoors about 0.08, in a sheltered yard about 0.14
        (common practice, no source); green wood far more.

    Raises
    ------
    ValueError
        If the specific gravity is not within (0, 1.5], beyond which no wood goes, or the moisture is negative.

    References
    ----------
    USDA Wood Handbook, FPL-GTR-190 (read on a page that quotes it).

    >>> round(wood_density(0.40, 0.12), 9)
    448.0
    """
    if not 0 < specific_gravity <= 1.5:
        raise ValueError(f"specific gravity of wood lies within (0, 1.5], got {specific_gravity}")
    if not moisture >= 0:
        raise ValueError(f"moisture must be 0 or more, got {moisture}")
    return WATER * specific_gravity * (1 + moisture)
