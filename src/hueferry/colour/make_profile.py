"""ICC profiles of our own making: version 4, matrix and parametric curves."""

from __future__ import annotations

import struct

import numpy as np
from numpy.typing import NDArray

from hueferry.colour.curves import Curve, Parametric
from hueferry.colour.encoding import MatrixEncoding
from hueferry.colour.spaces import WHITE_D50, WHITE_D65, adaptation
from hueferry.errors import InputError
from hueferry.picture import Encoding

_COPYRIGHT = "No copyright; use freely."


def profile_of(encoding: Encoding) -> bytes:
    """Return the encoding's own profile, or make one.

    Raises:
        InputError: the encoding is neither a profile's nor made of a matrix and parametric curves.
    """
    if encoding.profile is not None:
        return encoding.profile
    if not isinstance(encoding, MatrixEncoding) or not all(isinstance(one, Parametric) for one in encoding.curves):
        raise InputError(f"no profile can be made for {encoding.name}")
    return matrix_profile(encoding)


def gray_profile_of(encoding: Encoding) -> bytes:
    """Return the encoding's own profile, or make one of its neutral axis, for files of one channel.

    Raises:
        InputError: the encoding is neither a profile's nor made of a matrix and one parametric curve.
    """
    if encoding.profile is not None:
        return encoding.profile
    if not isinstance(encoding, MatrixEncoding) or len(set(encoding.curves)) != 1:
        raise InputError(f"no gray profile can be made for {encoding.name}")
    tags = {
        b"desc": text_tag(f"{encoding.name} gray"),
        b"cprt": text_tag(_COPYRIGHT),
        b"wtpt": _xyz_tag(WHITE_D50),
        b"kTRC": _curve_tag(encoding.curves[0]),
    }
    return assemble(tags, kind=b"mntr", space=b"GRAY", connection=b"XYZ ")


def matrix_profile(encoding: MatrixEncoding) -> bytes:
    """Make a display profile, version 4.4 (ICC.1:2022, clause 8.3.3), of a matrix encoding with parametric curves."""
    red, green, blue = (_xyz_tag(encoding.matrix[:, channel]) for channel in range(3))
    tags = {
        b"desc": text_tag(encoding.name),
        b"cprt": text_tag(_COPYRIGHT),
        b"wtpt": _xyz_tag(WHITE_D50),
        b"chad": b"sf32\0\0\0\0" + _fixed(adaptation(WHITE_D65, WHITE_D50).ravel()),
        b"rXYZ": red,
        b"gXYZ": green,
        b"bXYZ": blue,
        b"rTRC": _curve_tag(encoding.curves[0]),
        b"gTRC": _curve_tag(encoding.curves[1]),
        b"bTRC": _curve_tag(encoding.curves[2]),
    }
    return assemble(tags, kind=b"mntr", space=b"RGB ", connection=b"XYZ ")


def assemble(tags: dict[bytes, bytes], *, kind: bytes, space: bytes, connection: bytes) -> bytes:
    """Put header, tag table and tags together; equal tags are stored once (ICC.1:2022, clauses 7.2 and 7.3)."""
    start = 128 + 4 + 12 * len(tags)
    table, body, places = b"", b"", {}
    for name, data in tags.items():
        if data not in places:
            places[data] = start + len(body)
            body += data + b"\0" * (-len(data) % 4)
        table += struct.pack(">4sII", name, places[data], len(data))
    size = start + len(body)
    header = struct.pack(">I4sI4s4s4s", size, b"\0\0\0\0", 0x04400000, kind, space, connection)
    header += struct.pack(">6H", 2026, 1, 1, 0, 0, 0) + b"acsp" + b"\0" * 24 + b"\0\0\0\0"
    header += _fixed(WHITE_D50)
    return header + b"\0" * (128 - len(header)) + struct.pack(">I", len(tags)) + table + body


def _fixed(values: NDArray[np.float64]) -> bytes:
    return np.rint(np.asarray(values) * 65536).astype(">i4").tobytes()


def _xyz_tag(values: NDArray[np.float64]) -> bytes:
    return b"XYZ \0\0\0\0" + _fixed(values)


def text_tag(text: str) -> bytes:
    """Return a multi-localised text of one language, English (ICC.1:2022, clause 10.15)."""
    encoded = text.encode("utf-16-be")
    return b"mluc\0\0\0\0" + struct.pack(">II2s2sII", 1, 12, b"en", b"US", len(encoded), 28) + encoded


def _curve_tag(curve: Curve) -> bytes:
    if not isinstance(curve, Parametric):
        raise InputError("only parametric curves can be written to a profile")
    if (curve.a, curve.b, curve.d, curve.e, curve.f) == (1.0, 0.0, 0.0, 0.0, 0.0):
        return b"para\0\0\0\0" + struct.pack(">HH", 0, 0) + _fixed(np.array([curve.gamma]))
    values = [curve.gamma, curve.a, curve.b, curve.c, curve.d, curve.e, curve.f]
    return b"para\0\0\0\0" + struct.pack(">HH", 4, 0) + _fixed(np.array(values))
