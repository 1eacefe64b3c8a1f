"""A picture's blocks as counts over common colours: what resampling of a picture works on."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import pairwise

import attrs
import numpy as np

from hueferry.arrays import Colours, Mask, read_only
from hueferry.colour.spaces import xyz_to_oklab
from hueferry.errors import InputError
from hueferry.palettes.cells import spacing_of
from hueferry.palettes.count import count_pixels, layout_for
from hueferry.palettes.histogram import Counts, Histogram, whole
from hueferry.palettes.reduce import group
from hueferry.picture import PictureSource, Window

_INNER = 32  # cells a channel: blocks are compared after reduction to a few hundred colours


@attrs.frozen(eq=False)
class Blocks:
    """How many pixels of each block of a picture have which colour.

    Attributes:
        colours: (k, 3) Oklab colours that all blocks share.
        counts: (blocks, k) pixels; blocks without any counted pixel are left out.
    """

    colours: Colours = attrs.field(converter=read_only)
    counts: Counts = attrs.field(converter=whole)


def count_blocks(source: PictureSource, *, mask: Mask | None = None, side: int = 8, size: int = 256) -> Blocks:
    """Count a picture block by block, over at most `size` colours common to all blocks.

    Args:
        source: the picture.
        mask: (rows, columns), true where a pixel counts.
        side: blocks along each edge; fewer where the picture has not as many pixels.
        size: largest number of colours.

    Raises:
        InputError: no pixel was counted.
    """
    windows = _grid(source.shape, side)
    histograms = [_count_window(source, window, mask) for window in windows]
    joint = histograms[0]
    for histogram in histograms[1:]:
        joint = joint.merge(histogram)
    if joint.pixels == 0:
        return _clipped_blocks(source, histograms)
    colours = xyz_to_oklab(source.encoding.to_xyz(joint.codes()))
    shares = joint.counts / joint.pixels
    labels = group(colours, shares, size)
    groups = int(labels.max()) + 1
    held = np.bincount(labels, shares, groups)
    means = np.stack([np.bincount(labels, shares * colours[:, c], groups) / held for c in range(3)], axis=1)
    counts = [_by_group(histogram, joint, labels, groups) for histogram in histograms if histogram.pixels]
    return Blocks(means, np.stack(counts))


def _clipped_blocks(source: PictureSource, histograms: Sequence[Histogram]) -> Blocks:
    """Return blocks of black and white alone, as a palette of nothing but clipped pixels is made."""
    counts = np.array([[part.black, part.white] for part in histograms if part.black + part.white])
    if not counts.size:
        raise InputError("no pixel was counted; give a mask that leaves some, or a picture with finite pixels")
    return Blocks(xyz_to_oklab(source.encoding.to_xyz(np.array([[0.0] * 3, [1.0] * 3]))), counts)


def _grid(shape: tuple[int, int], side: int) -> list[Window]:
    rows, columns = (np.linspace(0, length, min(side, length) + 1).astype(int) for length in shape)
    return [
        Window(int(top), int(left), int(bottom - top), int(right - left))
        for top, bottom in pairwise(rows)
        for left, right in pairwise(columns)
    ]


def _count_window(source: PictureSource, window: Window, mask: Mask | None) -> Histogram:
    pixels = source.read(window)
    layout = layout_for(pixels, source.bits, spacing_of(source.encoding), inner=_INNER)
    rows = slice(window.top, window.top + window.height)
    columns = slice(window.left, window.left + window.width)
    return count_pixels(pixels, source.bits, mask=None if mask is None else mask[rows, columns], layout=layout)


def _by_group(part: Histogram, joint: Histogram, labels: Counts, groups: int) -> Counts:
    place = np.searchsorted(joint.cells, part.cells)
    return np.bincount(labels[place], part.counts, groups).astype(np.int64)
