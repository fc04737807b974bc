"""Noise that is declared, or bounded from above, where views cannot tell it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from scipy.spatial.distance import cdist

from scanmass.doubt import Figure
from scanmass.errors import Note
from scanmass.uncertainty.distances import signed_distances
from scanmass.uncertainty.field import Shape, correlation
from scanmass.uncertainty.noise import NoiseModel
from scanmass.uncertainty.patches import Patches
from scanmass.uncertainty.sources import factor

FloatArray = npt.NDArray[np.float64]
IndexArray = npt.NDArray[np.int64]

ASSUMED_LENGTH = 0.1
"""Share of the size over which noise of unknown length is taken to go together: real scanners were seen at about
0.07 of the size and below, rounded up."""
LEAST_FOR_UPPER_BOUND = 500


@dataclass(frozen=True)
class Declared:
    """What the pipeline file says of the scanner, SI units.

    ``noise_std``: one standard deviation of the surface's place along its normal, None where not declared;
    ``noise_length``: l in exp(-(d/l)^2/2), 0 for noise of every point by itself, None where not declared;
    ``scale``: true = scale x measured; the surface comes with its value already applied, only its doubt is used.
    ``offset_std``: of a shift of the whole surface along its normal, in every view alike.
    ``noise_from_certificate``: ``noise_std`` is what one view has, not what all views share.
    """

    noise_std: float | None = None
    noise_length: float | None = None
    scale: Figure | None = None
    offset_std: float = 0.0
    noise_from_certificate: bool = False

    def __post_init__(self) -> None:
        for name in ("noise_std", "noise_length", "offset_std"):
            number = getattr(self, name)
            if number is not None and not (np.isfinite(number) and number >= 0):
                raise ValueError(f"{name} must be zero or more, got {number}")


def field_rows(patches: Patches, std: float, length: float, shape: Shape = "gaussian") -> FloatArray:
    """Rows (k, 10) of the moments' covariance for one field over the whole surface, the same in every view.

    Sum over patches j, l of G_j G_l^T std^2 rho(d_jl / length). At length 0 every scan point errs by itself, and a
    patch by std over the root of its points (a patch without points counts as one point).
    """
    if std == 0:
        return np.zeros((0, 10))
    if length == 0:
        points = np.maximum(patches.counts.sum(axis=1), 1.0)
        alone = std / np.sqrt(points)[:, None] * patches.moments
        return factor(alone.T @ alone)
    # Correlation of patch means: patches have a width, which only lengths below it feel; then the sum over a patch
    # is too large, never too small.
    rho = correlation(cdist(patches.centres, patches.centres), length, shape)
    covariance: FloatArray = std**2 * (patches.moments.T @ rho @ patches.moments)
    return factor(covariance)


def from_declaration(patches: Patches, declared: Declared) -> NoiseModel:
    """Noise as declared; a missing length is assumed, rounded up, and listed."""
    if declared.noise_std is None:
        raise ValueError("noise_std is not declared")
    std, length = declared.noise_std, declared.noise_length
    assumptions: tuple[Note, ...] = ()
    if std == 0:
        text = "The surface is taken as exact (noise_std: 0), as for a nominal model; only the other doubts count."
        return NoiseModel("declared", 0.0, length, views=patches.views, assumptions=(Note("surface-exact", text),))
    if length is None:
        length = ASSUMED_LENGTH * patches.size
        text = (
            f"noise_length is not declared: noise is taken to go together over {1000 * length:.3g} mm (a tenth of the "
            "longest side, more than most scanners show). Declare scan.noise_length to change it."
        )
        assumptions = (Note("noise-length-assumed", text),)
    rows = field_rows(patches, std, length)
    return NoiseModel(
        "declared",
        std,
        length,
        "gaussian",
        views=patches.views,
        parts=(("scan noise", rows, None),),
        assumptions=assumptions,
        warnings=_too_few_views(patches),
    )


def upper_bound(
    patches: Patches, points: FloatArray, coarse_vertices: FloatArray, coarse_faces: IndexArray
) -> NoiseModel | None:
    """An upper bound on the noise of one cloud: all that a coarse surface leaves, shape and noise together.

    Parameters
    ----------
    points : (n, 3), samples, or the vertices of a mesh, in the scan's frame
    coarse_vertices, coarse_faces : a closed surface of the same points at about a sixteenth of the size

    Returns None with fewer than 500 points. Noise alike over much more than the coarse surface's cells does not
    show: the length is therefore a tenth of the size, and what a coarse surface follows is not in the bound.
    """
    if len(points) < LEAST_FOR_UPPER_BOUND:
        return None
    residual, _ = signed_distances(points - patches.centre, coarse_vertices - patches.centre, coarse_faces)
    std = float(np.sqrt(np.mean(residual**2)))
    length = ASSUMED_LENGTH * patches.size
    text = (
        f"Nothing says how noisy this scan is. Its points stray {1000 * std:.2g} mm (one standard deviation) from a "
        "coarse surface, shape and noise together; that is used as an upper bound of the noise. Errors alike over "
        "more than a tenth of the object do not show in it. Declare scan.noise_std, or scan again: three scans tell."
    )
    return NoiseModel(
        "upper_bound",
        std,
        length,
        "gaussian",
        views=patches.views,
        parts=(("scan noise (upper bound)", field_rows(patches, std, length), None),),
        warnings=(Note("noise-upper-bound", text), *_too_few_views(patches)),
    )


def _too_few_views(patches: Patches) -> tuple[Note, ...]:
    """Two views differ by one number where they meet: no 95 % can be drawn from that."""
    if patches.views != 2:
        return ()
    text = (
        "Two views cannot tell how noisy they are: where they meet they differ by one number, and no 95 % follows from "
        "the data. The bounds rest on what is declared or taken as an upper bound; a third view would tell."
    )
    return (Note("two-views", text),)


def unknown(patches: Patches) -> NoiseModel:
    """Nothing to go by: no bound is claimed."""
    text = (
        "The noise of this scan is not known: it has fewer than three overlapping views, and no noise_std is declared, "
        "so no bound is stated. Declare scan.noise_std (0 mm for a nominal model), or scan the object three times."
    )
    return NoiseModel("none", views=patches.views, warnings=(Note("noise-unknown", text),))
