"""What a preview of a map shows: its curves and gains along gray, and how a chart and a palette move."""

from __future__ import annotations

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Codes, Lab, Weights
from hueferry.colour.encoding import SRGB
from hueferry.colour.spaces import oklab_to_xyz, xyz_to_lab
from hueferry.palettes.groups import group
from hueferry.palettes.palette import Palette
from hueferry.picture import Encoding
from hueferry.tables.lookup import look_up
from hueferry.tables.table import Table

Floats = NDArray[np.float64]

_HUES, _LEVELS, _GRAYS = 18, 5, 18
_GROUPS = 24


@attrs.frozen(eq=False)
class Moved:
    """Colours before and after a map, clipped as pixels are.

    Attributes:
        before: (n, 3) codes.
        after: (n, 3) codes.
        weights: (n,) shares.
        encoding: what the codes mean.
    """

    before: Codes
    after: Codes
    weights: Weights
    encoding: Encoding

    @classmethod
    def through(cls, table: Table, codes: Codes, weights: Weights, encoding: Encoding) -> Moved:
        """Send codes through a table."""
        before = np.clip(codes, 0.0, 1.0)
        return cls(before, np.clip(look_up(table, before), 0.0, 1.0), weights, encoding)

    def lab(self) -> tuple[Lab, Lab]:
        """Return both in CIELAB, D50."""
        return xyz_to_lab(self.encoding.to_xyz(self.before)), xyz_to_lab(self.encoding.to_xyz(self.after))

    def shown(self) -> tuple[NDArray[np.uint8], NDArray[np.uint8]]:
        """Return both as (n, 3) sRGB."""
        return shown(self.before, self.encoding), shown(self.after, self.encoding)


def shown(codes: Codes, encoding: Encoding) -> NDArray[np.uint8]:
    """Return (n, 3) codes as sRGB, 0 … 255."""
    return np.rint(255 * np.clip(SRGB.from_xyz(encoding.to_xyz(codes)), 0.0, 1.0)).astype(np.uint8)


def gray_ramp(count: int) -> Codes:
    """Return (count, 3) equal steps from black to white."""
    return np.repeat(np.linspace(0.0, 1.0, count)[:, None], 3, axis=1)


def gray_gains(table: Table, codes: Codes) -> tuple[Floats, Floats]:
    """Return the largest and the smallest stretch, (n,) each, around (n, 3) codes, in code values.

    They are singular values of the differences over one 8-bit code to either side.
    """
    step = 1 / 255
    columns = []
    for axis in range(3):
        ahead, behind = (np.clip(codes + sign * step * np.eye(3)[axis], 0, 1) for sign in (1, -1))
        width = (ahead - behind)[:, axis : axis + 1]
        columns.append((look_up(table, ahead) - look_up(table, behind)) / width)
    values = np.linalg.svd(np.stack(columns, axis=2), compute_uv=False)
    return values[:, 0], values[:, 2]


def chart_codes(encoding: Encoding) -> Codes:
    """Return a chart as (rows · columns, 3) codes: a row of grays, then hues in Oklab from light to dark.

    Every patch has six tenths of the chroma that the encoding holds at its lightness and hue.
    """
    hues = np.linspace(0, 2 * np.pi, _HUES, endpoint=False) + 0.35
    rings = [_ring(encoding, float(lightness), hues) for lightness in np.linspace(0.88, 0.38, _LEVELS)]
    return np.concatenate([gray_ramp(_GRAYS), *rings])


def chart_shape() -> tuple[int, int]:
    """Return rows and columns of the chart."""
    return _LEVELS + 1, _HUES


def _ring(encoding: Encoding, lightness: float, hues: Floats) -> Codes:
    """Return codes of one lightness: the largest chroma of 40 that fits, at each hue, taken to six tenths."""
    chroma = np.linspace(0.0, 0.32, 41)[:, None]
    directions = np.stack([np.cos(hues), np.sin(hues)], axis=1)
    colours = np.empty((41, len(hues), 3))
    colours[..., 0] = lightness
    colours[..., 1:] = chroma[:, :, None] * directions[None]
    codes = encoding.from_xyz(oklab_to_xyz(colours.reshape(-1, 3))).reshape(colours.shape)
    fits = np.cumprod(((codes > -1e-6) & (codes < 1 + 1e-6)).all(axis=2), axis=0).sum(axis=0) - 1
    taken = np.maximum(fits * 6 // 10, 0)
    return np.asarray(np.clip(codes[taken, np.arange(len(hues))], 0.0, 1.0))


def moved_chart(table: Table, encoding: Encoding) -> Moved:
    """Return the chart before and after a table."""
    codes = chart_codes(encoding)
    return Moved.through(table, codes, np.full(len(codes), 1 / len(codes)), encoding)


def moved_palette(table: Table, palette: Palette, encoding: Encoding) -> Moved:
    """Return a palette in a couple of dozen groups before and after a table, dark ones first."""
    groups, _ = group(palette, _GROUPS)
    order = np.argsort(groups.colours[:, 0], kind="stable")
    codes = encoding.from_xyz(oklab_to_xyz(groups.colours[order]))
    return Moved.through(table, codes, groups.weights[order], encoding)
