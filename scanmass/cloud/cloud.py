"""The cloud that stages hand on, and the points they took away."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import numpy.typing as npt

FloatArray = npt.NDArray[np.float64]


@dataclass(frozen=True)
class Cloud:
    """Samples of a surface, in metres, in the scan's frame.

    ``points`` (n, 3); ``view`` (n,) int32, index into ``view_names`` and ``scanners``;
    ``count`` (n,) int32, scan points behind each sample (1 where nothing was thinned);
    ``normals`` (n, 3) unit and outward, or None before orientation; ``file_normals`` (n, 3) as the file gave them;
    ``scanners`` (v, 3), NaN where a view's scanner position is unknown;
    ``spacing``: median distance from a sample to the nearest other sample;
    ``at_edge`` (n,) bool: at an edge of its view's range grid (mixed pixels are likely), or None without grids.
    """

    points: FloatArray
    view: npt.NDArray[np.int32]
    count: npt.NDArray[np.int32]
    view_names: tuple[str, ...]
    scanners: FloatArray
    spacing: float
    normals: FloatArray | None = None
    file_normals: FloatArray | None = None
    colours: npt.NDArray[np.uint8] | None = None
    at_edge: npt.NDArray[np.bool_] | None = None

    def __post_init__(self) -> None:
        n = len(self.points)
        if self.points.shape != (n, 3) or not np.isfinite(self.points).all():
            raise ValueError(f"points must be finite and (n, 3), got {self.points.shape}")
        for name in ("view", "count", "at_edge"):
            array = getattr(self, name)
            if array is not None and array.shape != (n,):
                raise ValueError(f"{name} must be ({n},), got {array.shape}")
        for name in ("normals", "file_normals", "colours"):
            array = getattr(self, name)
            if array is not None and array.shape != (n, 3):
                raise ValueError(f"{name} must be ({n}, 3), got {array.shape}")
        if self.scanners.shape != (len(self.view_names), 3):
            raise ValueError(f"scanners must be ({len(self.view_names)}, 3), got {self.scanners.shape}")

    def keep(self, mask: npt.NDArray[np.bool_]) -> Cloud:
        """The samples where ``mask`` (n,) is true, in the same order."""

        def part(array: npt.NDArray[Any] | None) -> Any:
            return None if array is None else array[mask]

        return replace(
            self,
            points=self.points[mask],
            view=self.view[mask],
            count=self.count[mask],
            normals=part(self.normals),
            file_normals=part(self.file_normals),
            colours=part(self.colours),
            at_edge=part(self.at_edge),
        )

    @property
    def size(self) -> float:
        """Longest side of the axis-aligned box round the samples, in metres."""
        return float(np.ptp(self.points, axis=0).max())


REASONS = ("support plane", "turntable", "clutter", "grid edge", "outlier")
"""Why a point was removed; ``Removed.reason`` indexes this."""


@dataclass(frozen=True)
class Removed:
    """Samples taken away: ``points`` (n, 3) in metres, ``count`` (n,) scan points, ``reason`` (n,) into REASONS."""

    points: FloatArray
    count: npt.NDArray[np.int32]
    reason: npt.NDArray[np.uint8]

    @classmethod
    def nothing(cls) -> Removed:
        """No sample at all."""
        return cls(np.empty((0, 3)), np.empty(0, np.int32), np.empty(0, np.uint8))

    @classmethod
    def from_cloud(cls, cloud: Cloud, mask: npt.NDArray[np.bool_], reason: str) -> Removed:
        """The samples of ``cloud`` where ``mask`` is true, all with one reason."""
        n = int(mask.sum())
        return cls(cloud.points[mask], cloud.count[mask], np.full(n, REASONS.index(reason), np.uint8))

    def joined(self, other: Removed) -> Removed:
        """These and those."""
        return Removed(
            np.concatenate([self.points, other.points]),
            np.concatenate([self.count, other.count]),
            np.concatenate([self.reason, other.reason]),
        )
