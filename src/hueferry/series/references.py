"""What the pictures of a run are brought towards, and where their colours must stay."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

import numpy as np

from hueferry.arrays import Mask
from hueferry.errors import HueferryError, InputError
from hueferry.fitting.reference import Reference, joint_palette
from hueferry.fitting.settings import Aim, Settings
from hueferry.palettes.palette import Palette
from hueferry.series.plan import Errand


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


def load_mask(path: Path) -> Mask:
    """Return where the picture at `path` is brighter than half of its codes."""
    from hueferry.files.read import read

    picture = read(path)
    colour = picture.pixels[:, :, : 1 if picture.is_gray else 3]
    return np.asarray(colour.mean(axis=2) > picture.top_code / 2)
