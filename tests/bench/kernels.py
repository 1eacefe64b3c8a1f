"""The table engine against a copy of the same bytes, and against what other libraries do with a table."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from bench.inputs import photograph
from bench.timing import Ratio, compare
from hueferry.applying.engine import Engine, apply_table
from hueferry.arrays import Pixels
from hueferry.colour.encoding import SRGB
from hueferry.picture import Picture
from hueferry.tables.build import build_table
from hueferry.tables.table import Table

SMALL = (1000, 1500)


def measure_kernels(turns: int) -> Iterator[Ratio]:
    """Compare 24-megapixel tables in every depth with a copy, and 1.5 megapixels with other libraries."""
    table = build_table(lambda colours: colours * [0.97, 1.1, 1.1] + [0.01, 0.004, -0.006], SRGB)
    photo = photograph()
    for name, pixels, bits in _depths(photo):
        into = np.zeros_like(pixels)
        for threads in (1, 2):
            picture = Picture(pixels, SRGB, bits=bits)
            yield compare(
                f"table on 24 MP, {name}, {threads} thread{'s' * (threads > 1)}, over a copy into a buffer",
                lambda picture=picture, threads=threads: apply_table(table, picture, threads=threads),
                lambda pixels=pixels, into=into: np.copyto(into, pixels),
                turns=turns,
            )
    yield from _others(photo[: SMALL[0], : SMALL[1]].copy(), table, turns)


def _depths(photo: Pixels) -> list[tuple[str, Pixels, int]]:
    return [
        ("8 bit", photo, 8),
        ("16 bit", photo.astype(np.uint16) * 257, 16),
        ("float32", photo.astype(np.float32) / 255, 32),
    ]


def _others(pixels: Pixels, table: Table, turns: int) -> Iterator[Ratio]:
    from PIL import Image, ImageFilter
    from scipy.ndimage import map_coordinates

    even = Table(table.lattice)  # the others know no input curves
    engine, image = Engine(even, np.uint8, 8), Image.fromarray(pixels)
    values = np.clip(table.lattice.transpose(2, 1, 0, 3), 0, 1).reshape(-1, 3)
    filter_ = ImageFilter.Color3DLUT(table.size, values, _copy_table=False)
    planes = [np.ascontiguousarray(table.lattice[..., channel]) for channel in range(3)]

    def by_scipy() -> Pixels:
        at = (pixels.reshape(-1, 3).T / 255 * (table.size - 1)).astype(np.float32)
        found = np.stack([map_coordinates(plane, at, order=1) for plane in planes], axis=-1)
        return (np.clip(found, 0, 1) * 255 + 0.5).astype(np.uint8)

    yield compare(
        "table on 1.5 MP, 1 thread, over Pillow's (trilinear)",
        lambda: engine.apply(pixels), lambda: image.filter(filter_), turns=turns,
    )  # fmt: skip
    yield compare(
        "table on 1.5 MP, 1 thread, over scipy's map_coordinates",
        lambda: engine.apply(pixels), by_scipy, turns=max(2, turns // 3),
    )  # fmt: skip
