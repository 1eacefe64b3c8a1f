"""Where each output goes, decided before anything is written."""

from __future__ import annotations

import unicodedata
from collections.abc import Callable, Iterable, Sequence
from pathlib import Path

import attrs

from hueferry.errors import InputError, OutputError
from hueferry.files.formats import written_name


@attrs.frozen
class Errand:
    """One picture to do.

    Attributes:
        source: the file to read.
        output: the file to write; it does not exist in the plan of a first run.
    """

    source: Path
    output: Path


def plan_errands(
    inputs: Sequence[Path], out: Path, *, find: Callable[[Sequence[Path]], list[Path]]
) -> tuple[Errand, ...]:
    """Pair every picture under `inputs` with the file it will be written to.

    A file goes to `out` under its own name, and a file found in a folder keeps its place below that folder. Names that
    a file system could take for the same one (by case or by Unicode form) get a number, in the order of the inputs.
    What is only read gets the suffix of the format it is written in. Where `out` lies in one of the folders, what is
    in it are results, not inputs.

    Args:
        inputs: files and folders as the caller named them.
        out: the output folder; need not exist.
        find: lists the pictures of files and folders, in a fixed order.

    Raises:
        InputError: no picture was found.
        OutputError: an output would be an input.
    """
    sources: dict[Path, Path] = {}
    for path in inputs:
        results = _results_below(path, out)
        for picture in find([path]):
            if results is not None and picture.is_relative_to(results):
                continue
            below = picture.relative_to(path) if path.is_dir() else Path(picture.name)
            sources.setdefault(picture, written_name(below))
    if not sources:
        raise InputError("no picture was found in " + ", ".join(str(path) for path in inputs))
    errands = tuple(_without_collisions(sources.items(), out))
    _check_inputs_survive(errands)
    return errands


def _results_below(path: Path, out: Path) -> Path | None:
    """Return the output folder as a path below the input folder, if it lies there and is not that folder itself."""
    folder, results = path.resolve(), out.resolve()
    return path / results.relative_to(folder) if folder in results.parents else None


def _without_collisions(placed: Iterable[tuple[Path, Path]], out: Path) -> Iterable[Errand]:
    taken: set[str] = set()
    for source, below in placed:
        candidate, number = below, 1
        while _folded(candidate) in taken:
            number += 1
            candidate = below.with_name(f"{below.stem}-{number}{below.suffix}")
        taken.add(_folded(candidate))
        yield Errand(source, out / candidate)


def _folded(path: Path) -> str:
    return unicodedata.normalize("NFKC", path.as_posix()).casefold()


def _check_inputs_survive(errands: Sequence[Errand]) -> None:
    originals = {errand.source.resolve() for errand in errands}
    for errand in errands:
        if errand.output.resolve() in originals:
            raise OutputError(errand.output, "this is one of the originals; choose another folder with --out")
