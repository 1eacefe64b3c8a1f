"""OpenColorIO's processor for a table: tetrahedral, at the pixels' own depth, outside the interpreter lock."""

from __future__ import annotations

from typing import Protocol

import numpy as np

from hueferry.arrays import Pixels
from hueferry.tables.table import Table

DEPTHS = {8: "BIT_DEPTH_UINT8", 10: "BIT_DEPTH_UINT10", 12: "BIT_DEPTH_UINT12", 16: "BIT_DEPTH_UINT16"}
"""Significant bits of integer pixels that the processor reads and writes directly."""

FLOAT = "BIT_DEPTH_F32"


class Processor(Protocol):
    """What OpenColorIO gives: immutable, usable by any number of threads at once, free of the interpreter lock."""

    def apply(self, source: object, target: object) -> None:
        """Send the pixels of one image description to another."""
        ...


def make_processor(table: Table, *, reads: str, writes: str) -> Processor:
    """Return a processor for `table`.

    Args:
        table: the table.
        reads: OpenColorIO's name of the depth that pixels come in.
        writes: the same for the depth they leave in.
    """
    import PyOpenColorIO

    group = PyOpenColorIO.GroupTransform()
    if table.curves is not None:
        curves = PyOpenColorIO.Lut1DTransform(table.curves.shape[1], False)
        curves.setInterpolation(PyOpenColorIO.INTERP_LINEAR)
        curves.setData(np.ascontiguousarray(table.curves.T).ravel())
        group.appendTransform(curves)
    lattice = PyOpenColorIO.Lut3DTransform(table.size)
    lattice.setInterpolation(PyOpenColorIO.INTERP_TETRAHEDRAL)
    lattice.setData(table.lattice.ravel())
    group.appendTransform(lattice)
    # Lossless keeps the lattice as it is: nothing is resampled or approximated.
    depths = getattr(PyOpenColorIO, reads), getattr(PyOpenColorIO, writes)
    general = PyOpenColorIO.Config.CreateRaw().getProcessor(group)
    processor: Processor = general.getOptimizedCPUProcessor(*depths, PyOpenColorIO.OPTIMIZATION_LOSSLESS)
    return processor


def run_processor(processor: Processor, pixels: Pixels, into: Pixels, *, reads: str, writes: str) -> None:
    """Send (height, width, 3 or 4) pixels through a processor; alpha comes out as it went in.

    Args:
        processor: from `make_processor`, with the same depths.
        pixels: C-contiguous; may be read-only.
        into: C-contiguous and writable, of the same shape.
        reads: depth of `pixels`.
        writes: depth of `into`.
    """
    import PyOpenColorIO

    height, width, channels = pixels.shape
    source, target = (
        PyOpenColorIO.PackedImageDesc(array, width, height, channels, getattr(PyOpenColorIO, depth), *_strides(array))
        for array, depth in ((pixels, reads), (into, writes))
    )
    processor.apply(source, target)


def _strides(pixels: Pixels) -> tuple[int, int, int]:
    """Bytes from channel to channel, pixel to pixel and row to row."""
    _, width, channels = pixels.shape
    return pixels.itemsize, pixels.itemsize * channels, pixels.itemsize * channels * width
