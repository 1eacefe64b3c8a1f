"""A picture of cases: source, reference, what came out, what was wanted, and where it differs."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

import cv2
import numpy as np
from numpy.typing import NDArray

from hueferry.colour.difference import delta_e_2000
from hueferry.maps.protocol import Map
from truth.cases import Case
from truth.score import carry, to_lab

Pixels8 = NDArray[np.uint8]

COLUMNS = ("source", "reference", "came out", "wanted", "difference: black 0, white 10 and more")
_TILE = 200, 150
_GAP = 6


def case_row(case: Case, map_: Map | None) -> Pixels8:
    """Lay one case out from left to right."""
    flat = case.source.reshape(-1, 3)
    output = (flat if map_ is None else carry(map_, flat)).reshape(case.source.shape)
    error = delta_e_2000(to_lab(output), to_lab(case.wanted))
    shade = np.clip(error * 25.5, 0, 255).astype(np.uint8)
    tiles = [case.source, case.reference, output, case.wanted, np.repeat(shade[:, :, None], 3, axis=2)]
    gap = np.full((_TILE[1], _GAP, 3), 255, dtype=np.uint8)
    return np.hstack([piece for tile in tiles for piece in (_fitted(tile), gap)][:-1])


def write_rows(rows: Sequence[Pixels8], path: Path) -> None:
    """Write rows below each other, under a line that names the columns; the suffix decides on the format."""
    width = rows[0].shape[1]
    head = np.full((24, width, 3), 255, dtype=np.uint8)
    for index, name in enumerate(COLUMNS):
        spot = (index * (_TILE[0] + _GAP) + 2, 16)
        cv2.putText(head, name, spot, cv2.FONT_HERSHEY_SIMPLEX, 0.36, (0, 0, 0), 1, cv2.LINE_AA)
    gap = np.full((_GAP, width, 3), 255, dtype=np.uint8)
    sheet = np.vstack([head, *(piece for row in rows for piece in (row, gap))])
    quality = [cv2.IMWRITE_JPEG_QUALITY, 85] if path.suffix.lower() in (".jpg", ".jpeg") else []
    packed = cv2.imencode(path.suffix, sheet[:, :, ::-1], quality)[1]
    path.write_bytes(packed.tobytes())


def _fitted(pixels: Pixels8) -> Pixels8:
    height, width = pixels.shape[:2]
    factor = min(_TILE[0] / width, _TILE[1] / height)
    size = max(1, round(width * factor)), max(1, round(height * factor))
    tile = np.full((_TILE[1], _TILE[0], 3), 235, dtype=np.uint8)
    top, left = (_TILE[1] - size[1]) // 2, (_TILE[0] - size[0]) // 2
    tile[top : top + size[1], left : left + size[0]] = cv2.resize(pixels, size, interpolation=cv2.INTER_AREA)
    return tile
