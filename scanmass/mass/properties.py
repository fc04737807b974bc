"""Mass, centre of mass, inertia and principal axes of a body from its ten mass moments."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from scanmass.errors import Declined
from scanmass.geometry.moments import centroid
from scanmass.geometry.tensors import central_inertia, principal

FloatArray = npt.NDArray[np.float64]


@dataclass(frozen=True)
class MassProperties:
    """Mass properties in the scan's frame.

    ``mass`` kg; ``center_of_mass`` (3,) m; ``inertia`` (3, 3) kg m2 about the centre of mass, along the scan's axes,
    I = integral (r.r E - r r^T) dm; ``principal_moments`` (3,) ascending; ``axes`` (3, 3), one a row, right-handed.
    """

    mass: float
    center_of_mass: FloatArray
    inertia: FloatArray
    principal_moments: FloatArray
    axes: FloatArray


def mass_properties(moments: FloatArray) -> MassProperties:
    """Mass properties from ten mass moments (10,) about the scan's origin, in the order of ``geometry.moments``.

    Raises
    ------
    Declined
        If the mass is not positive: the surface is open, inside out, or encloses nothing.

    >>> cube = 1000 * np.array([1, 0.5, 0.5, 0.5, 1/3, 1/3, 1/3, 0.25, 0.25, 0.25])
    >>> weighed = mass_properties(cube)
    >>> weighed.mass, weighed.center_of_mass.tolist(), weighed.principal_moments.round(3).tolist()
    (1000.0, [0.5, 0.5, 0.5], [166.667, 166.667, 166.667])
    """
    if not moments[0] > 0:
        raise Declined(
            f"the mass came out as {moments[0]:.6g} kg",
            allowed="a closed surface with its outside outward and a density above zero weighs more than nothing",
        )
    inertia = central_inertia(moments)
    principal_moments, axes = principal(inertia)
    return MassProperties(float(moments[0]), centroid(moments), inertia, principal_moments, axes)
