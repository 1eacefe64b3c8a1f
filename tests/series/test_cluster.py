"""The same runs on a Dask cluster, on this machine and on loopback alone."""

from __future__ import annotations

import math
import operator
import os
import signal
from collections.abc import Iterator
from functools import partial
from pathlib import Path
from typing import Any

import attrs
import pytest
from distributed import LocalCluster
from PIL import Image

from hueferry.errors import InputError
from hueferry.fitting.settings import Aim, Settings
from hueferry.jobs import match_files
from hueferry.maps.method import Method
from hueferry.record.record import Failure
from hueferry.series.cluster import Cluster, run_on_cluster
from hueferry.series.journal import FOLDER
from hueferry.series.keepsake import Done
from hueferry.series.match import MatchOrder
from hueferry.series.workers import Died
from photographs import in_other_light, photograph

pytestmark = pytest.mark.filterwarnings("ignore::ResourceWarning")


@pytest.fixture(scope="module")
def dask() -> Iterator[Any]:
    cluster = LocalCluster(
        n_workers=2, threads_per_worker=1, processes=True, host="127.0.0.1", dashboard_address=None, memory_limit="2GB"
    )
    yield cluster
    cluster.close()


def tree(folder: Path) -> dict[str, bytes]:
    files = (path for path in sorted(folder.rglob("*")) if path.is_file() and FOLDER not in path.parts)
    return {path.relative_to(folder).as_posix(): path.read_bytes() for path in files}


def test_a_run_with_a_worker_killed_in_the_middle_leaves_the_bytes_of_a_quiet_one(dask: Any, tmp_path: Path) -> None:
    shoot = tmp_path / "shoot"
    shoot.mkdir()
    for number in range(12):
        gains = (1.3 - 0.05 * number, 1.0, 0.7 + 0.05 * number)
        Image.fromarray(in_other_light(photograph("flower"), gains=gains)[::4, ::4]).save(shoot / f"{number}.jpg")
    (shoot / "broken.jpg").write_bytes(b"\xff\xd8\xff")
    Image.fromarray(photograph("flower")[::4, ::4]).save(tmp_path / "hero.png")
    quick = Settings(aim=Aim.ADOPT, method=Method.GAUSSIAN)
    order = MatchOrder(inputs=[shoot], to=[tmp_path / "hero.png"], out=tmp_path / "here", settings=quick)
    killed: list[int] = []

    def kill_one(number: int, _: int, __: Done | Failure) -> None:
        if number == 3:
            worker = next(iter(dask.workers.values()))
            killed.append(worker.pid)
            os.kill(worker.pid, signal.SIGKILL)

    match_files(order)
    there = attrs.evolve(order, out=tmp_path / "there", cluster=Cluster(dask.scheduler_address))
    record = match_files(there, on_done=kill_one)

    assert killed
    assert len(record.entries) == 12
    assert tree(tmp_path / "there") == tree(tmp_path / "here")


def test_a_task_that_ends_worker_after_worker_is_set_aside(dask: Any, tmp_path: Path) -> None:
    tasks: list[Any] = [partial(math.factorial, 5)] * 8
    tasks[2] = partial(os._exit, 9)

    done = dict(run_on_cluster(operator.call, tasks, cluster=Cluster(dask.scheduler_address), folder=tmp_path))

    assert isinstance(done[2], Died)
    assert "set aside" in str(done[2])
    assert "2.0 GB" in str(done[2])
    assert [done[number] for number in range(8) if number != 2] == [120] * 7


def test_workers_that_do_not_see_the_files_are_refused(dask: Any, tmp_path: Path) -> None:
    with pytest.raises(InputError, match=r"does not see .*the same paths everywhere"):
        list(run_on_cluster(len, [()], cluster=Cluster(dask.scheduler_address), folder=tmp_path / "only-here"))


@pytest.mark.parametrize("address", ["tcp://127.0.0.1:1", "nonsense", "tcp://127.0.0.1:99999"])
def test_no_scheduler_is_one_sentence(address: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("hueferry.series.cluster._PATIENCE", "1s")

    with pytest.raises(InputError, match="no scheduler can be reached"):
        list(run_on_cluster(len, [()], cluster=Cluster(address), folder=tmp_path))


def test_transport_security_asks_for_its_files() -> None:
    with pytest.raises(InputError, match="--tls-ca"):
        Cluster("tls://127.0.0.1:8786")
