"""What pictures are brought towards."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING

import attrs

from hueferry.errors import InputError
from hueferry.palettes.palette import Palette
from hueferry.picture import Picture

if TYPE_CHECKING:
    from hueferry.evidence.reduced import Reduced


@attrs.frozen(eq=False)
class Reference:
    """A reference: a picture, or a palette alone.

    The full picture is not kept: what pairs are looked for in is its reduced form.

    Attributes:
        name: what people call it.
        palette: its colours.
        witness: the reduced picture, where there is one.
    """

    name: str
    palette: Palette
    witness: Reduced | None = None

    @classmethod
    def of_picture(cls, picture: Picture, name: str | None = None) -> Reference:
        """Make a reference of a picture, counting all of its pixels."""
        from hueferry.evidence.reduced import reduce_picture
        from hueferry.palettes.build import palette_of

        shown = name if name is not None else (picture.path.name if picture.path is not None else "reference")
        return cls(shown, palette_of(picture), reduce_picture(picture))

    @classmethod
    def of_file(cls, path: Path) -> Reference:
        """Read a reference: a saved palette where the name ends as one, else a picture.

        Raises:
            InputError: the file cannot be read as what its name says.
        """
        from hueferry.palettes.saved import is_palette, read_palette

        if is_palette(path):
            return cls(path.name, read_palette(path))
        from hueferry.files.read import read

        return cls.of_picture(read(path), path.name)


def joint_palette(references: Sequence[Reference]) -> Palette:
    """Return the one palette that several references stand for: their own if there is one, else the common one.

    Raises:
        InputError: there is no reference.
    """
    if not references:
        raise InputError("there is no reference to bring the picture towards")
    if len(references) == 1:
        return references[0].palette
    from hueferry.transport.barycentre import common_palette

    return common_palette([reference.palette for reference in references])
