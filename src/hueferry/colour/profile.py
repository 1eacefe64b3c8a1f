"""ICC profiles as encodings: matrix and tone curves computed here, tables through LittleCMS.

A profile is applied once, on palettes and table nodes, never on the picture. Everything is relative to the profile
connection space's D50, with the media-relative colorimetric intent.
"""

from __future__ import annotations

import struct
from collections.abc import Mapping

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import Codes, Xyz
from hueferry.colour.curves import Curve, Parametric, Sampled
from hueferry.colour.encoding import MatrixEncoding
from hueferry.colour.spaces import SRGB_TO_XYZ_D50, xyz_to_oklab
from hueferry.errors import InputError
from hueferry.picture import Encoding

_HEADER = 128
_MOST_TAGS = 200
_LARGEST = 64 << 20
_ROUNDS = 12
_PARAMETERS = (1, 3, 4, 5, 7)
"""Numbers of a parametric curve, by its type 0 … 4 (ICC.1:2022, clause 10.18)."""


def read_profile(data: bytes) -> Encoding:
    """Turn an ICC profile into an encoding that carries it byte for byte.

    Args:
        data: a display, input or colour space profile, RGB or gray, version 2 or 4.

    Raises:
        InputError: the profile is broken, or of a kind that says nothing about RGB or gray pictures.
    """
    tags = _tags(data)
    space = data[16:20]
    if space not in (b"RGB ", b"GRAY"):
        raise InputError(f"the profile is for {_plain(space)} pictures, not RGB or gray; convert the picture first")
    if tags.get(b"cicp", b"")[9:10] in (b"\x10", b"\x12"):
        raise InputError("the profile is of PQ or HLG, light for displays of high range; convert the picture first")
    if space == b"GRAY":
        return _gray(data, tags)
    if any(name in tags for name in (b"A2B0", b"A2B1")):
        return TabulatedEncoding(_description(tags), data)
    missing = [_plain(name) for name in (b"rXYZ", b"gXYZ", b"bXYZ", b"rTRC", b"gTRC", b"bTRC") if name not in tags]
    if missing:
        raise InputError(f"the profile lacks {', '.join(missing)}")
    matrix = np.stack([_xyz(tags[name]) for name in (b"rXYZ", b"gXYZ", b"bXYZ")], axis=1)
    if abs(np.linalg.det(matrix)) < 1e-6:
        raise InputError("the profile's primaries lie in a plane")
    curves = (_curve(tags[b"rTRC"]), _curve(tags[b"gTRC"]), _curve(tags[b"bTRC"]))
    return MatrixEncoding(_description(tags), curves, matrix, data)


def _gray(data: bytes, tags: Mapping[bytes, bytes]) -> MatrixEncoding:
    """Give a gray profile three equal channels whose sum is the white of the connection space."""
    if b"kTRC" not in tags:
        raise InputError("the gray profile lacks its tone curve")
    curve = _curve(tags[b"kTRC"])

    return MatrixEncoding(_description(tags), (curve, curve, curve), SRGB_TO_XYZ_D50, data)


@attrs.frozen(eq=False)
class TabulatedEncoding:
    """An encoding given by the tables of a profile, read by LittleCMS in floating point.

    Attributes:
        name: the profile's description.
        profile: the profile.
    """

    name: str
    profile: bytes = attrs.field(repr=False)

    def __attrs_post_init__(self) -> None:
        white = self.to_xyz(np.ones((1, 3)))
        if not np.isfinite(white).all() or white[0, 1] < 0.2:
            raise InputError("the profile's tables give no usable white")

    def to_xyz(self, codes: Codes) -> Xyz:
        """Turn (n, 3) codes into XYZ (D50); codes beyond 0 … 1 are clipped first."""
        return self._transform(np.clip(codes, 0.0, 1.0), self.profile, _xyz_profile(), ("rgb", "xyz"))

    def from_xyz(self, xyz: Xyz) -> Codes:
        """Turn (n, 3) XYZ (D50) into codes: the profile's own inverse, refined until it undoes `to_xyz`."""
        wanted = xyz_to_oklab(xyz)
        codes = self._first_guess(xyz, wanted)
        error = _distance(self._oklab(codes), wanted)
        for _ in range(_ROUNDS):
            better = np.clip(codes + self._newton(codes, wanted), 0.0, 1.0)
            new_error = _distance(self._oklab(better), wanted)
            gained = new_error < error
            codes, error = np.where(gained[:, None], better, codes), np.minimum(error, new_error)
            if not gained.any():
                break
        return codes

    def _first_guess(self, xyz: Xyz, wanted: NDArray[np.float64]) -> Codes:
        try:
            return np.clip(self._transform(xyz, _xyz_profile(), self.profile, ("xyz", "rgb")), 0.0, 1.0)
        except InputError:  # no table for the way back: the nearest of a grid of codes has to do
            grid = np.stack(np.meshgrid(*[np.linspace(0, 1, 9)] * 3, indexing="ij"), axis=-1).reshape(-1, 3)
            known = self._oklab(grid)
            nearest = [np.argmin(((known - one) ** 2).sum(axis=1)) for one in wanted]
            return np.asarray(grid[np.array(nearest)])

    def _newton(self, codes: Codes, wanted: NDArray[np.float64]) -> NDArray[np.float64]:
        step = 1e-3
        here = self._oklab(codes)
        jacobian = np.empty((len(codes), 3, 3))
        for channel in range(3):
            towards = np.where(codes[:, channel] > 0.5, -step, step)
            moved = codes.copy()
            moved[:, channel] += towards
            jacobian[:, :, channel] = (self._oklab(moved) - here) / towards[:, None]
        normal = np.einsum("nij,nik->njk", jacobian, jacobian) + 1e-8 * np.eye(3)
        pull = np.einsum("nij,ni->nj", jacobian, wanted - here)
        return np.asarray(np.linalg.solve(normal, pull[:, :, None])[:, :, 0])

    def _oklab(self, codes: Codes) -> NDArray[np.float64]:
        return xyz_to_oklab(self.to_xyz(codes))

    def _transform(
        self, values: NDArray[np.float64], source: bytes, target: bytes, spaces: tuple[str, str]
    ) -> NDArray[np.float64]:
        import imagecodecs

        try:
            result = imagecodecs.cms_transform(
                np.ascontiguousarray(values[None], dtype=np.float64),
                source,
                target,
                colorspace=spaces[0],
                outcolorspace=spaces[1],
                outdtype="f8",
                intent=1,
            )
        except (imagecodecs.CmsError, ValueError) as error:
            raise InputError(f"the profile's tables cannot be used: {error}") from error
        return np.asarray(result[0], dtype=np.float64)


def _distance(first: NDArray[np.float64], second: NDArray[np.float64]) -> NDArray[np.float64]:
    return np.asarray(np.linalg.norm(first - second, axis=1))


def _xyz_profile() -> bytes:
    import imagecodecs

    return bytes(imagecodecs.cms_profile("xyz"))


def _tags(data: bytes) -> dict[bytes, bytes]:
    """Read the tag table (ICC.1:2022, clause 7.3), bounded and checked."""
    if len(data) < _HEADER + 4 or len(data) > _LARGEST or data[36:40] != b"acsp":
        raise InputError("the profile has no valid header")
    count = int.from_bytes(data[_HEADER : _HEADER + 4], "big")
    if not 0 < count <= _MOST_TAGS or _HEADER + 4 + 12 * count > len(data):
        raise InputError(f"the profile declares {count} tags, which do not fit it")
    tags = {}
    for index in range(count):
        name, offset, size = struct.unpack_from(">4sII", data, _HEADER + 4 + 12 * index)
        if offset + size > len(data) or size < 8:
            raise InputError(f"the tag {_plain(name)} lies outside the profile")
        tags[name] = data[offset : offset + size]
    return tags


def _fixed(data: bytes, start: int, count: int) -> NDArray[np.float64]:
    """Read s15Fixed16 numbers (ICC.1:2022, clause 4.6)."""
    if start + 4 * count > len(data):
        raise InputError("a tag of the profile is shorter than it says")
    return np.frombuffer(data, ">i4", count, start).astype(np.float64) / 65536


def _xyz(tag: bytes) -> NDArray[np.float64]:
    if tag[:4] != b"XYZ ":
        raise InputError(f"a primary of the profile is of the type {_plain(tag[:4])}, not XYZ")
    return _fixed(tag, 8, 3)


def _curve(tag: bytes) -> Curve:
    kind = tag[:4]
    if kind == b"para":
        return _parametric(tag)
    if kind != b"curv" or len(tag) < 12:
        raise InputError(f"a tone curve of the profile is of the type {_plain(kind)}")
    count = int.from_bytes(tag[8:12], "big")
    if count == 0:
        return Parametric(1.0)
    if 12 + 2 * count > len(tag):
        raise InputError("a tone curve of the profile is shorter than it says")
    samples = np.frombuffer(tag, ">u2", count, 12).astype(np.float64)
    return Parametric(float(samples[0]) / 256) if count == 1 else Sampled(samples / 65535)


def _parametric(tag: bytes) -> Parametric:
    kind = int.from_bytes(tag[8:10], "big")
    if kind >= len(_PARAMETERS):
        raise InputError(f"a tone curve of the profile is of the unknown parametric type {kind}")
    values = [float(value) for value in _fixed(tag, 12, _PARAMETERS[kind])]
    gamma, a, b, c, d, e, f = (*values, *([0.0] * (7 - len(values))))
    if kind == 0:
        return Parametric(gamma)
    if kind in (1, 2):
        # Below −b / a the curve is constant: 0 for type 1, c for type 2.
        level = c if kind == 2 else 0.0
        return Parametric(gamma, a, b, 0.0, max(-b / a, 0.0) if a else 0.0, level, level)
    return Parametric(gamma, a, b, c, d, e, f)


def _description(tags: Mapping[bytes, bytes]) -> str:
    tag = tags.get(b"desc", b"")
    if tag[:4] == b"desc":
        length = int.from_bytes(tag[8:12], "big")
        text = tag[12 : 12 + min(length, 200)].split(b"\0")[0].decode("ascii", "replace")
    elif tag[:4] == b"mluc" and len(tag) >= 28:
        length, offset = struct.unpack_from(">II", tag, 20)
        text = tag[offset : offset + min(length, 400)].decode("utf-16-be", "replace")
    else:
        text = ""
    return "".join(character for character in text if character.isprintable()).strip() or "profile without a name"


def _plain(name: bytes) -> str:
    return "".join(chr(byte) if 33 <= byte < 127 else "?" for byte in name.rstrip())
