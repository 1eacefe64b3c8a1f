"""The whole job on many pictures: plan, journal, references, every picture, record."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from functools import partial
from pathlib import Path

import attrs

from hueferry.errors import InputError, OutputError
from hueferry.fitting.settings import Aim, Settings
from hueferry.record.record import NAME, Failure, FileFact, Record, to_json
from hueferry.series.cluster import Cluster
from hueferry.series.job import Context
from hueferry.series.journal import Journal
from hueferry.series.keepsake import Done, record_from
from hueferry.series.memory import choose_workers, memory_of
from hueferry.series.overview import overview
from hueferry.series.plan import plan_errands
from hueferry.series.references import load_mask
from hueferry.series.schedule import Schedule, identity, is_sealed, make_schedule, seal_of
from hueferry.series.together import LEAST_TOGETHER, Together, bring_together, foresee_groups
from hueferry.series.work import Work

OnPlan = Callable[[Schedule], None]
"""Called once, before anything is done."""

OnDone = Callable[[int, int, Done | Failure], None]
"""Called after each picture with its number (from 1), the count of all to do, and what became of it."""


@attrs.frozen(eq=False)
class Run:
    """What came of an order.

    Attributes:
        record: of all pictures, done now or before.
        done: what pages show, of every picture done; none if nothing had to be done.
        schedule: what there was to do.
        unchanged: an earlier run had finished just this, and nothing was written.
    """

    record: Record
    done: Sequence[Done]
    schedule: Schedule
    unchanged: bool = False


@attrs.frozen(eq=False, kw_only=True)
class MatchOrder:
    """What the caller asked for.

    Attributes:
        inputs: files and folders.
        to: reference pictures; none means the pictures' own common palette.
        out: folder of the results.
        settings: settings of every fit.
        hold: picture whose white part must keep its colours, or None.
        overwrite: replace files that are not results of an earlier run.
        workers: pictures done at a time, each but the only one by a process of its own; None chooses.
        cluster: who does them instead, or None.
        arrived: those of the pictures that are complete and may be read, or None for all.
        joint: solve three pictures or more as one series under the aim `agree`; else each by itself.
        time_lapse: keep what changes slowly over the series.
    """

    inputs: Sequence[Path]
    to: Sequence[Path]
    out: Path
    settings: Settings
    hold: Path | None = None
    overwrite: bool = False
    workers: int | None = 1
    cluster: Cluster | None = None
    arrived: frozenset[Path] | None = None
    joint: bool = True
    time_lapse: bool = False


def plan_match(order: MatchOrder) -> Schedule:
    """Return what a run would do, and write nothing.

    Where pictures would be solved as one series they are read and compared, to tell the groups.

    Raises:
        InputError: it could not be done as asked.
    """
    with _journal_of(order) as journal:
        schedule = _schedule(order, journal)
        if not schedule.joint or not schedule.to_do:
            return schedule
        work = Work(schedule, journal, order.out, order.cluster)
        return attrs.evolve(schedule, groups=foresee_groups(work, order.to))


def match_pictures(order: MatchOrder, *, on_plan: OnPlan | None = None, on_done: OnDone | None = None) -> Run:
    """Bring pictures together and leave them and a record in the folder of the order.

    What an earlier run has done there is taken over, if inputs, settings and results are as they were.

    Raises:
        InputError: nothing can be done as asked; nothing was written.
    """
    with _journal_of(order) as journal:
        schedule = _schedule(order, journal)
        _check_names(order, schedule, journal)
        if on_plan is not None:
            on_plan(schedule)
        if is_sealed(schedule, order.out, journal.read_seal()):
            return Run(record_from(order.out), (), schedule, unchanged=True)
        work = Work(schedule, journal, journal.begin(), order.cluster, order.overwrite)
        together = bring_together(work, order.to, order.settings, time_lapse=order.time_lapse)
        hold = load_mask(order.hold) if order.hold is not None else None
        context = Context(together.references, order.settings, hold, len(schedule.steps))
        outcomes = dict(work.kept())
        for number, (step, outcome) in enumerate(work.do(context, together.given), 1):
            outcomes[step.output] = outcome
            if on_done is not None:
                on_done(number, len(schedule.to_do), outcome)
        return _finish(order, schedule, [outcomes[step.output] for step in schedule.steps], together)


def seal_run(order: MatchOrder, schedule: Schedule, files: Sequence[Path]) -> None:
    """Say in the journal that all is done, `files` besides pictures among it: run again, there is nothing to do."""
    with Journal(order.out) as journal:
        if journal.exists:
            journal.seal(seal_of(schedule, files))


def _journal_of(order: MatchOrder) -> Journal:
    if order.out.exists() and not order.out.is_dir():
        raise OutputError(order.out, "this is a file; --out names a folder")
    return Journal(order.out)


def _schedule(order: MatchOrder, journal: Journal) -> Schedule:
    if order.time_lapse and order.to:
        raise InputError("a time-lapse keeps its own slow changes and follows no reference; leave out --to")
    errands = plan_errands(order.inputs, order.out, find=partial(_find, arrived=order.arrived))
    joint = order.joint and order.settings.aim is Aim.AGREE and len(errands) >= LEAST_TOGETHER
    wanted = [*identity(order.settings, order.to, order.hold), order.time_lapse]
    schedule = make_schedule(errands, order.out, journal, wanted=wanted, together=joint or not order.to)
    files = [step.errand.source for step in schedule.to_do]
    workers = choose_workers(files, asked=order.workers)
    return attrs.evolve(schedule, workers=workers, memory=workers * memory_of(files), joint=joint)


def _find(paths: Sequence[Path], *, arrived: frozenset[Path] | None) -> list[Path]:
    from hueferry.files.walk import find_pictures

    return [path for path in find_pictures(paths) if arrived is None or path in arrived]


def _check_names(order: MatchOrder, schedule: Schedule, journal: Journal) -> None:
    if order.overwrite:
        return
    others = [order.out / NAME] if (order.out / NAME).exists() and not journal.exists else []
    for path in (*others, *schedule.taken):
        reason = "this exists already and is not an unchanged result of an earlier run"
        raise OutputError(path, f"{reason}; choose another folder, or add --overwrite")


def _finish(order: MatchOrder, schedule: Schedule, outcomes: Sequence[Done | Failure], together: Together) -> Run:
    from hueferry.files.atomic import write_bytes

    done = [outcome for outcome in outcomes if isinstance(outcome, Done)]
    record = Record(
        command="match",
        settings=order.settings.as_dict(),
        references=[FileFact.of(path) for path in order.to],
        entries=[outcome.entry for outcome in done],
        failures=[outcome for outcome in outcomes if isinstance(outcome, Failure)],
        sentences=together.sentences,
        overview={**overview(done), **together.overview},
        hold=None if order.hold is None else FileFact.of(order.hold),
        series={"joint": schedule.joint, "time_lapse": order.time_lapse},
    )
    if done:
        write_bytes(order.out / NAME, to_json(record).encode(), overwrite=True)
    return Run(record, done, schedule)
