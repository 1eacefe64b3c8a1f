"""The whole job on slides: reference, every slide, record; what an earlier run has done in the folder is taken over.

A slide is written in a folder of its own without its name, read back, put into the journal, and then named. A run that
was killed leaves nothing under a final name that does not verify; the next run does the slides that have none anew,
from the same frozen table, and gives the same bytes.
"""

from __future__ import annotations

import json
from collections.abc import Callable, Iterator, Sequence
from pathlib import Path

import attrs

from hueferry.errors import HueferryError, InputError, OutputError
from hueferry.files.atomic import write_bytes
from hueferry.record.record import NAME, Entry, Failure, FileFact, Record, installed_versions, to_json
from hueferry.series.journal import Journal, Row
from hueferry.series.keepsake import entry_from, record_from
from hueferry.series.plan import Errand
from hueferry.series.publish import publish
from hueferry.series.schedule import Schedule, Step, fact_or_empty, is_sealed, make_schedule, seal_of
from hueferry.slides.cautions import CAUTIONS
from hueferry.slides.gather import find_reference
from hueferry.slides.readers import find_slides
from hueferry.slides.reference import SlideReference
from hueferry.slides.run import SlideFailure, SlideOutcome, stain_slide
from hueferry.slides.settings import StainSettings, check_names, output_path, overlay_path

OnSlide = Callable[[SlideOutcome | SlideFailure], None]
"""Called with what became of each slide that was not done before."""


@attrs.frozen(eq=False, kw_only=True)
class StainOrder:
    """What the caller asked for.

    Attributes:
        inputs: slides, and folders of slides.
        to: reference slides, or one saved house palette; nothing means what the slides have in common.
        out: folder of the results; made if it does not exist.
        settings: how.
    """

    inputs: Sequence[Path]
    to: Sequence[Path] = ()
    out: Path
    settings: StainSettings = attrs.field(factory=StainSettings)


@attrs.frozen(eq=False)
class StainRun:
    """What came of an order.

    Attributes:
        record: of all slides, those of an earlier run too.
        schedule: what was to do; slides and their overlays take turns.
        unchanged: whether an earlier run had finished just this, so that nothing was done.
    """

    record: Record
    schedule: Schedule
    unchanged: bool = False


def stain_slides(
    order: StainOrder, *, on_plan: Callable[[str], None] | None = None, on_done: OnSlide | None = None
) -> StainRun:
    """Bring slides together, and leave them, their overlays and a record in the folder of the order.

    Args:
        order: what is asked.
        on_plan: called with a sentence on what an earlier run has done already, if it has done anything.
        on_done: called after each slide that was not done before.

    Raises:
        InputError: it cannot be done as asked; nothing was written.
    """
    slides = _slides_of(order)
    with Journal(order.out) as journal:
        schedule = _schedule(order, slides, journal)
        _check_taken(order, schedule, journal)
        tasks = [_Task(*pair) for pair in zip(schedule.steps[::2], schedule.steps[1::2], strict=True)]
        done = sum(task.known for task in tasks)
        if on_plan is not None and done:
            on_plan(f"{done} of {len(tasks)} slides were done by an earlier run; {len(tasks) - done} to do")
        if is_sealed(schedule, order.out, journal.read_seal()):
            return StainRun(record_from(order.out), schedule, unchanged=True)
        reference = find_reference(order.to or slides, light=order.settings.light) if done < len(tasks) else None
        work = _Work(order, schedule.wanted, journal, journal.begin(), reference)
        outcomes = list(work.do(tasks, on_done))
    return StainRun(_record(order, outcomes), schedule)


def seal_run(order: StainOrder, schedule: Schedule, files: Sequence[Path]) -> None:
    """Say in the journal that all is done, `files` besides slides among it: run again, there is nothing to do."""
    with Journal(order.out) as journal:
        if journal.exists:
            journal.seal(seal_of(schedule, files))


def _slides_of(order: StainOrder) -> list[Path]:
    """Return the slides of an order; results in a folder of theirs are none."""
    out = order.out.resolve()
    if order.out.exists() and not order.out.is_dir():
        raise OutputError(order.out, "this is a file; --out names a folder")
    slides = [path for path in find_slides(order.inputs) if not path.resolve().is_relative_to(out)]
    if not slides:
        raise InputError(f"every slide that was found lies in {order.out}; name another folder for the results")
    check_names(slides, order.out, order.settings.layout)
    return slides


def _schedule(order: StainOrder, slides: Sequence[Path], journal: Journal) -> Schedule:
    errands = [
        Errand(slide, output)
        for slide in slides
        for output in (output_path(slide, order.out, order.settings.layout), overlay_path(slide, order.out))
    ]
    references = [[path.name, fact_or_empty(path).sha256] for path in order.to]
    wanted = [order.settings.as_dict(), installed_versions(), [], references]
    return make_schedule(errands, order.out, journal, wanted=wanted, together=not references)


def _check_taken(order: StainOrder, schedule: Schedule, journal: Journal) -> None:
    others = [order.out / NAME] if (order.out / NAME).exists() and not journal.exists else []
    for path in () if order.settings.overwrite else (*others, *schedule.taken):
        reason = "this exists already and is not an unchanged result of an earlier run"
        raise OutputError(path, f"{reason}; choose another folder, or add --overwrite")


@attrs.frozen
class _Task:
    """A slide to do, with its overlay."""

    slide: Step
    overlay: Step

    @property
    def known(self) -> bool:
        return self.slide.state == self.overlay.state == "done"


@attrs.frozen(eq=False)
class _Work:
    """A run at work."""

    order: StainOrder
    wanted: str
    journal: Journal
    stage: Path
    reference: SlideReference | None

    def do(self, tasks: Sequence[_Task], on_done: OnSlide | None) -> Iterator[Entry | Failure]:
        for task in tasks:
            if task.known or self.reference is None:
                yield entry_from(json.loads(self.journal.whole(task.slide.output).entry))
                continue
            source = task.slide.errand.source
            outcome: SlideOutcome | SlideFailure
            try:
                outcome = stain_slide(source, self.reference, self.stage, settings=self.order.settings)
                entry = entry_of(outcome, task.slide.fact, task.slide.output)
                self._settle(task, outcome, entry)
                yield entry
            except HueferryError as error:
                outcome = SlideFailure(source, str(error))
                yield Failure(source.as_posix(), str(error))
            if on_done is not None:
                on_done(outcome)

    def _settle(self, task: _Task, outcome: SlideOutcome, entry: Entry) -> None:
        """Put a slide into the journal, then give it its name: the overlay first, for the slide is the dearer."""
        text = json.dumps(attrs.asdict(entry), ensure_ascii=False, allow_nan=False)
        shown = "" if outcome.overlay is None else FileFact.of(outcome.overlay).sha256
        self.journal.store(self._row(task.overlay, output_sha256=shown))
        written = "" if entry.output is None else entry.output.sha256
        self.journal.store(self._row(task.slide, output_sha256=written, entry=text))
        for made, step in ((outcome.overlay, task.overlay), (outcome.output, task.slide)):
            if made is not None:
                self._publish(made, step)

    def _publish(self, made: Path, step: Step) -> None:
        output, replace = step.errand.output, self.order.settings.overwrite or bool(step.present)
        if replace and (made.is_dir() or output.is_dir()) and output.exists():
            output.rename(self.stage / f"old-{output.name}")  # a folder cannot be replaced in one step
            replace = False
        try:
            publish(made, output, replace=replace)
        except OutputError:
            self.journal.forget(step.output)
            raise

    def _row(self, step: Step, *, output_sha256: str, entry: str = "") -> Row:
        return Row(
            output=step.output,
            source=step.fact.path,
            size=step.fact.size,
            changed=step.changed,
            sha256=step.fact.sha256,
            wanted=self.wanted,
            state="done",
            output_sha256=output_sha256,
            former_sha256=step.present,
            entry=entry,
        )


def entry_of(outcome: SlideOutcome, source: FileFact, below: str) -> Entry:
    """Return what the record says of a slide that was done; its output is called `below` there."""
    written = None if outcome.output is None else FileFact.of(outcome.output, below)
    return Entry(source, written, outcome.numbers, outcome.sentences)


def _record(order: StainOrder, outcomes: Sequence[Entry | Failure]) -> Record:
    to = order.to
    where = "towards " + ", ".join(path.name for path in to) if to else "towards what the slides have in common"
    record = Record(
        command="stain",
        settings=order.settings.as_dict(),
        references=[FileFact.of(path) for path in to],
        entries=[one for one in outcomes if isinstance(one, Entry)],
        failures=[one for one in outcomes if isinstance(one, Failure)],
        sentences=(where, *CAUTIONS),
    )
    if record.entries:
        write_bytes(order.out / NAME, to_json(record).encode(), overwrite=True)
    return record
