"""A Dask cluster: the tasks of a run done by its workers, which see the same files under the same paths.

Scheduling, retries, transport security and the setting aside of a task that ends worker after worker are Dask's.
"""

from __future__ import annotations

import logging
import uuid
from collections.abc import Callable, Iterator, Mapping, Sequence
from contextlib import contextmanager
from itertools import islice
from pathlib import Path
from typing import TYPE_CHECKING, Any, Generic, TypeVar

import attrs

from hueferry.errors import InputError
from hueferry.record.record import installed_versions
from hueferry.series.workers import Died

if TYPE_CHECKING:
    from distributed import Client, Future

_Task = TypeVar("_Task")
_Result = TypeVar("_Result")

_WAITING = 4
"""Tasks handed over for each thread of the cluster: none idles, and a run that is stopped leaves little behind."""
_RETRIES = 2
_PATIENCE = "15s"
"""How long to wait for a scheduler, as Dask writes it."""


@attrs.frozen
class Cluster:
    """Where a scheduler listens, and what proves who we are if it asks.

    Attributes:
        address: as Dask writes it: tcp://HOST:PORT, or tls://HOST:PORT.
        ca_file: certificates of the authority, PEM; needed with tls.
        certificate: our certificate, PEM.
        key: its private key, PEM.
    """

    address: str
    ca_file: Path | None = None
    certificate: Path | None = None
    key: Path | None = None

    def __attrs_post_init__(self) -> None:
        if self.address.startswith("tls://") and not (self.ca_file and self.certificate and self.key):
            raise InputError(f"{self.address} asks for --tls-ca, --tls-certificate and --tls-key")


def run_on_cluster(
    do: Callable[[_Task], _Result], tasks: Sequence[_Task], *, cluster: Cluster, folder: Path
) -> Iterator[tuple[int, _Result | Died]]:
    """Let a cluster do every task and yield its number and result as it is done, in any order.

    Args:
        do: as for `workers.run_tasks`; `do`, tasks and results must be picklable.
        tasks: the tasks.
        cluster: where.
        folder: a folder that exists here; every worker must see it too.

    Raises:
        InputError: there is no such cluster, its workers have another version, or do not see the folder.
    """
    with _connected(cluster) as client:
        _check_workers(client, folder)
        yield from _results(client, do, tasks)


@contextmanager
def _connected(cluster: Cluster) -> Iterator[Client]:
    try:
        from distributed import Client
        from distributed.security import Security
    except ImportError as error:
        raise InputError("--cluster needs Dask; install hueferry[cluster]") from error
    quiet = logging.getLogger("distributed")
    level = quiet.level
    quiet.setLevel(logging.CRITICAL)  # what became of every task is ours to say
    try:
        try:
            security = Security(**_credentials(cluster)) if cluster.ca_file else None
            client = Client(cluster.address, security=security, timeout=_PATIENCE, set_as_default=False)
        except (OSError, ValueError, TypeError) as error:
            raise InputError(f"no scheduler can be reached at {cluster.address}: {error}") from error
        try:
            yield client
        finally:
            client.close()
    finally:
        quiet.setLevel(level)


def _credentials(cluster: Cluster) -> Mapping[str, Any]:
    return {
        "tls_ca_file": str(cluster.ca_file),
        "tls_client_cert": str(cluster.certificate),
        "tls_client_key": str(cluster.key),
        "require_encryption": True,
    }


def _check_workers(client: Client, folder: Path) -> None:
    try:
        client.wait_for_workers(1, timeout=_PATIENCE)
    except TimeoutError as error:
        raise InputError("the cluster has no workers; start some and run again") from error
    answers: dict[str, tuple[bool, str]] = client.run(_look, str(folder.absolute()))
    ours = installed_versions()["hueferry"]
    for worker, (sees, version) in sorted(answers.items()):
        if version != ours:
            raise InputError(f"the worker {worker} has hueferry {version or 'not at all'}; here it is {ours}")
        if not sees:
            reason = f"the worker {worker} does not see {folder.absolute()}"
            raise InputError(f"{reason}; a cluster needs the pictures and the results under the same paths everywhere")


def _look(folder: str) -> tuple[bool, str]:
    return Path(folder).is_dir(), installed_versions().get("hueferry", "")


def _results(
    client: Client, do: Callable[[_Task], _Result], tasks: Sequence[_Task]
) -> Iterator[tuple[int, _Result | Died]]:
    """Do all tasks; those that were on a worker whenever it ended are done again, one by one, to find the guilty."""
    hand = _Hand(client, do, tasks)
    suspects = []
    for number, result in _together(hand):
        if isinstance(result, Died):
            suspects.append(number)
        else:
            yield number, result
    for number in sorted(suspects):
        yield number, hand.result(hand.over(number))


def _together(hand: _Hand[_Task, _Result]) -> Iterator[tuple[int, _Result | Died]]:
    from distributed import as_completed

    numbers = iter(range(len(hand.tasks)))
    going: dict[Future, int] = {hand.over(number): number for number in islice(numbers, _WAITING * hand.threads)}
    finished = as_completed(list(going), loop=hand.client.loop)
    for future in finished:
        number, result = going.pop(future), hand.result(future)
        if (following := next(numbers, None)) is not None:
            going[next_future := hand.over(following)] = following
            finished.add(next_future)
        yield number, result


class _Hand(Generic[_Task, _Result]):
    """Hands tasks over to the cluster; what they share travels once."""

    def __init__(self, client: Client, do: Callable[[_Task], _Result], tasks: Sequence[_Task]) -> None:
        self.client, self.tasks = client, tasks
        self._run = uuid.uuid4().hex
        # A task like any other, so that Dask makes it again where it is lost with a worker.
        self._do = client.submit(_unchanged, do, key=f"hueferry-{self._run}-shared", pure=False)
        self._handed = 0
        workers = client.scheduler_info(n_workers=-1)["workers"].values()
        self.threads = max(1, sum(worker["nthreads"] for worker in workers))
        self._limit = min((worker["memory_limit"] for worker in workers if worker.get("memory_limit")), default=0)

    def over(self, number: int) -> Future:
        self._handed += 1
        key = f"hueferry-{self._run}-{number}-{self._handed}"
        return self.client.submit(_call, self._do, self.tasks[number], key=key, pure=False, retries=_RETRIES)

    def result(self, future: Future) -> _Result | Died:
        """Wait for a task and return what came of it; an error that nobody foresaw is raised."""
        from distributed.scheduler import KilledWorker

        error = future.exception()
        if isinstance(error, KilledWorker):
            limit = f"a worker may take {self._limit / 1e9:.1f} GB of memory" if self._limit else "look at its logs"
            return Died(None, f"it ended worker after worker of the cluster and was set aside; {limit}")
        if error is not None:
            raise error
        done: _Result = future.result()
        return done


def _unchanged(value: _Task) -> _Task:
    return value


def _call(do: Callable[[_Task], _Result], task: _Task) -> _Result:
    return do(task)
