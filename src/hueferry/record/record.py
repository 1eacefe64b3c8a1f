"""The record of a run: inputs and outputs with hashes, settings, versions, numbers.

A second person reproduces the same bytes from it: it names every input by hash and every setting and seed.
"""

from __future__ import annotations

import hashlib
import json
import platform
from collections.abc import Mapping, Sequence
from importlib.metadata import PackageNotFoundError, version
from pathlib import Path
from typing import Any

import attrs

from hueferry.errors import InputError

SCHEMA = "hueferry/record-1"
NAME = "record.json"
_RECORDED_PACKAGES = ("hueferry", "numpy", "opencolorio", "imagecodecs", "pillow", "tifffile", "POT", "scipy")
_CHUNK = 1 << 20


def installed_versions() -> dict[str, str]:
    """Return the versions of Python and of every package whose code touches a colour."""
    found = {"python": platform.python_version()}
    for name in _RECORDED_PACKAGES:
        try:
            found[name] = version(name)
        except PackageNotFoundError:
            continue
    return found


@attrs.frozen
class FileFact:
    """A file that was read or written: its path (POSIX form), size in bytes and SHA-256."""

    path: str
    size: int
    sha256: str

    @classmethod
    def of(cls, path: Path, shown_as: str | None = None) -> FileFact:
        """Hash the file at `path`, in pieces of 1 MiB; of a folder, names, sizes and hashes of all files in it."""
        digest = hashlib.sha256()
        size = 0
        if path.is_dir():
            for file in sorted(child for child in path.rglob("*") if child.is_file()):
                fact = cls.of(file, file.relative_to(path).as_posix())
                digest.update(f"{fact.path}\0{fact.size}\0{fact.sha256}\n".encode("utf-8", "surrogateescape"))
                size += fact.size
            return cls(shown_as if shown_as is not None else path.as_posix(), size, digest.hexdigest())
        with path.open("rb") as stream:
            while chunk := stream.read(_CHUNK):
                digest.update(chunk)
                size += len(chunk)
        return cls(shown_as if shown_as is not None else path.as_posix(), size, digest.hexdigest())


@attrs.frozen(eq=False)
class Entry:
    """What happened to one picture.

    Attributes:
        source: the file read.
        output: the file written; None if the picture was only measured.
        numbers: cost before and after, certificate, evidence: JSON values by name.
        sentences: what was done and why, for people.
    """

    source: FileFact
    output: FileFact | None
    numbers: Mapping[str, Any]
    sentences: Sequence[str] = ()


@attrs.frozen
class Failure:
    """A picture that could not be done, and why."""

    path: str
    reason: str


@attrs.frozen(eq=False)
class Record:
    """Everything that ran.

    Attributes:
        command: "match", "stain".
        settings: of every fit.
        references: what the pictures were brought towards; none means what they have in common.
        entries: the pictures that were done.
        failures: those that could not be done.
        sentences: what a person should know of the run.
        overview: the series as a whole.
        versions: of Python and of the packages whose code touches a colour.
        hold: the mask of what had to keep its colours, or None.
        series: whether the pictures were solved together (`joint`) and as a time-lapse (`time_lapse`).
    """

    command: str
    settings: Mapping[str, Any]
    references: Sequence[FileFact]
    entries: Sequence[Entry]
    failures: Sequence[Failure] = ()
    sentences: Sequence[str] = ()
    overview: Mapping[str, Any] = attrs.field(factory=dict)
    versions: Mapping[str, str] = attrs.field(factory=installed_versions)
    hold: FileFact | None = None
    series: Mapping[str, bool] = attrs.field(factory=dict)

    def as_dict(self) -> dict[str, Any]:
        """Return the record as JSON values."""
        return {"schema": SCHEMA, **attrs.asdict(self)}


def to_json(record: Record) -> str:
    """Return the record as JSON text; the same record always gives the same text."""
    return json.dumps(record.as_dict(), indent=2, ensure_ascii=False, allow_nan=False) + "\n"


def read_record(folder: Path) -> dict[str, Any]:
    """Read the record of a run as JSON values.

    Raises:
        InputError: there is no record in `folder`, or it is of another schema.
    """
    path = folder / NAME
    try:
        data = json.loads(path.read_text(encoding="utf-8"))
    except FileNotFoundError as error:
        raise InputError(f"{folder} holds no {NAME}; name the output folder of a run") from error
    except (ValueError, RecursionError) as error:
        raise InputError(f"{path} is not a record: {error}") from error
    if not isinstance(data, dict) or data.get("schema") != SCHEMA:
        raise InputError(f"{path} is not of the schema {SCHEMA}")
    return data
