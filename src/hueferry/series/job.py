"""One picture of a run: read, fit, apply, write, and what to put on record."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

import attrs

from hueferry.arrays import Mask
from hueferry.errors import HueferryError
from hueferry.fitting.fit import Fit, fit_picture
from hueferry.fitting.reference import Reference
from hueferry.fitting.settings import Settings
from hueferry.palettes.palette import Palette
from hueferry.palettes.reduce import thin
from hueferry.picture import Picture
from hueferry.record.record import Entry, Failure, FileFact
from hueferry.series.plan import Errand

_SMALL = 128
"""Colours that the overview of a series compares."""


@attrs.frozen(eq=False)
class Done:
    """A picture that was done: its entry in the record, thumbnails for the contact sheet, palettes for the overview."""

    entry: Entry
    before: Picture
    after: Picture
    palette: Palette
    palette_after: Palette


def run_errand(
    errand: Errand,
    references: Sequence[Reference],
    settings: Settings,
    *,
    hold: Mask | None = None,
    overwrite: bool = False,
    longest: int = 480,
) -> Done | Failure:
    """Do one picture from file to file; a picture that cannot be done is a `Failure`, not an exception."""
    from hueferry.files.atomic import write_bytes
    from hueferry.files.read import read
    from hueferry.files.thumbnail import thumbnail
    from hueferry.files.write import write

    try:
        picture = read(errand.source)
        fitted = fit_picture(picture, references, settings, hold=hold)
        errand.output.parent.mkdir(parents=True, exist_ok=True)
        if fitted.leaves_alone:  # no second generation of loss for nothing
            result = picture
            write_bytes(errand.output, errand.source.read_bytes(), overwrite=overwrite)
        else:
            result = fitted.apply(picture)
            write(result, errand.output, overwrite=overwrite)
        entry = entry_of(errand, fitted, picture)
        small = thumbnail(picture, longest), thumbnail(result, longest)
        return Done(entry, *small, thin(fitted.palette, _SMALL), thin(fitted.palette_after, _SMALL))
    except HueferryError as error:
        return Failure(errand.source.as_posix(), str(error))


def entry_of(errand: Errand, fitted: Fit, picture: Picture) -> Entry:
    """Return what the record says of one picture."""
    return Entry(
        source=FileFact.of(errand.source),
        output=FileFact.of(errand.output),
        numbers=fitted.as_dict(),
        sentences=(*(f"{note[0].upper()}{note[1:]}." for note in picture.notes), *fitted.sentences),
    )


def relative_to_folder(entry: Entry, out: Path) -> Entry:
    """Return the entry with its output named relative to the folder of the run."""
    if entry.output is None:
        return entry
    below = Path(entry.output.path).relative_to(out).as_posix()
    return attrs.evolve(entry, output=attrs.evolve(entry.output, path=below))
