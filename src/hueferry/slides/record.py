"""What a run on slides leaves on record."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from enum import StrEnum
from pathlib import Path
from typing import Any, TypeVar

from hueferry.errors import InputError
from hueferry.record.record import Entry, Failure, FileFact, Record
from hueferry.slides.cautions import CAUTIONS
from hueferry.slides.codecs import Packing
from hueferry.slides.density import Light
from hueferry.slides.fit import SlideAim
from hueferry.slides.run import SlideFailure, SlideOutcome
from hueferry.slides.settings import Container, StainSettings

_Word = TypeVar("_Word", bound=StrEnum)


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


def record_of(
    results: Sequence[SlideOutcome | SlideFailure], *, to: Sequence[Path], out: Path, words: Mapping[str, Any]
) -> Record:
    """Return the record of a run; cautions are part of it."""
    where = "towards " + ", ".join(path.name for path in to) if to else "towards what the slides have in common"
    return Record(
        command="stain",
        settings={name: value for name, value in words.items() if name not in ("threads", "overwrite")},
        references=[fact for path in to for fact in _facts(path)],
        entries=[_entry(result, out) for result in results if isinstance(result, SlideOutcome)],
        failures=[
            Failure(result.source.as_posix(), result.reason) for result in results if isinstance(result, SlideFailure)
        ],
        sentences=(where, *CAUTIONS),
    )


def _entry(result: SlideOutcome, out: Path) -> Entry:
    output = result.output
    written = None
    if output is not None:
        below = output.relative_to(out).as_posix()
        written = FileFact.of(output, below) if output.is_file() else FileFact(below, 0, "")
    return Entry(_facts(result.source)[0], written, result.numbers, result.sentences)


def _facts(path: Path) -> list[FileFact]:
    """Return the facts of a file; of a folder (OME-Zarr, DICOM) its name alone, without a hash."""
    return [FileFact.of(path)] if path.is_file() else [FileFact(path.as_posix(), 0, "")]
