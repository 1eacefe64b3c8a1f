"""HEIC, read only: items read by ourselves, pixels by libheif and libde265, which are optional.

The library makes the turn and the crop that a file states (ISO/IEC 23008-12, clause 6.5), so pixels come upright.
"""

from __future__ import annotations

import io
import struct
from pathlib import Path

import attrs
import numpy as np

from hueferry.arrays import Pixels
from hueferry.errors import InputError, PictureError, RefusedError
from hueferry.files.codec import Decoded
from hueferry.files.iso_pictures import check_single, colours_of, encoding_of, exif_and_xmp
from hueferry.files.isobmff import Items, assemble, read_items
from hueferry.files.probe import check_size
from hueferry.picture import Metadata


def read_heic(path: Path, data: bytes, *, accept_loss: bool) -> Decoded:
    """Decode the picture of a HEIC file at its own depth, upright.

    Raises:
        PictureError: the file is broken.
        RefusedError: a film, a gain map or further planes that would be lost, or light that is not relative.
    """
    import pi_heif

    from hueferry.files.exif import with_orientation

    try:
        items = read_items(data)
        if not accept_loss:
            check_single(path, data, items)
        for extent in items.of(items.primary, b"ispe")[:1]:
            check_size(path, (int.from_bytes(extent[8:12], "big"), int.from_bytes(extent[4:8], "big")))
        profile, colours = colours_of(items)
        encoding = None if profile else encoding_of(path, colours)
        bits = _bits(items)
        with io.BytesIO(_picture_alone(data, items)) as stream:
            image = pi_heif.open_heif(stream, convert_hdr_to_8bit=False, bgr_mode=False)
            pixels = np.array(image)  # a copy: the binding frees its own with the image
    except RefusedError:
        raise
    except InputError as error:
        raise PictureError(path, str(error)) from error
    except (ValueError, RuntimeError, MemoryError, EOFError, LookupError, SyntaxError, OSError, struct.error) as error:
        raise PictureError(path, f"the HEIC cannot be decoded: {error}") from error
    exif, xmp = exif_and_xmp(data, items)
    facts = {"numbers": colours, "lossless": False}
    metadata = Metadata(format="heic", exif=with_orientation(exif, 1) or b"", xmp=xmp, container=facts)
    return Decoded(_own_depth(np.atleast_3d(pixels), bits), metadata, profile, bits=bits, encoding=encoding)


def _picture_alone(data: bytes, items: Items) -> bytes:
    """Return a file of the picture, its tiles and its alpha alone: the binding trusts all else that a file says."""
    needed, waiting = {items.primary}, [items.primary]
    while waiting:
        number = waiting.pop()
        parts = [ends for kind, start, ends in items.references if kind == b"dimg" and start == number]
        alpha = [(start,) for kind, start, ends in items.references if kind == b"auxl" and number in ends]
        found = {end for ends in (*parts, *alpha) for end in ends} & set(items.items)
        waiting += sorted(found - needed)
        needed |= found
    references = tuple(one for one in items.references if one[1] in needed and set(one[2]) <= needed)
    kept = {number: item for number, item in items.items.items() if number in needed}
    bodies = {number: items.bytes_of(data, number) for number in kept}
    return assemble(b"heic\0\0\0\0mif1heic", attrs.evolve(items, items=kept, references=references), bodies)


def _bits(items: Items) -> int:
    """Return the depth of the first HEVC configuration (ISO/IEC 14496-15, clause 8.3.3.1.2)."""
    depth = next((payload[17] & 7 for kind, payload in items.properties if kind == b"hvcC" and len(payload) > 18), 0)
    return 8 + depth


def _own_depth(pixels: Pixels, bits: int) -> Pixels:
    """Return codes of the file's own depth: the binding fills sixteen bits by shifting."""
    return pixels if pixels.dtype == np.uint8 else (pixels >> (16 - bits)).astype(np.uint16)
