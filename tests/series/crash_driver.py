"""Runs a job again and again and kills it at one of its steps: `crash_driver.py JOB INPUTS REFERENCE OUT SEED COUNT`.

Every opening, renaming, linking and removing of a file is a step (PEP 578), and so is a window read of a slide. The
run is begun anew in the same folder after each kill; what has a final name must be whole at any time. Prints one
JSON object.
"""

from __future__ import annotations

import json
import os
import random
import shutil
import signal
import sys
from collections.abc import Callable
from functools import partial
from pathlib import Path

from hueferry.arrays import Pixels
from hueferry.fitting.settings import Aim, Settings
from hueferry.jobs import match_files, stain_files
from hueferry.maps.method import Method
from hueferry.picture import Window
from hueferry.series.match import MatchOrder
from hueferry.slides.tiff_reader import TiffSlide

STEPS = frozenset(
    {"open", "os.rename", "os.link", "os.remove", "os.mkdir", "os.rmdir", "sqlite3.connect", "slide.read"}
)


Job = Callable[[Path, Path, Path], object]
"""Does the inputs towards a reference, into a folder."""


def match(inputs: Path, reference: Path, out: Path) -> object:
    """Bring pictures together."""
    quick = Settings(aim=Aim.ADOPT, method=Method.GAUSSIAN)
    return match_files(MatchOrder(inputs=[inputs], to=[reference], out=out, settings=quick, workers=1))


def stain(layout: str, inputs: Path, reference: Path, out: Path) -> object:
    """Bring slides together."""
    read = TiffSlide.read

    def counted(self: TiffSlide, window: Window) -> Pixels:
        sys.audit("slide.read", str(out))
        return read(self, window)

    TiffSlide.read = counted  # type: ignore[method-assign]  # in a process of its own
    return stain_files([inputs], to=[reference], out=out, choices={"layout": layout, "threads": 1})


JOBS: dict[str, Job] = {
    "match": match,
    **{f"stain-{layout}": partial(stain, layout) for layout in ("ome", "flat", "zarr")},
}


def run(job: Job, inputs: Path, reference: Path, out: Path, *, stop_at: int | None) -> int:
    """Run in a process that kills itself at step `stop_at`; return the number of steps, or -1 if it was killed."""
    ours, theirs = os.pipe()
    child = os.fork()
    if child == 0:
        count = 0

        def hook(event: str, arguments: tuple[object, ...]) -> None:
            nonlocal count
            if event not in STEPS or not any(str(out) in str(one) for one in arguments):
                return
            count += 1
            if count == stop_at:
                os.kill(os.getpid(), signal.SIGKILL)

        sys.addaudithook(hook)
        job(inputs, reference, out)
        os.write(theirs, str(count).encode())
        os._exit(0)
    os.close(theirs)
    with os.fdopen(ours, "rb") as stream:
        said = stream.read()
    os.waitpid(child, 0)
    return int(said) if said else -1


def final_files(out: Path) -> dict[str, bytes]:
    """Every file that has a final name."""
    names = {path.relative_to(out).as_posix(): path for path in sorted(out.rglob("*")) if path.is_file()}
    return {name: path.read_bytes() for name, path in names.items() if not name.startswith(".")}


def main() -> None:
    """Kill and begin anew, and say what was seen."""
    inputs, reference, out = map(Path, sys.argv[2:5])
    seed, count = map(int, sys.argv[5:7])
    attempt = partial(run, JOBS[sys.argv[1]], inputs, reference, out)
    steps = attempt(stop_at=None)
    whole = final_files(out)
    shutil.rmtree(out)
    rng = random.Random(seed)  # noqa: S311 - moments, not secrets
    killed, broken, differing = 0, [], []
    while killed < count:
        finished = attempt(stop_at=rng.randint(1, steps)) != -1
        killed += not finished
        found = final_files(out) if out.exists() else {}
        broken += [name for name, data in found.items() if data != whole.get(name)]
        if finished:
            differing += sorted(whole.keys() - found.keys())
            shutil.rmtree(out)
    attempt(stop_at=None)
    differing += sorted(name for name, data in whole.items() if final_files(out).get(name) != data)
    left = [path.name for path in out.rglob("*") if path.name.startswith(("stage-", ".hueferry-"))]
    sys.stdout.write(
        json.dumps({"steps": steps, "killed": killed, "broken": broken, "differing": differing, "left": left})
    )


if __name__ == "__main__":
    main()
