"""The whole jobs around saved maps: find one, use it again, measure it."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import attrs
import numpy as np

from hueferry.api import apply, as_reference, read, write
from hueferry.errors import HueferryError, InputError, OutputError
from hueferry.fitting.fit import Fit, fit_picture
from hueferry.fitting.settings import Settings
from hueferry.picture import Encoding, Picture
from hueferry.record.record import Failure
from hueferry.tables.certificate import Certificate
from hueferry.tables.saved_map import SavedMap
from hueferry.tables.table import Table


def fit_file(picture: Path, *, to: Sequence[Path], out: Path, settings: Settings, overwrite: bool = False) -> Fit:
    """Find the map that brings a picture towards its references and save it as CLF.

    Raises:
        InputError: a picture cannot be read, or the map cannot be written.
    """
    from hueferry.files.atomic import write_bytes
    from hueferry.tables.clf import clf_text

    if out.suffix.lower() != ".clf":
        raise InputError(f"{out}: a map is saved as .clf")
    source = read(picture)
    fitted = fit_picture(source, [as_reference(path) for path in to], settings)
    facts = {
        "picture": picture.name,
        "reference": ", ".join(path.name for path in to),
        "aim": settings.aim.value,
        "certificate": "; ".join(fitted.certificate.sentences()),
        "evidence": fitted.evidence.decision,
    }
    text = clf_text(fitted.table, encoding=source.encoding.name, facts=facts)
    write_bytes(out, text.encode("utf-8"), overwrite=overwrite)
    return fitted


def open_maps(paths: Sequence[Path], *, correction: str | None = None, undo: bool = False) -> SavedMap:
    """Read maps as one: each after the one before and, if it is to be undone, all of it backwards.

    Args:
        paths: CLF of ours or of others, or decision lists; at least one.
        correction: id of the correction, in files with several.
        undo: turn the whole around.

    Raises:
        InputError: a map cannot be used, or cannot be undone.
    """
    from hueferry.tables.saved_map import backwards, chain, read_map

    several = [path for path in paths if path.suffix.lower() in (".ccc", ".cdl")]
    chosen = several or paths  # where no file holds several, the first says that there is nothing to choose from
    whole = chain([read_map(path, correction=correction if path in chosen else None) for path in paths])
    return backwards(whole) if undo else whole


def apply_file(
    saved: SavedMap, pictures: Sequence[Path], *, out: Path, overwrite: bool = False
) -> tuple[list[Path], list[Failure]]:
    """Send pictures and folders of pictures through a map; what cannot be done is a `Failure`.

    Raises:
        InputError: there is no picture.
    """
    from hueferry.files.walk import find_pictures
    from hueferry.series.plan import plan_errands

    written, failures = [], []
    for errand in plan_errands(pictures, out, find=find_pictures):
        try:
            result = apply(saved.table, errand.source)
            errand.output.parent.mkdir(parents=True, exist_ok=True)
            written.append(write(result, errand.output, overwrite=overwrite))
        except HueferryError as error:
            failures.append(Failure(errand.source.as_posix(), str(error)))
    return written, failures


def apply_to_slides(
    saved: SavedMap, slides: Sequence[Path], *, out: Path, choices: Mapping[str, Any] | None = None
) -> tuple[list[Path], list[Failure]]:
    """Send slides and folders of slides through a saved map, by windows; what cannot be done is a `Failure`.

    Args:
        saved: the map.
        slides: slides and folders of slides.
        out: folder of the results.
        choices: fields of `slides.settings.StainSettings` that say how slides are written, in plain words.

    Raises:
        InputError: there is no slide, or two results would have one name.
    """
    from hueferry.slides.readers import find_slides
    from hueferry.slides.settings import check_names, settings_from_words
    from hueferry.slides.write import map_slide

    settings = settings_from_words(choices or {})
    found = [path for path in find_slides(slides) if not path.resolve().is_relative_to(out.resolve())]
    check_names(found, out, settings.layout)
    out.mkdir(parents=True, exist_ok=True)
    written, failures = [], []
    for path in found:
        try:
            written.append(map_slide(path, saved.table, out, settings))
        except HueferryError as error:
            failures.append(Failure(path.as_posix(), str(error)))
    return written, failures


@attrs.frozen(eq=False)
class CheckedMap:
    """A saved map and what was measured on it.

    Attributes:
        saved: the map.
        certificate: measured on its table; every cell counts as occupied, and codes as sRGB.
    """

    saved: SavedMap
    certificate: Certificate

    @property
    def sentences(self) -> tuple[str, ...]:
        """What a person should know of it."""
        return (*self.saved.sentences, *self.certificate.sentences())

    def as_dict(self) -> dict[str, Any]:
        """Return certificate and misfit as JSON values."""
        misfit = self.saved.misfit
        return {
            "certificate": self.certificate.as_dict(),
            "misfit": None if misfit is None else attrs.asdict(misfit),
        }


def check_map(map_file: Path, *, correction: str | None = None) -> CheckedMap:
    """Measure a saved map from its file alone.

    Raises:
        MapFileError: the map cannot be used.
    """
    from hueferry.colour.encoding import SRGB
    from hueferry.tables.cells import Occupied
    from hueferry.tables.certificate import certify
    from hueferry.tables.saved_map import read_map

    grid = np.stack(np.meshgrid(*[np.linspace(0.0, 1.0, 33)] * 3, indexing="ij"), axis=-1).reshape(-1, 3)
    everywhere = Occupied(grid, np.full(len(grid), 1 / len(grid)))
    saved = read_map(map_file, correction=correction)
    return CheckedMap(saved, certify(saved.table, occupied=everywhere, encoding=SRGB))


def preview_map(
    checked: CheckedMap, *, out: Path, title: str, over: Path | None = None, overwrite: bool = False
) -> Path:
    """Draw what a map does, and return the file.

    Args:
        checked: the map and its certificate.
        out: where the drawing goes, as `.png`.
        title: what the map is called.
        over: picture or saved palette whose colours are shown as well; a picture also says what the codes mean.
        overwrite: replace an earlier drawing.

    Raises:
        InputError: the picture cannot be read, or nothing can be written there.
    """
    from hueferry.colour.encoding import SRGB
    from hueferry.files.atomic import write_bytes
    from hueferry.palettes.build import palette_of
    from hueferry.palettes.saved import is_palette, read_palette
    from hueferry.reports.map_preview import draw_map

    if out.suffix.lower() != ".png":
        raise OutputError(out, "a preview is drawn as PNG; let its name end in .png")
    encoding: Encoding = SRGB
    palette = None
    if over is not None and is_palette(over):
        palette = read_palette(over)
    elif over is not None:
        picture = read(over)
        encoding, palette = picture.encoding, palette_of(picture)
    drawn = draw_map(checked.saved.table, encoding, title=title, sentences=checked.sentences, palette=palette)
    return write_bytes(out, drawn, overwrite=overwrite)


def export_map(
    map_file: Path,
    *,
    out: Path,
    over: Path | None = None,
    abstract: bool = False,
    size: int | None = None,
    overwrite: bool = False,
) -> dict[str, Any]:
    """Save a map in another open standard, told by the suffix of `out`, and return how far it is from the map.

    Args:
        map_file: any map that can be read.
        out: `.icc` for an ICC profile, `.cc` for an ASC decision list, `.clf` for CLF.
        over: picture whose encoding the map's codes are of, and whose colours a decision list must suit; None takes
            sRGB, and for a decision list all of its colours alike.
        abstract: make the ICC profile an abstract one, from Lab to Lab, rather than a device link.
        size: nodes along an axis of a CLF; None keeps the map's own.
        overwrite: replace an earlier file.

    Raises:
        InputError: a file cannot be read, or the map cannot be written as asked.
    """
    from hueferry.files.atomic import write_bytes
    from hueferry.tables.saved_map import read_map

    makers = {".icc": _as_profile, ".icm": _as_profile, ".cc": _as_decision_list, ".clf": _as_clf}
    if out.suffix.lower() not in makers:
        raise OutputError(out, "the suffix names no form of a map; use .icc, .cc or .clf")
    picture = None if over is None else read(over)
    wish = _Export(read_map(map_file).table, map_file.stem, picture, abstract, size)
    data, facts = makers[out.suffix.lower()](wish)
    write_bytes(out, data, overwrite=overwrite)
    return {"schema": "hueferry/export-1", "file": out.as_posix(), **facts}


@attrs.frozen(eq=False)
class _Export:
    table: Table
    name: str
    over: Picture | None
    abstract: bool
    size: int | None

    @property
    def encoding(self) -> Encoding:
        from hueferry.colour.encoding import SRGB

        return SRGB if self.over is None else self.over.encoding


def _as_profile(wish: _Export) -> tuple[bytes, dict[str, Any]]:
    from hueferry.tables.icc import abstract_error, abstract_profile, device_link, link_error

    if wish.abstract:
        error = abstract_error(wish.table, wish.encoding)
        return abstract_profile(wish.table, wish.encoding, name=wish.name), {"kind": "abstract", **attrs.asdict(error)}
    error = link_error(wish.table, wish.encoding)
    return device_link(wish.table, name=wish.name), {"kind": "device link", **attrs.asdict(error)}


def _as_decision_list(wish: _Export) -> tuple[bytes, dict[str, Any]]:
    from hueferry.colour.spaces import oklab_to_xyz
    from hueferry.palettes.build import palette_of
    from hueferry.tables.cdl import cc_text
    from hueferry.tables.fit_cdl import fit_decision_list

    if wish.over is None:
        ramp = np.linspace(0.0, 1.0, 9)
        codes = np.stack(np.meshgrid(ramp, ramp, ramp, indexing="ij"), axis=-1).reshape(-1, 3)
        weights = np.full(len(codes), 1 / len(codes))
    else:
        colours = palette_of(wish.over)
        codes = np.clip(wish.encoding.from_xyz(oklab_to_xyz(colours.colours)), 0.0, 1.0)
        weights = np.array(colours.weights)
    fitted = fit_decision_list(wish.table, codes, weights, wish.encoding)
    return cc_text(fitted.grade).encode(), {"kind": "decision list", **attrs.asdict(fitted)}


def _as_clf(wish: _Export) -> tuple[bytes, dict[str, Any]]:
    from hueferry.tables.build import sample_table
    from hueferry.tables.clf import clf_text
    from hueferry.tables.icc import table_distance
    from hueferry.tables.lookup import look_up

    table = wish.table
    if wish.size is not None and wish.size != table.size:
        table = sample_table(lambda codes: look_up(wish.table, codes), size=wish.size)
    error = table_distance(table, wish.table, wish.encoding)
    return clf_text(table, encoding=wish.encoding.name).encode(), {"kind": "CLF", **attrs.asdict(error)}
