"""A JPEG encoded in bands decodes to the very pixels of one encoded in one go, in independent decoders."""

from __future__ import annotations

import io

import imagecodecs
import numpy as np
import pytest
from PIL import Image

from hueferry.files import jpeg_parts
from hueferry.files.jpeg_parts import encode_in_parts, standing_alone


def scene(height: int, width: int) -> np.ndarray:
    rows, columns = np.mgrid[0:height, 0:width]
    waves = np.stack([np.sin(rows / 9) + np.cos(columns / 13), np.sin(columns / 5), np.cos((rows + columns) / 21)], -1)
    noise = np.random.default_rng(1).normal(0, 6, waves.shape)
    return np.clip(128 + 50 * waves + noise, 0, 255).astype(np.uint8)


@pytest.mark.parametrize("sampling", ["444", "422", "420"])
@pytest.mark.parametrize("shape", [(257, 131), (96, 48), (16, 16), (1, 1), (333, 64)])
def test_bands_decode_to_the_same_pixels_as_the_whole(
    sampling: str, shape: tuple[int, int], monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(jpeg_parts, "_PART", 2048)
    pixels = scene(*shape)

    bands = encode_in_parts(pixels, quality=93, sampling=sampling)

    whole = imagecodecs.jpeg8_encode(pixels, level=93, subsampling=sampling)
    assert np.array_equal(imagecodecs.jpeg8_decode(bands), imagecodecs.jpeg8_decode(whole))
    second, reference = (np.asarray(Image.open(io.BytesIO(stream))) for stream in (bands, whole))
    assert np.array_equal(second, reference)


def test_a_small_picture_is_the_encoders_own_stream() -> None:
    pixels = scene(40, 50)

    assert encode_in_parts(pixels, quality=90, sampling="420") == imagecodecs.jpeg8_encode(
        pixels, level=90, subsampling="420"
    )


def test_more_bands_than_restart_numbers_still_count_right(monkeypatch: pytest.MonkeyPatch) -> None:
    """Restart markers are numbered 0 … 7 again and again (ITU-T T.81, table B.1)."""
    monkeypatch.setattr(jpeg_parts, "_PART", 256)
    pixels = scene(320, 16)

    found = encode_in_parts(pixels, quality=95, sampling="420")

    assert np.array_equal(
        imagecodecs.jpeg8_decode(found),
        imagecodecs.jpeg8_decode(imagecodecs.jpeg8_encode(pixels, level=95, subsampling="420")),
    )


@pytest.mark.parametrize("sampling", ["444", "422", "420"])
def test_the_parts_of_a_stream_are_the_whole_picture(sampling: str, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(jpeg_parts, "_PART", 2048)
    stream = encode_in_parts(scene(700, 96), quality=90, sampling=sampling)

    parts = standing_alone(stream)
    decoded = [np.asarray(Image.open(io.BytesIO(part))) for part in parts]

    assert len(parts) > 2
    apart = np.concatenate(decoded).astype(int) - np.asarray(Image.open(io.BytesIO(stream)))
    seams = np.cumsum([len(rows) for rows in decoded])[:-1]
    inside = np.ones(len(apart), dtype=bool)
    for seam in seams:  # where chroma has half the rows, a decoder blends it over the seam
        inside[seam - 2 : seam + 2] = sampling != "420"
    assert not apart[inside].any()
