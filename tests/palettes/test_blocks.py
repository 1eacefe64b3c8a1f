"""Blocks: the whole picture, cut up."""

from __future__ import annotations

import numpy as np
import pytest
from skimage import data

from hueferry.errors import InputError
from hueferry.palettes.blocks import count_blocks
from hueferry.palettes.build import palette_of
from hueferry.picture import Picture
from palettes.coded import Coded

CAT = Picture(data.chelsea(), Coded())


def test_blocks_add_up_to_the_picture() -> None:
    blocks = count_blocks(CAT)
    palette = palette_of(CAT)

    total = blocks.counts.sum(axis=0)
    mean = total @ blocks.colours / total.sum()
    assert blocks.counts.shape[0] == 64
    assert total.sum() == palette.pixels
    assert mean == pytest.approx(palette.mean, abs=1e-3)


def test_a_block_has_the_colours_of_its_place() -> None:
    pixels = np.full((40, 40, 3), (200, 60, 40), np.uint8)
    pixels[:, 20:] = (30, 90, 160)

    blocks = count_blocks(Picture(pixels, Coded()), side=2)

    assert blocks.counts.tolist() in ([[400, 0], [0, 400]] * 2, [[0, 400], [400, 0]] * 2)


def test_masked_blocks_are_left_out() -> None:
    mask = np.zeros(CAT.shape, bool)
    mask[:, : CAT.shape[1] // 2] = True

    blocks = count_blocks(CAT, mask=mask)

    assert len(blocks.counts) in (32, 40)  # the middle column of blocks may be cut by the mask
    assert blocks.counts.sum() <= mask.sum()


def test_a_tiny_picture_has_as_many_blocks_as_pixels() -> None:
    blocks = count_blocks(Picture(np.arange(18, dtype=np.uint8).reshape(2, 3, 3) + 9, Coded()))

    assert blocks.counts.sum() == 6
    assert len(blocks.counts) == 6


def test_a_picture_of_clipped_pixels_is_black_and_white() -> None:
    pixels = np.zeros((9, 9, 3), np.uint8)
    pixels[4:] = 255

    blocks = count_blocks(Picture(pixels, Coded()), side=3)

    assert blocks.counts.sum(axis=0).tolist() == [36, 45]
    assert blocks.colours[:, 0] == pytest.approx([0, 1], abs=1e-6)


def test_an_empty_mask_leaves_no_blocks() -> None:
    with pytest.raises(InputError, match="no pixel was counted"):
        count_blocks(CAT, mask=np.zeros(CAT.shape, bool))
