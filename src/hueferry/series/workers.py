"""Worker processes: tasks are handed out one at a time, and a process that dies costs its own task alone.

The pools of the standard library give up every waiting task when one process dies, and do not say which task it had.
Here each process has a pipe of its own, so that is known. Processes are spawned, never forked, and keep their linear
algebra to one thread: the pictures are what is shared out over the cores.
"""

from __future__ import annotations

import os
import signal
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager, suppress
from multiprocessing import connection, get_context
from typing import TYPE_CHECKING, Any, Generic, TypeVar

import attrs

if TYPE_CHECKING:
    from multiprocessing.connection import Connection
    from multiprocessing.context import SpawnProcess

_Task = TypeVar("_Task")
_Result = TypeVar("_Result")

_ONE_THREAD = ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS", "OPENCV_FOR_THREADS_NUM")
_PATIENCE = 5.0
"""Seconds that a process which was told to end may take."""


@attrs.frozen
class Died:
    """A process ended before it answered.

    Attributes:
        exit_code: as the system gave it; the negative number of a signal where one killed it; None if not known.
        said: what is known besides, in words.
    """

    exit_code: int | None
    said: str = ""

    def __str__(self) -> str:
        if self.said:
            return self.said
        if self.exit_code is None or self.exit_code >= 0:
            return f"the process that did it stopped with exit code {self.exit_code}"
        try:
            name = signal.Signals(-self.exit_code).name
        except ValueError:
            name = f"signal {-self.exit_code}"
        if name == "SIGKILL":
            return "the process that did it was killed, most likely because memory ran out; use fewer --workers"
        return f"the process that did it was stopped by {name}"


def run_tasks(
    do: Callable[[_Task], _Result], tasks: Sequence[_Task], *, workers: int
) -> Iterator[tuple[int, _Result | Died]]:
    """Do every task and yield its number and result as it is done.

    One worker is this process itself, in the order of the tasks. With more, tasks begin in their order and may end in
    any; `do`, tasks and results must be picklable then. Closing the iterator ends the processes.
    """
    if workers <= 1:
        for number, task in enumerate(tasks):
            yield number, do(task)
        return
    team = _Team(do, tasks)
    try:
        with _one_thread_each():
            team.start(min(workers, len(tasks)))
            yield from team.results()
    finally:
        team.dismiss()


@attrs.define(eq=False)
class _Worker:
    process: SpawnProcess
    pipe: Connection
    task: int

    def dismiss(self) -> None:
        self.pipe.close()  # the process sees the end of the pipe and ends by itself
        self.process.join(_PATIENCE)
        if self.process.is_alive():
            self.process.kill()
            self.process.join()


class _Team(Generic[_Task, _Result]):
    """The processes at work, and the tasks that nobody has begun."""

    def __init__(self, do: Callable[[_Task], _Result], tasks: Sequence[_Task]) -> None:
        self._do, self._tasks = do, tasks
        self._waiting = iter(range(len(tasks)))
        self._workers: list[_Worker] = []

    def start(self, count: int) -> None:
        for _ in range(count):
            self._hire()

    def results(self) -> Iterator[tuple[int, _Result | Died]]:
        while self._workers:
            by_pipe = {worker.pipe: worker for worker in self._workers}
            for pipe in connection.wait(list(by_pipe)):
                worker = by_pipe[pipe]  # type: ignore[index]  # only pipes were waited for
                task, result = worker.task, self._receive(worker)
                if isinstance(result, Died):
                    self._workers.remove(worker)
                    self._hire()
                elif (following := next(self._waiting, None)) is None:
                    self._workers.remove(worker)
                    worker.dismiss()
                else:
                    self._hand(worker, following)
                yield task, result

    def _receive(self, worker: _Worker) -> _Result | Died:
        try:
            result: _Result = worker.pipe.recv()
        except (EOFError, OSError):
            worker.pipe.close()
            worker.process.join()
            return Died(worker.process.exitcode)
        return result

    def dismiss(self) -> None:
        for worker in self._workers:
            worker.process.terminate()
            worker.dismiss()

    def _hire(self) -> None:
        task = next(self._waiting, None)
        if task is None:
            return
        spawn = get_context("spawn")
        ours, theirs = spawn.Pipe()
        process = spawn.Process(target=_serve, args=(theirs, self._do), daemon=True)
        process.start()
        theirs.close()
        worker = _Worker(process, ours, task)
        self._workers.append(worker)
        self._hand(worker, task)

    def _hand(self, worker: _Worker, task: int) -> None:
        worker.task = task
        with suppress(OSError):  # it died meanwhile: the pipe is at its end and says so when it is read
            worker.pipe.send(self._tasks[task])


def _serve(pipe: Connection, do: Callable[[Any], Any]) -> None:
    """Answer tasks until the pipe ends; an interrupt from the keyboard is for the parent to handle."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    with suppress(EOFError, OSError):
        while True:
            task = pipe.recv()
            pipe.send(do(task))


@contextmanager
def _one_thread_each() -> Iterator[None]:
    """Let processes that are started meanwhile keep linear algebra to one thread: it is read when they begin."""
    before = {name: os.environ.get(name) for name in _ONE_THREAD}
    os.environ.update(dict.fromkeys(_ONE_THREAD, "1"))
    try:
        yield
    finally:
        for name, value in before.items():
            if value is None:
                os.environ.pop(name, None)
            else:
                os.environ[name] = value
