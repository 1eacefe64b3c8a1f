"""The reduced form: same colours at any depth, and only what counts."""

import cv2
import numpy as np
import pytest

from evidence.scenes import picture_of, textured
from hueferry.colour.encoding import SRGB
from hueferry.errors import InputError
from hueferry.evidence.reduced import reduce_picture
from hueferry.picture import Picture


def test_size_is_capped_and_small_pictures_are_kept() -> None:
    big = cv2.resize(textured(0), (1600, 1200))

    reduced = reduce_picture(picture_of(big), max_pixels=100_000)

    assert reduced.gray.size == pytest.approx(100_000, rel=0.01)
    assert reduced.shape == (1200, 1600)
    assert reduce_picture(picture_of(textured(0))).gray.shape == (300, 400)


def test_eight_and_sixteen_bit_agree() -> None:
    pixels = textured(1)
    deep = Picture(pixels.astype(np.uint16) * 257, SRGB, bits=16)

    assert reduce_picture(deep).oklab == pytest.approx(reduce_picture(picture_of(pixels)).oklab, abs=1e-6)


def test_transparent_and_masked_pixels_do_not_count() -> None:
    pixels = textured(2)
    alpha = np.full((300, 400, 1), 255, np.uint8)
    alpha[:, :200] = 0
    mask = np.ones((300, 400), dtype=bool)
    mask[:150] = False

    reduced = reduce_picture(Picture(np.concatenate([pixels, alpha], axis=2), SRGB), mask=mask)

    assert reduced.usable.sum() == 150 * 200
    assert not reduced.usable[:150].any()
    assert not reduced.usable[:, :200].any()


def test_not_a_number_does_not_count() -> None:
    pixels = np.full((40, 50, 3), 0.5, dtype=np.float32)
    pixels[3, 4, 1] = np.nan

    reduced = reduce_picture(Picture(pixels, SRGB))

    assert not reduced.usable[3, 4]
    assert np.isfinite(reduced.oklab).all()


def test_a_mask_of_another_size_is_refused() -> None:
    with pytest.raises(InputError, match="give a mask of the same size"):
        reduce_picture(picture_of(textured(3)), mask=np.ones((3, 4), dtype=bool))
