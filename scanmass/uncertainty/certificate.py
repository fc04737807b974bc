"""A scanner's certificate (ISO 10360-13, VDI/VDE 2634) as noise, scale and offset of the surface.

The norms say how a scanner is tested, not what its limits are worth as standard deviations on another object: the
reading here is scanmass's own, and ``reading.py`` lists every figure it gives as assumed.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import sqrt

FORM_PER_STD = 4.0
"""The probing form error is a range: of 25 normal deviations it is 3.9 standard deviations on average; the band of the
middle 95 % (D95) is 3.92."""
_LIMIT = sqrt(3.0)
"""A limit of error over its standard deviation, where anything within the limit is equally likely."""


@dataclass(frozen=True)
class LengthLimit:
    """Limit of a length's error, ``constant + L / divisor``, in metres; without a divisor the constant alone.

    >>> round(LengthLimit(6e-5, 20_000).at(0.5), 9)
    8.5e-05
    """

    constant: float
    divisor: float | None = None

    def at(self, length: float) -> float:
        """The limit for a length, metres."""
        return self.constant + (0.0 if self.divisor is None else length / self.divisor)


@dataclass(frozen=True)
class Certificate:
    """What a certificate states, metres; None where it is silent. Limits, or results of the test: magnitudes.

    ``form``: probing form error PF, the range of the radial deviations from a sphere fitted to its scan.
    ``size``: probing size error PS, of the fitted diameter. ``spacing``: sphere-spacing error SD.
    ``length_error``: length-measurement error E. ``longest``: the longest length that was tested.
    """

    form: float | None = None
    size: float | None = None
    spacing: LengthLimit | None = None
    length_error: LengthLimit | None = None
    longest: float | None = None

    @property
    def noise_std(self) -> float | None:
        """Noise of a point, one standard deviation in metres, from the probing form error."""
        return None if self.form is None else self.form / FORM_PER_STD

    @property
    def offset_std(self) -> float:
        """Standard deviation of a shift of the whole surface along its normal: half the limit of the diameter's error
        is that of the radius, its sign is not known. 0 where the certificate is silent."""
        return 0.0 if self.size is None else 0.5 * self.size / _LIMIT

    def scale_limit(self, size: float) -> float | None:
        """Limit of the relative error of lengths, for an object of this longest side in metres.

        E(l)/l at the object's own size: what the certificate promises of a length as long as the object. The constant
        part is not all scale, but a scanner may err in scale from place to place, and nothing tells how much. Beyond
        the longest length that was tested the certificate promises nothing; its ratio there, which is larger, is kept.
        """
        length = size if self.longest is None else min(size, self.longest)
        limits = [limit.at(length) for limit in (self.spacing, self.length_error) if limit is not None]
        return max(limits) / length if limits else None
