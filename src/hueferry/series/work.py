"""A run at work: pictures handed out, their results put into the journal and given their names."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from functools import partial
from pathlib import Path
from typing import TypeVar

import attrs

from hueferry.errors import OutputError
from hueferry.fitting.fit import Given
from hueferry.record.record import Failure
from hueferry.series.cluster import Cluster, run_on_cluster
from hueferry.series.job import Context, Failed, Job, run_job
from hueferry.series.journal import Journal, Row
from hueferry.series.keepsake import Done, Kept, unpack
from hueferry.series.publish import publish
from hueferry.series.schedule import Schedule, Step
from hueferry.series.workers import Died, run_tasks

_Task = TypeVar("_Task")
_Result = TypeVar("_Result")


@attrs.frozen(eq=False)
class Work:
    """A run at work: what is to do, who does it, and where it is written down.

    Attributes:
        schedule: what there is to do.
        journal: of the folder of the run.
        stage: folder for what has no name yet.
        cluster: who does it, or None for processes of this machine.
        overwrite: replace files that are not ours.
    """

    schedule: Schedule
    journal: Journal
    stage: Path
    cluster: Cluster | None = None
    overwrite: bool = False

    def share(self, do: Callable[[_Task], _Result], tasks: Sequence[_Task]) -> Iterator[tuple[int, _Result | Died]]:
        """Do tasks by whoever does the work, and yield their numbers and results as they are done."""
        if self.cluster is None:
            return run_tasks(do, tasks, workers=self.schedule.workers)
        return run_on_cluster(do, tasks, cluster=self.cluster, folder=self.stage)

    def kept(self) -> Iterator[tuple[str, Done | Failure]]:
        """Yield what earlier runs did, by the names of the results."""
        for step in self.schedule.steps:
            if step.known is not None and step.known.state == "failed":
                yield step.output, Failure(step.fact.path, step.known.reason)
            elif step.known is not None:
                row = self.journal.whole(step.output)
                yield step.output, unpack(Kept(row.entry, row.arrays))

    def do(self, context: Context, given: Mapping[str, Given]) -> Iterator[tuple[Step, Done | Failure]]:
        """Do the pictures that are to do and yield each as it is done.

        Args:
            context: what all pictures share.
            given: maps that the series decided, by the names of the results; the others are found one by one.
        """
        steps = self.schedule.to_do
        jobs = [self._job(number, step, given.get(step.output)) for number, step in enumerate(steps)]
        for number, answer in self.share(partial(run_job, context), jobs):
            yield steps[number], self._settle(steps[number], jobs[number], answer)

    def _job(self, number: int, step: Step, given: Given | None) -> Job:
        stage = self.stage.absolute() / f"{number}{step.errand.output.suffix}"
        return Job(step.errand.source.absolute(), step.fact.path, stage, step.output, given)

    def _settle(self, step: Step, job: Job, answer: Kept | Failed | Died) -> Done | Failure:
        path = step.fact.path
        if isinstance(answer, Died):
            return Failure(path, f"{path} ({step.fact.size:,} bytes): {answer}")
        if isinstance(answer, Failed):
            if answer.lasting and step.fact.sha256:
                self.journal.store(self._row(step, state="failed", reason=answer.reason))
            return Failure(path, answer.reason)
        done = unpack(answer)
        written = done.entry.output.sha256 if done.entry.output is not None else ""
        row = self._row(step, state="done", output_sha256=written, entry=answer.entry, arrays=answer.arrays)
        read = done.entry.source
        # A picture that was replaced while the run was on its way to it: the journal speaks of what was read.
        self.journal.store(row if read.sha256 == row.sha256 else attrs.evolve(row, sha256=read.sha256, changed=0))
        try:
            publish(job.stage, step.errand.output, replace=self.overwrite or bool(step.present))
        except OutputError as error:
            self.journal.forget(step.output)
            return Failure(path, str(error))
        return done

    def _row(self, step: Step, *, state: str, **facts: str | bytes) -> Row:
        return Row(
            output=step.output,
            source=step.fact.path,
            size=step.fact.size,
            changed=step.changed,
            sha256=step.fact.sha256,
            wanted=self.schedule.wanted,
            state=state,
            former_sha256=step.present,
            **facts,  # type: ignore[arg-type]  # strings but for the arrays
        )
