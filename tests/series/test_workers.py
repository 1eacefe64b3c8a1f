"""Processes share the tasks out, and one that dies costs its own task alone."""

from __future__ import annotations

import math
import operator
import os
import signal
from functools import partial
from pathlib import Path

import pytest

from hueferry.series import memory
from hueferry.series.workers import Died, run_tasks


@pytest.mark.parametrize("workers", [1, 2])
def test_every_task_is_done_once_whatever_the_workers(workers: int) -> None:
    tasks = [partial(math.factorial, number) for number in range(7)]

    done = dict(run_tasks(operator.call, tasks, workers=workers))

    assert [done[number] for number in range(7)] == [1, 1, 2, 6, 24, 120, 720]


def test_processes_that_are_killed_or_stop_cost_their_own_tasks_alone() -> None:
    tasks = [partial(math.factorial, 5)] * 6
    tasks[1] = partial(signal.raise_signal, signal.SIGKILL)
    tasks[4] = partial(os._exit, 7)

    done = dict(run_tasks(operator.call, tasks, workers=2))

    assert done == {0: 120, 1: Died(-9), 2: 120, 3: 120, 4: Died(7), 5: 120}
    assert "memory ran out" in str(done[1])
    assert "exit code 7" in str(done[4])


def test_processes_keep_linear_algebra_to_one_thread() -> None:
    before = dict(os.environ)
    tasks = [partial(os.getenv, "OPENBLAS_NUM_THREADS"), partial(os.getenv, "OMP_NUM_THREADS")]

    assert [result for _, result in run_tasks(operator.call, tasks, workers=2)] == ["1", "1"]
    assert dict(os.environ) == before


def test_stopping_early_ends_the_processes() -> None:
    results = run_tasks(operator.call, [partial(os.getpid)] * 4, workers=2)
    _, process = next(results)

    results.close()

    assert isinstance(process, int)
    with pytest.raises(ProcessLookupError):
        os.kill(process, 0)


def test_workers_are_as_many_as_fit_into_memory(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    files = [tmp_path / f"{number}.jpg" for number in range(9)]
    for file in files:
        file.write_bytes(bytes(1000))
    monkeypatch.setattr(memory, "cores", lambda: 4)
    monkeypatch.setattr(memory, "free_memory", lambda: 3 * memory.PER_WORKER)

    assert memory.choose_workers(files) == 2
    assert memory.choose_workers(files[:3]) == 1
    assert memory.choose_workers(files, asked=20) == 9
    monkeypatch.setattr(memory, "free_memory", lambda: 0)
    assert memory.choose_workers(files) == 1


def test_a_containers_limit_counts(tmp_path: Path) -> None:
    (tmp_path / "memory.max").write_text("1000\n")
    (tmp_path / "memory.current").write_text("400\n")

    assert memory._container_memory(tmp_path) == 600
    (tmp_path / "memory.max").write_text("max\n")
    assert memory._container_memory(tmp_path) is None
