"""How slides are brought together, and what the results are called."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from enum import StrEnum
from pathlib import Path
from typing import Any, TypeVar

import attrs

from hueferry.errors import InputError, OutputError
from hueferry.maps.method import Method
from hueferry.slides.codecs import Packing
from hueferry.slides.density import Light
from hueferry.slides.fit import SlideAim


class Container(StrEnum):
    """What a slide is written as."""

    OME = "ome"
    FLAT = "flat"
    ZARR = "zarr"


_Word = TypeVar("_Word", bound=StrEnum)

SUFFIXES = {Container.OME: ".ome.tif", Container.FLAT: ".tif", Container.ZARR: ".ome.zarr"}


@attrs.frozen(kw_only=True)
class StainSettings:
    """Settings of a run on slides; equal settings and inputs give equal bytes.

    Attributes:
        aim: `agree` or `adopt`.
        light: what Beer–Lambert's law is applied to.
        strength: share of the way, 0 … 1.
        max_gain: largest stretch in code values; None means the default for slides.
        method: transport under `adopt`.
        layout: "ome" (SubIFDs), "flat" (pages, for OpenSlide) or "zarr".
        packing: compression of tiles; None means JPEG 4:4:4 for 8 bit and deflate for deeper slides.
        quality: of JPEG, 1 … 100.
        measure_only: write no slide.
        correct_measured: correct also where the amount of a stain is likely to be the measurement (DAB).
        keep_texts: carry the file's free text and identifiers over.
        overwrite: replace outputs of the same name.
        threads: windows at the same time; the bytes do not depend on it.
    """

    aim: SlideAim = SlideAim.AGREE
    light: Light = Light.ENCODED
    strength: float = attrs.field(default=1.0, validator=[attrs.validators.ge(0.0), attrs.validators.le(1.0)])
    max_gain: float | None = None
    method: Method = Method.ENTROPIC
    layout: Container = Container.OME
    packing: Packing | None = None
    quality: int = attrs.field(default=90, validator=[attrs.validators.ge(1), attrs.validators.le(100)])
    measure_only: bool = False
    correct_measured: bool = False
    keep_texts: bool = False
    overwrite: bool = False
    threads: int = 2

    def as_dict(self) -> dict[str, Any]:
        """Return as JSON values what the bytes of a result depend on."""
        free = ("overwrite", "threads")
        return attrs.asdict(self, filter=lambda field, _: field.name not in free)


def stem_of(path: Path) -> str:
    """Return the name of a slide without its suffixes."""
    name = path.name
    for suffix in (".ome.zarr", ".ome.tif", ".ome.tiff", ".zarr", path.suffix):
        if suffix and name.lower().endswith(suffix):
            return name[: -len(suffix)] or name
    return name


def output_path(path: Path, out: Path, layout: Container) -> Path:
    """Return where the output of a slide goes."""
    return out / (stem_of(path) + SUFFIXES[layout])


def free_output(path: Path, out: Path, layout: Container) -> Path:
    """Return where the output of a slide goes.

    Raises:
        OutputError: that is the slide itself.
    """
    target = output_path(path, out, layout)
    if target.resolve() == path.resolve():
        raise OutputError(target, "this is the original, which is never overwritten; name another folder")
    return target


def overlay_path(path: Path, out: Path) -> Path:
    """Return where the picture of a slide's tissue goes."""
    return out / (stem_of(path) + ".tissue.png")


def check_names(slides: Sequence[Path], out: Path, layout: Container) -> None:
    """Check that no two slides would get one name.

    Raises:
        InputError: two would.
    """
    taken: dict[str, Path] = {}
    for path in slides:
        name = stem_of(path).casefold()
        if name in taken:
            both = output_path(path, out, layout).name
            raise InputError(f"{taken[name]} and {path} would both become {both}; run them into different folders")
        taken[name] = path


def settings_from_words(words: Mapping[str, Any]) -> StainSettings:
    """Make settings from plain words, as a command line or a script gives them.

    Raises:
        InputError: a word or a value is not one of the choices.
    """
    named: dict[str, Any] = dict(words)
    kinds: Mapping[str, type[StrEnum]] = {"aim": SlideAim, "layout": Container, "light": Light}
    for name, kind in kinds.items():
        if name in named:
            named[name] = _word(kind, named[name], name)
    if named.get("packing", "auto") == "auto":
        named["packing"] = None
    else:
        named["packing"] = _word(Packing, named["packing"], "packing")
    try:
        return StainSettings(**named)
    except (TypeError, ValueError) as error:
        raise InputError(str(error)) from error


def _word(kind: type[_Word], value: str, name: str) -> _Word:
    try:
        return kind(value)
    except ValueError as error:
        choices = ", ".join(member.value for member in kind)
        raise InputError(f"there is no {name} {value!r}; choose one of {choices}") from error
