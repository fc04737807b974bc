"""What is declared of the scanner, completed from its certificate, and the shift of the surface it allows."""

from __future__ import annotations

from dataclasses import dataclass

from scanmass.doubt import Figure
from scanmass.errors import Declined, Note
from scanmass.uncertainty.certificate import Certificate
from scanmass.uncertainty.declared import Declared
from scanmass.uncertainty.patches import Patches
from scanmass.uncertainty.sources import Parts, Term, on_outer_part

_NO_SCANNER = 0.1
"""Relative error of lengths that no certificate allows: a slip of units."""


@dataclass(frozen=True)
class Reading:
    """What is declared, completed from a certificate, and what that assumes."""

    declared: Declared
    assumptions: tuple[Note, ...] = ()
    warnings: tuple[Note, ...] = ()


def read_certificate(certificate: Certificate, declared: Declared, size: float) -> Reading:
    """What is declared, completed from the certificate, for an object of longest side ``size`` in metres.

    What the pipeline file declares by itself (scan.noise_std, scan.scale) is kept, and the certificate's figure for it
    is not used.

    Raises
    ------
    Declined
        If the certificate allows lengths to be off by a tenth or more.

    >>> completed = read_certificate(Certificate(form=4e-4, size=1e-4), Declared(), 0.5).declared
    >>> completed.noise_std, round(completed.offset_std * 1e6, 1)
    (0.0001, 28.9)
    """
    used: list[str] = []
    unused: list[str] = []
    noise, scale = certificate.noise_std, None
    limit = certificate.scale_limit(size)
    if noise is not None:
        said = f"noise of a point {_mm(noise)} (PF / 4, one standard deviation)"
        _among(used, unused, declared.noise_std is None, f"{said}, unless the views show their own")
    if limit is not None:
        if limit >= _NO_SCANNER:
            raise Declined(
                f"scan.certificate allows lengths of {_mm(size)}, the object's own, to be off by {100 * limit:.0f} %",
                allowed="check E and SD, and their units",
            )
        scale = Figure.uniform(1.0 - limit, 1.0 + limit)
        _among(used, unused, declared.scale is None, f"lengths right to {100 * limit:.2g} % (E / L or SD / L)")
    if certificate.size is not None:
        used.append(f"the whole surface too far out or too far in by up to {_mm(0.5 * certificate.size)} (PS / 2)")
    completed = Declared(
        noise if declared.noise_std is None else declared.noise_std,
        declared.noise_length,
        scale if declared.scale is None else declared.scale,
        offset_std=certificate.offset_std,
        noise_from_certificate=noise is not None and declared.noise_std is None,
    )
    return Reading(completed, _assumptions(used, unused), _warnings(certificate, size))


def _among(used: list[str], unused: list[str], taken: bool, said: str) -> None:
    (used if taken else unused).append(said)


def offset_terms(patches: Patches, declared: Declared, parts: Parts) -> list[Term]:
    """The declared shift of the whole surface along its normal, as a source of doubt: dV = area x shift.

    A sphere of radius R gains 3 d / R of its volume.
    """
    if declared.offset_std == 0.0:
        return []
    rows = declared.offset_std * patches.moments.sum(axis=0)[None]
    return [Term("surface offset", "declared", on_outer_part(rows, parts))]


def _assumptions(used: list[str], unused: list[str]) -> tuple[Note, ...]:
    notes = []
    if used:
        text = (
            f"The scanner's certificate is read in scanmass's own way, which no norm lays down: {'; '.join(used)}; any "
            "error within a limit is taken as equally likely. The scanner was tested on a small mat body: shiny, dark, "
            "translucent or sprayed surfaces may scan worse."
        )
        notes.append(Note("certificate-own-reading", text))
    if unused:
        text = f"Not taken from the certificate, since the pipeline file declares it itself: {'; '.join(unused)}."
        notes.append(Note("certificate-figure-not-used", text))
    return tuple(notes)


def _warnings(certificate: Certificate, size: float) -> tuple[Note, ...]:
    if certificate.longest is None or size <= certificate.longest:
        return ()
    text = (
        f"The object is {_mm(size)} long, but the scanner was tested over {_mm(certificate.longest)} only: what "
        "joining scans over the longer way adds is not in the certificate, nor in the bounds. Check a known length on "
        "the object."
    )
    return (Note("beyond-certified-length", text),)


def _mm(length: float) -> str:
    return f"{float(f'{1000 * length:.3g}'):g} mm"
