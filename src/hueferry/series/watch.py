"""Watching folders: pictures are done as they arrive complete, until somebody says stop.

Folders are looked at again and again rather than by notices of the system, which network folders do not send.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from pathlib import Path

import attrs

from hueferry.errors import InputError
from hueferry.series.match import MatchOrder

Seen = Mapping[Path, tuple[int, int]]
"""Size and time of the last change, ns, of every file."""


@attrs.frozen
class Patience:
    """How often to look.

    Attributes:
        wait: called between two looks; returns whether to go on.
        settled_after: looks in a row for which a file must stay as it is before it counts as complete.
    """

    wait: Callable[[], bool]
    settled_after: int = 2


def watch(order: MatchOrder, run: Callable[[MatchOrder], object], *, patience: Patience) -> int:
    """Run the order whenever new pictures have arrived complete, and return how often that was.

    A file is complete when it stayed as it is for some looks; one that is not whole then fails, and is done when it has
    grown. What an earlier run did is not done again.

    Args:
        order: what to do; its inputs are looked through anew each time.
        run: does it.
        patience: when to look again, and when to end.

    Raises:
        InputError: there is nothing to bring the pictures towards.
    """
    if not order.to:
        raise InputError("watching needs --to: what arrives later would change a common palette that was used already")
    runs = 0
    done: Seen = {}
    steady: Mapping[Path, int] = {}
    before: Seen = {}
    while True:
        now = _look(order)
        steady = {path: steady.get(path, 0) + 1 if before.get(path) == facts else 1 for path, facts in now.items()}
        ready = {path: facts for path, facts in now.items() if steady[path] > patience.settled_after}
        if any(done.get(path) != facts for path, facts in ready.items()):
            run(attrs.evolve(order, inputs=order.inputs, arrived=frozenset(ready)))
            runs, done = runs + 1, dict(ready)
        before = now
        if not patience.wait():
            return runs


def _look(order: MatchOrder) -> Seen:
    from hueferry.files.walk import find_pictures

    seen = {}
    for path in find_pictures([path for path in order.inputs if path.exists()]):
        if order.out.resolve() in path.resolve().parents:
            continue
        try:
            status = path.stat()
        except OSError:
            continue  # gone again
        seen[path] = (status.st_size, status.st_mtime_ns)
    return seen
