"""The encoding of a slide from the profile in its file."""

from __future__ import annotations

from pathlib import Path

from hueferry.colour.encoding import SRGB
from hueferry.errors import InputError, PictureError
from hueferry.picture import Encoding


def encoding_of(path: Path, profile: bytes | None) -> Encoding:
    """Return the encoding of a profile; sRGB without one.

    Raises:
        PictureError: the profile is broken.
    """
    if not profile:
        return SRGB
    from hueferry.colour.profile import read_profile

    try:
        return read_profile(bytes(profile))
    except InputError as error:
        raise PictureError(path, f"its colour profile cannot be used: {error}") from error
