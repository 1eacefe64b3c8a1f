"""What a run has to do: which pictures are done already, which are to do, and which names are taken."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import attrs

from hueferry.fitting.settings import Settings
from hueferry.record.record import FileFact, installed_versions
from hueferry.series.journal import Journal, Row
from hueferry.series.plan import Errand

PLAN_SCHEMA = "hueferry/plan-1"


@attrs.frozen
class Step:
    """One picture of a run.

    Attributes:
        errand: what to read and what to write.
        output: the name of the result below the folder of the run.
        fact: path, size and hash of the input; the hash is empty if it cannot be read.
        changed: when the input was last modified, ns since 1970.
        known: what the journal says if that still holds, else None: then the picture is to do.
        present: SHA-256 of what has the name of the result now, if that is ours; else empty.
    """

    errand: Errand
    output: str
    fact: FileFact
    changed: int
    known: Row | None
    present: str

    @property
    def state(self) -> str:
        """One of "to do", "done" and, where an earlier run failed and would fail again, "failed"."""
        return "to do" if self.known is None else self.known.state


def _why(renamed: Errand) -> str:
    same = renamed.output.suffix == renamed.source.suffix
    return "the name was taken" if same else f"{renamed.source.suffix} is not written"


@attrs.frozen
class Schedule:
    """All pictures of a run.

    Attributes:
        steps: in the order of the plan.
        wanted: hash of settings, references and versions.
        taken: names of results that somebody else's files have.
        workers: pictures done at a time.
        memory: bytes that they may take together, at most.
        joint: the pictures are solved as one series.
        groups: names of results that would be solved together, as far as it was looked for.
    """

    steps: Sequence[Step]
    wanted: str
    taken: Sequence[Path]
    workers: int = 1
    memory: int = 0
    joint: bool = False
    groups: Sequence[Sequence[str]] = ()

    @property
    def to_do(self) -> list[Step]:
        """The steps that are not done yet."""
        return [step for step in self.steps if step.known is None]

    @property
    def renamed(self) -> list[Errand]:
        """Pictures whose result has another name: another result has theirs, or their format is not written."""
        return [step.errand for step in self.steps if step.errand.output.name != step.errand.source.name]

    @property
    def sentences(self) -> list[str]:
        """What a person should know before it begins."""
        kept, count = len(self.steps) - len(self.to_do), len(self.to_do)
        said = []
        if kept == len(self.steps):
            said.append("an earlier run has dealt with all of these pictures; nothing to do")
        elif kept:
            said.append(f"{kept} of {len(self.steps)} pictures were dealt with by an earlier run; {count} to do")
        if count > 1:
            said.append(f"{count} pictures, {self.workers} at a time, at most {self.memory / 1e9:.1f} GB of memory")
        if count and self.joint:
            said.append("surfaces that several of them share are looked for first, and all are solved together")
        said += [f"group {place}: {', '.join(group)}" for place, group in enumerate(self.groups, 1) if len(group) > 1]
        if alone := [group[0] for group in self.groups if len(group) == 1]:
            said.append(f"sharing no surface with another: {', '.join(alone)}")
        said += [f"{one.source} becomes {one.output.name}: {_why(one)}" for one in self.renamed]
        said += [f"{path} exists already and is not an unchanged result of an earlier run" for path in self.taken]
        return said

    def as_dict(self) -> dict[str, Any]:
        """Return the plan as JSON values."""
        return {
            "schema": PLAN_SCHEMA,
            "pictures": [
                {"source": step.fact.path, "bytes": step.fact.size, "output": step.output, "state": step.state}
                for step in self.steps
            ],
            "workers": self.workers,
            "memory": self.memory,
            "joint": self.joint,
            "groups": [list(group) for group in self.groups],
            "renamed": [one.source.as_posix() for one in self.renamed],
            "taken": [path.as_posix() for path in self.taken],
        }

    @property
    def digest(self) -> str:
        """Hash of what the run is: every picture by name and hash, and what is wanted."""
        return _hash([self.wanted, *([step.output, step.fact.path, step.fact.sha256] for step in self.steps)])


def make_schedule(
    errands: Sequence[Errand], out: Path, journal: Journal, *, wanted: Sequence[object], together: bool
) -> Schedule:
    """Compare what is asked with what the journal and the folder hold.

    Args:
        errands: the plan.
        out: folder of the run.
        journal: of that folder.
        wanted: JSON values that stand for all that decides how a picture comes out, besides the pictures.
        together: the pictures decide together how each comes out; else each decides for itself.
    """
    rows = journal.rows()
    inputs = [_fact(errand.source, rows.get(_below(errand, out))) for errand in errands]
    all_of_them = [[Path(fact.path).name, fact.sha256] for fact, _ in inputs] if together else []
    key = _hash([*wanted, all_of_them])
    taken, steps = [], []
    for errand, (fact, changed) in zip(errands, inputs, strict=True):
        row = rows.get(_below(errand, out))
        present = fact_or_empty(errand.output).sha256 if errand.output.exists() else ""
        ours = row is not None and bool(present) and present in (row.output_sha256, row.former_sha256)
        if not ours and (errand.output.exists() or errand.output.is_symlink()):
            taken.append(errand.output)
        known = row if row is not None and _holds(row, fact, key, present) else None
        steps.append(Step(errand, _below(errand, out), fact, changed, known, present if ours else ""))
    return Schedule(steps, key, taken)


def identity(settings: Settings, to: Sequence[Path], hold: Path | None) -> list[object]:
    """Return what decides how pictures come out, besides themselves, as JSON values."""
    held = [] if hold is None else [fact_or_empty(hold).sha256]
    references = [[path.name, fact_or_empty(path).sha256] for path in to]
    return [settings.as_dict(), installed_versions(), held, references]


def fact_or_empty(path: Path) -> FileFact:
    """Return path, size and hash of a file, with an empty hash where it cannot be read."""
    try:
        return FileFact.of(path)
    except OSError:
        return FileFact(path.as_posix(), 0, "")


def _below(errand: Errand, out: Path) -> str:
    return errand.output.relative_to(out).as_posix()


def _fact(source: Path, row: Row | None) -> tuple[FileFact, int]:
    """Hash a file or a folder, unless it is a file as large and as old as the journal says."""
    try:
        status = source.stat()
    except OSError:
        return fact_or_empty(source), 0
    path, changed = source.as_posix(), status.st_mtime_ns
    # The time of a folder does not tell of the files in it.
    if (
        not source.is_dir()
        and row is not None
        and (row.source, row.size, row.changed) == (path, status.st_size, changed)
    ):
        return FileFact(path, row.size, row.sha256), changed
    return fact_or_empty(source), changed


def _holds(row: Row, fact: FileFact, wanted: str, present: str) -> bool:
    same = bool(fact.sha256) and (row.source, row.sha256, row.wanted) == (fact.path, fact.sha256, wanted)
    return same and (row.state == "failed" or present == row.output_sha256)


def _hash(value: object) -> str:
    return hashlib.sha256(json.dumps(value, sort_keys=True).encode()).hexdigest()


def seal_of(schedule: Schedule, files: Sequence[Path]) -> Mapping[str, object]:
    """Return what tells a finished run: what it was, and the hashes of what it left besides pictures."""
    return {"run": schedule.digest, "files": {path.name: fact_or_empty(path).sha256 for path in files}}


def is_sealed(schedule: Schedule, out: Path, seal: Mapping[str, object]) -> bool:
    """Whether the folder holds exactly what a finished run of this schedule left."""
    files = seal.get("files")
    if schedule.to_do or seal.get("run") != schedule.digest or not isinstance(files, dict):
        return False
    return all(fact_or_empty(out / name).sha256 == sha256 != "" for name, sha256 in files.items())
