"""The cells as a VTK image file: how full each is and what fills it, for any VTK viewer."""

from __future__ import annotations

import base64
import zlib
from collections.abc import Sequence
from pathlib import Path

import numpy as np
import numpy.typing as npt

from scanmass.density.cells import Cells

Float32 = npt.NDArray[np.float32]

MOST_CELLS = 160
"""Cells along an axis in the file; a finer grid is averaged in whole blocks."""

BLOCK_BYTES = 1 << 20


def write_cells(path: Path, cells: Cells, density_kg_m3: Float32, *, most: int = MOST_CELLS) -> None:
    """Write ``fraction`` and ``density_kg_m3`` as cell data of a VTK ImageData file, in metres, in the scan's frame.

    The density is that of the material in the cell: the mass of a cell is fraction x density x its volume, and
    averaging in blocks keeps it.

    Raises
    ------
    ValueError
        If the density (nx, ny, nz) is not on the grid of the cells.
    """
    if density_kg_m3.shape != cells.fraction.shape:
        raise ValueError(f"density must be {cells.fraction.shape}, got {density_kg_m3.shape}")
    block = -(-max(cells.fraction.shape) // most)
    fraction, density = block_averages(cells.fraction, density_kg_m3, block)
    path.write_text(_image(cells.origin, cells.cell * block, fraction, density), encoding="ascii", newline="\n")


def block_averages(fraction: Float32, density: Float32, block: int) -> tuple[Float32, Float32]:
    """Fraction and density over blocks of ``block`` cells a side; beyond the grid lies nothing.

    The density is averaged by what is filled. An empty block gets the plain mean.

    >>> full, half = np.ones((2, 2, 2), np.float32), np.full((2, 2, 2), 0.5, np.float32)
    >>> [float(a[0, 0, 0]) for a in block_averages(half, 1000 * full, 2)]
    [0.5, 1000.0]
    """
    if block == 1:
        return fraction, density
    filled = _block_means(fraction, block)
    mass = _block_means(fraction.astype(np.float64) * density, block)
    plain = _block_means(density, block)
    mixed = np.divide(mass, filled, out=plain.copy(), where=filled > 0)
    return filled.astype(np.float32), mixed.astype(np.float32)


def _block_means(grid: npt.NDArray[np.floating], block: int) -> npt.NDArray[np.float64]:
    counts = [-(-n // block) for n in grid.shape]
    padded = np.zeros([n * block for n in counts])
    padded[: grid.shape[0], : grid.shape[1], : grid.shape[2]] = grid
    shape = [size for n in counts for size in (n, block)]
    means: npt.NDArray[np.float64] = padded.reshape(shape).mean(axis=(1, 3, 5))
    return means


def _image(origin: npt.NDArray[np.float64], cell: float, fraction: Float32, density: Float32) -> str:
    extent = " ".join(f"0 {n}" for n in fraction.shape)
    place = " ".join(repr(float(x)) for x in origin)
    edge = " ".join([repr(float(cell))] * 3)
    return "\n".join(
        [
            '<?xml version="1.0"?>',
            "<!-- scanmass cells, in metres, in the frame of the first scan. mass = fraction x density x volume -->",
            '<VTKFile type="ImageData" version="1.0" byte_order="LittleEndian" header_type="UInt64" '
            'compressor="vtkZLibDataCompressor">',
            f'<ImageData WholeExtent="{extent}" Origin="{place}" Spacing="{edge}">',
            f'<Piece Extent="{extent}">',
            '<CellData Scalars="fraction">',
            _array("fraction", fraction),
            _array("density_kg_m3", density),
            "</CellData>",
            "</Piece>",
            "</ImageData>",
            "</VTKFile>",
            "",
        ]
    )


def _array(name: str, grid: Float32) -> str:
    # VTK counts cells along x first.
    raw = grid.astype("<f4").tobytes(order="F")
    return f'<DataArray type="Float32" Name="{name}" format="binary">\n{_packed(raw)}\n</DataArray>'


def _packed(raw: bytes) -> str:
    """Blocks of zlib behind a header: number of blocks, their size, the last one's if short, each packed size."""
    blocks = [raw[start : start + BLOCK_BYTES] for start in range(0, len(raw), BLOCK_BYTES)]
    packed = [zlib.compress(block, 6) for block in blocks]
    header = [len(blocks), BLOCK_BYTES, len(raw) % BLOCK_BYTES, *map(len, packed)]
    return _text(np.array(header, "<u8").tobytes()) + _text(b"".join(packed))


def _text(data: bytes | Sequence[int]) -> str:
    return base64.b64encode(bytes(data)).decode("ascii")
