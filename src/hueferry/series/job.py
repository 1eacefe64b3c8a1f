"""One picture of a run: read, fit, apply, write under a passing name, and what to put on record."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

import attrs

from hueferry.arrays import Mask
from hueferry.errors import HueferryError, OutputError, PictureError
from hueferry.fitting.fit import Fit, Given, fit_picture
from hueferry.fitting.reference import Reference
from hueferry.fitting.settings import Settings
from hueferry.palettes.reduce import thin
from hueferry.picture import Picture
from hueferry.record.record import Entry, FileFact
from hueferry.series.glimpse import take_glimpse
from hueferry.series.keepsake import Done, Kept, pack

_SMALL = 128
"""Colours that the overview of a series compares."""


@attrs.frozen(eq=False)
class Context:
    """What all pictures of a run share.

    Attributes:
        references: at least one.
        settings: of every fit.
        hold: (height, width), true where colours must stay, or None.
        count: pictures of the run.
    """

    references: Sequence[Reference]
    settings: Settings
    hold: Mask | None = None
    count: int = 1


@attrs.frozen
class Job:
    """One picture to do.

    Attributes:
        source: the picture, by its absolute path: a worker may live in another folder.
        source_name: its path as the caller gave it.
        stage: absolute path under which the result is written and verified first.
        output_name: the name below the folder of the run that it will have.
        given: the map that its series decided, or None: then it is found from this picture alone.
    """

    source: Path
    source_name: str
    stage: Path
    output_name: str
    given: Given | None = None


@attrs.frozen
class Failed:
    """A picture that could not be done.

    Attributes:
        reason: a sentence that names the file.
        lasting: it would fail again as long as the picture and the settings stay as they are.
    """

    reason: str
    lasting: bool


def run_job(context: Context, job: Job) -> Kept | Failed:
    """Do one picture from file to file; a picture that cannot be done is `Failed`, not an exception."""
    try:
        return pack(_do(context, job))
    except HueferryError as error:
        return Failed(_named(error, job), lasting=not isinstance(error, OutputError))
    except MemoryError:
        return Failed(f"{job.source_name}: memory ran out; use fewer --workers, or free memory", lasting=False)


def _named(error: HueferryError, job: Job) -> str:
    """Return what an error says, with the files named as the caller knows them."""
    names = {job.source: job.source_name, job.stage: job.output_name}
    if isinstance(error, PictureError | OutputError) and error.path in names:
        return f"{names[error.path]}: {error.reason}"
    return str(error)


def _do(context: Context, job: Job) -> Done:
    from hueferry.files.atomic import write_bytes
    from hueferry.files.read import read
    from hueferry.files.write import write

    picture = read(job.source)
    fitted = fit_picture(picture, context.references, context.settings, hold=context.hold, given=job.given)
    result = picture if fitted.leaves_alone else fitted.apply(picture)
    if fitted.leaves_alone and job.stage.suffix == job.source.suffix:  # no second generation of loss for nothing
        write_bytes(job.stage, job.source.read_bytes(), overwrite=True)
    else:
        write(result, job.stage, overwrite=True)  # a worker that died may have left one
    glimpse = take_glimpse(picture, result, count=context.count)
    palettes = thin(fitted.palette, _SMALL), thin(fitted.palette_after, _SMALL)
    return Done(_entry_of(job, fitted, picture), glimpse, *palettes)


def _entry_of(job: Job, fitted: Fit, picture: Picture) -> Entry:
    from hueferry.files.write import lost_in

    lost = lost_in(picture, job.stage)
    return Entry(
        source=FileFact.of(job.source, shown_as=job.source_name),
        output=FileFact.of(job.stage, shown_as=job.output_name),
        numbers=fitted.as_dict(),
        sentences=(*(f"{note[0].upper()}{note[1:]}." for note in (*picture.notes, *lost)), *fitted.sentences),
    )
