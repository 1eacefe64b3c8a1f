"""Measure, print and keep: `python -m tests.bench` writes docs/performance.json and docs/performance.svg."""

from __future__ import annotations

import argparse
import json
import os
import platform
import sys
from collections.abc import Callable, Iterator, Mapping
from pathlib import Path
from typing import Any

ROOT = Path(__file__).resolve().parents[2]
sys.path.insert(0, str(ROOT / "tests"))
for _name in ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS"):
    os.environ.setdefault(_name, "1")  # as the command line does

from bench.timing import Ratio  # noqa: E402 - the tests' folder has to be on the path first

Measure = Callable[[int, tuple[int, int]], Iterator[Ratio]]


def _kernels(turns: int, _: tuple[int, int]) -> Iterator[Ratio]:
    from bench.kernels import measure_kernels

    return measure_kernels(turns)


def _startup(turns: int, _: tuple[int, int]) -> Iterator[Ratio]:
    from bench.startup import measure_startup

    return measure_startup(turns)


def _solvers(turns: int, _: tuple[int, int]) -> Iterator[Ratio]:
    from bench.solvers import measure_solvers

    return measure_solvers(turns)


def _jobs(turns: int, shape: tuple[int, int]) -> Iterator[Ratio]:
    from bench.jobs import measure_jobs

    return measure_jobs(turns, shape=shape)


def _peers(turns: int, shape: tuple[int, int]) -> Iterator[Ratio]:
    from bench.peers import measure_peers

    return measure_peers(turns, shape=shape)


GROUPS: Mapping[str, Measure] = {
    "jobs": _jobs,
    "kernels": _kernels,
    "solvers": _solvers,
    "peers": _peers,
    "startup": _startup,
}


def main() -> int:
    """Run the groups asked for; 1 if a must-bar is missed."""
    parser = argparse.ArgumentParser(prog="python -m tests.bench", description=__doc__)
    parser.add_argument("--only", action="append", choices=sorted(GROUPS), help="a group; may be given again")
    parser.add_argument("--turns", type=int, default=7, help="timed turns of each pair (default 7)")
    parser.add_argument("--megapixels", type=float, default=24.0, help="size of the pictures (default 24)")
    parser.add_argument("--out", type=Path, default=ROOT / "docs", help="folder of performance.json and .svg")
    chosen = parser.parse_args()
    height = int((chosen.megapixels * 1e6 / 1.5) ** 0.5)
    shape = height, int(height * 1.5)
    kept = _kept(chosen.out / "performance.json")
    for name in chosen.only or GROUPS:
        rows = []
        for ratio in GROUPS[name](chosen.turns, shape):
            print(_line(ratio), flush=True)  # noqa: T201 - a benchmark talks to the person who runs it
            rows.append(ratio.as_dict())
        kept["groups"][name] = rows
    if not chosen.only or "jobs" in chosen.only:
        kept.update(_extras(shape, chosen.turns))
    kept["machine"] = {"python": platform.python_version(), "system": platform.platform(), "shape": list(shape)}
    chosen.out.mkdir(parents=True, exist_ok=True)
    (chosen.out / "performance.json").write_text(json.dumps(kept, indent=1) + "\n", encoding="utf-8")
    from bench.drawing import draw

    (chosen.out / "performance.svg").write_text(draw(kept), encoding="utf-8")
    missed = [row for rows in kept["groups"].values() for row in rows if not row["holds"]]
    return 1 if missed else 0


def _kept(path: Path) -> dict[str, Any]:
    if path.exists():
        found: dict[str, Any] = json.loads(path.read_text(encoding="utf-8"))
        return found
    return {"schema": "hueferry/performance-1", "groups": {}}


def _extras(shape: tuple[int, int], turns: int) -> dict[str, Any]:
    from bench.jobs import SETTINGS, peak_of_one_picture, stages
    from bench.peers import growth, peer_memory

    return {
        "stages_ms": stages(shape, turns),
        "peak_mb": {**{name: peak_of_one_picture(shape, name) for name in SETTINGS}, "peer": peer_memory(shape)},
        "growth": growth(),
    }


def _line(ratio: Ratio) -> str:
    bar = "" if ratio.must is None else f"  must <= {ratio.must:.2f}{'' if ratio.holds else '  MISSED'}"
    aim = "" if ratio.aim is None else f"  aim {ratio.aim:.2f}"
    return (
        f"{ratio.median:7.2f}  ({ratio.low:.2f} … {ratio.high:.2f})  {ratio.milliseconds:8.1f} ms over "
        f"{ratio.against:8.1f} ms  {ratio.name}{bar}{aim}"
    )


if __name__ == "__main__":
    sys.exit(main())
