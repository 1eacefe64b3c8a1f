"""What a PNG says of its colours besides an ICC profile and H.273 numbers, in the order of its specification."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from hueferry.picture import Encoding

Stated = tuple[Encoding | None, tuple[str, ...]]

_SRGB_GAMMA = 45_455
_NEAR = 500
_REC_709 = (31_270, 32_900, 64_000, 33_000, 30_000, 60_000, 15_000, 6_000)
"""x, y of white, red, green and blue, times 100,000, as a cHRM chunk states them (ITU-R BT.709)."""


def stated_by_chunks(chunks: Mapping[bytes, bytes]) -> Stated:
    """Return the encoding that sRGB, gAMA and cHRM chunks state, or None, and what there is to note.

    The rule (PNG, third edition, clauses 4.3, 11.3.2.2 and 11.3.2.3): sRGB goes before gAMA and cHRM; gAMA alone has
    the primaries of sRGB; 0.45455 with those primaries is what encoders write for sRGB and is taken as sRGB; cHRM alone
    leaves the curve open and has that of sRGB. Numbers that span no gamut are not used, and that is noted.
    """
    from hueferry.colour.encoding import SRGB

    if len(chunks.get(b"sRGB", b"")) == 1:
        return SRGB, ()
    gamma = int.from_bytes(chunks.get(b"gAMA", b""), "big") if len(chunks.get(b"gAMA", b"")) == 4 else None
    points = _points(chunks.get(b"cHRM", b""))
    if gamma is None and points is None:
        return None, ()
    near = points is None or max(abs(a - b) for a, b in zip(points, _REC_709, strict=True)) <= _NEAR
    if near and (gamma is None or abs(gamma - _SRGB_GAMMA) <= _NEAR):
        return SRGB, ("its gAMA and cHRM chunks are those of sRGB: taken as sRGB",)
    made = _encoding(gamma, None if near else points)
    if made is None:
        return None, ("its gAMA or cHRM chunk makes no sense and was not used",)
    return made, (f"no profile: taken as its gAMA and cHRM chunks say ({made.name})",)


def _points(body: bytes) -> tuple[int, ...] | None:
    return tuple(int(value) for value in np.frombuffer(body, ">u4")) if len(body) == 32 else None


def _encoding(gamma: int | None, points: tuple[int, ...] | None) -> Encoding | None:
    from hueferry.colour.curves import SRGB_CURVE, Parametric
    from hueferry.colour.encoding import SRGB, MatrixEncoding
    from hueferry.colour.spaces import WHITE_D50, adaptation, primaries_to_xyz

    if gamma is not None and not 10_000 <= gamma <= 1_000_000:
        return None
    curve = SRGB_CURVE if gamma is None else Parametric(100_000 / gamma)
    name = "the curve of sRGB" if gamma is None else f"gamma {100_000 / gamma:.2f}"
    if points is None:
        return MatrixEncoding(f"{name}, primaries of sRGB", (curve, curve, curve), SRGB.matrix)
    pairs = np.array(points, np.float64).reshape(4, 2) / 100_000
    if pairs.max() > 1 or pairs[:, 1].min() <= 0 or _area(pairs[1:]) < 0.01:
        return None
    x, y = pairs[0]
    white = np.array([x / y, 1.0, (1 - x - y) / y])
    matrix = adaptation(white, WHITE_D50) @ primaries_to_xyz(pairs[1], pairs[2], pairs[3], white)
    return MatrixEncoding(f"{name}, own primaries", (curve, curve, curve), matrix)


def _area(corners: np.ndarray[tuple[int, ...], np.dtype[np.float64]]) -> float:
    (ax, ay), (bx, by), (cx, cy) = corners
    return float(abs((bx - ax) * (cy - ay) - (cx - ax) * (by - ay)) / 2)


def significant_bits_note(body: bytes, depth: int) -> tuple[str, ...]:
    """Return a note where sBIT says that fewer bits than the depth were measured.

    Codes span the whole depth all the same (PNG, third edition, clause 12.4), so nothing is rescaled; corrected
    colours use every bit of it, and the chunk is not written again.
    """
    used = [value for value in body if 0 < value < depth]
    return (f"its sBIT chunk says that {max(used)} of {depth} bits were measured; all are written",) if used else ()
