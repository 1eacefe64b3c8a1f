"""The whole job on many pictures: plan, references, every picture, contact sheet, record."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from pathlib import Path

import attrs
import numpy as np

from hueferry.arrays import Mask
from hueferry.errors import HueferryError, InputError, OutputError
from hueferry.fitting.reference import Reference, joint_palette
from hueferry.fitting.settings import Aim, Settings
from hueferry.palettes.palette import Palette
from hueferry.picture import Picture
from hueferry.record.record import NAME, Failure, FileFact, Record, to_json
from hueferry.series.job import Done, relative_to_folder, run_errand
from hueferry.series.overview import overview
from hueferry.series.plan import Errand, plan_errands

OnDone = Callable[[int, int, Done | Failure], None]
"""Called after each picture with its number (from 1), the count of all, and what became of it."""


@attrs.frozen(eq=False)
class Run:
    """What came of an order: the record, and (before, after) thumbnails of every picture done, in order."""

    record: Record
    thumbnails: Sequence[tuple[Picture, Picture]]


@attrs.frozen(eq=False, kw_only=True)
class MatchOrder:
    """What the caller asked for.

    Attributes:
        inputs: files and folders.
        to: reference pictures; none means the pictures' own common palette.
        out: folder of the results.
        settings: settings of every fit.
        hold: picture whose white part must keep its colours, or None.
        overwrite: replace results of an earlier run.
    """

    inputs: Sequence[Path]
    to: Sequence[Path]
    out: Path
    settings: Settings
    hold: Path | None = None
    overwrite: bool = False


def match_pictures(order: MatchOrder, *, on_done: OnDone | None = None) -> Run:
    """Bring pictures together and leave them and a record in the folder of the order.

    Raises:
        InputError: nothing can be done as asked; nothing was written.
    """
    from hueferry.files.walk import find_pictures

    errands = plan_errands(order.inputs, order.out, find=find_pictures)
    _check_folder(order, errands)
    references, sentence = load_references(order.to, errands, order.settings)
    hold = _load_mask(order.hold) if order.hold is not None else None
    outcomes: list[Done | Failure] = []
    for number, errand in enumerate(errands, 1):
        outcome = run_errand(errand, references, order.settings, hold=hold, overwrite=order.overwrite)
        outcomes.append(outcome)
        if on_done is not None:
            on_done(number, len(errands), outcome)
    return _finish(order, outcomes, sentence)


def load_references(to: Sequence[Path], errands: Sequence[Errand], settings: Settings) -> tuple[list[Reference], str]:
    """Return the references of a run and a sentence that says what they are.

    Raises:
        InputError: a named reference cannot be read, or no picture can serve as one.
    """
    if to:
        references = [Reference.of_file(path) for path in to]
        return references, "towards " + ", ".join(reference.name for reference in references)
    found = [reference for errand in errands if (reference := _readable(errand.source)) is not None]
    if not found:
        raise InputError("none of the pictures could be read; there is nothing to bring together")
    common = joint_palette(found)
    if settings.aim is Aim.ADOPT:
        return [Reference("common palette", common)], f"towards the common palette of {len(found)} pictures"
    nearest = found[int(np.argmin([_distance(reference, common) for reference in found]))]
    return [nearest], f"towards {nearest.name}, the picture nearest to the common palette of {len(found)}"


def _readable(path: Path) -> Reference | None:
    from hueferry.files.read import read

    try:
        return Reference.of_picture(read(path), path.name)
    except HueferryError:
        return None  # its own errand reports the reason


def _distance(reference: Reference, common: Palette) -> float:
    from hueferry.measure.cost import sliced_w2

    return sliced_w2(reference.palette, common)


def _check_folder(order: MatchOrder, errands: Sequence[Errand]) -> None:
    if order.out.exists() and not order.out.is_dir():
        raise OutputError(order.out, "this is a file; --out names a folder")
    if order.overwrite:
        return
    for path in (order.out / NAME, *(errand.output for errand in errands)):
        if path.exists():
            raise OutputError(path, "this exists already; choose another folder, or add --overwrite")


def _load_mask(path: Path) -> Mask:
    from hueferry.files.read import read

    picture = read(path)
    colour = picture.pixels[:, :, : 1 if picture.is_gray else 3]
    return np.asarray(colour.mean(axis=2) > picture.top_code / 2)


def _finish(order: MatchOrder, outcomes: Sequence[Done | Failure], sentence: str) -> Run:
    from hueferry.files.atomic import write_bytes

    done = [outcome for outcome in outcomes if isinstance(outcome, Done)]
    record = Record(
        command="match",
        settings=order.settings.as_dict(),
        references=[FileFact.of(path) for path in order.to],
        entries=[relative_to_folder(outcome.entry, order.out) for outcome in done],
        failures=[outcome for outcome in outcomes if isinstance(outcome, Failure)],
        sentences=(sentence,),
        overview=overview(done),
    )
    if done:
        write_bytes(order.out / NAME, to_json(record).encode(), overwrite=True)
    return Run(record, [(outcome.before, outcome.after) for outcome in done])
