"""The full benchmark: `PYTHONPATH=tests python -m truth --seeds 3`."""

from __future__ import annotations

import argparse
import json
from pathlib import Path

import attrs

from truth.cases import CAMERAS, MAKERS, make_cases
from truth.methods import METHODS
from truth.pictures import HELD, TUNED
from truth.run import as_text, run
from truth.score import Score, summarise
from truth.show import case_row, write_rows

SETS = {"tuned": TUNED, "held": HELD, "all": TUNED + HELD}


def _arguments() -> argparse.Namespace:
    parser = argparse.ArgumentParser(prog="python -m truth", description=__doc__)
    parser.add_argument("--seeds", type=int, default=3, help="grades a picture and group")
    parser.add_argument("--first-seed", type=int, default=0, help="0 … 999 are for tuning, 1000 … for confirmation")
    parser.add_argument("--pictures", default="all", help="tuned, held, all, or a folder of photographs")
    parser.add_argument("--groups", default=",".join(MAKERS))
    parser.add_argument("--methods", default=",".join(METHODS))
    parser.add_argument("--long-side", type=int, default=512, help="pixels; 0 for full size")
    parser.add_argument("--camera", choices=sorted(CAMERAS), default="own", help="whose rendering the grades are of")
    parser.add_argument("--pixels", type=int, default=20_000, help="pixels compared a case; 0 for all")
    parser.add_argument("--json", type=Path, help="write every score here")
    parser.add_argument(
        "--picture", type=Path, help="write a picture of the first case of each group here, under agree"
    )
    parser.add_argument("--show", action="store_true", help="print every case")
    return parser.parse_args()


def _names(choice: str) -> tuple[str, ...]:
    if choice in SETS:
        return SETS[choice]
    return tuple(
        str(path) for path in sorted(Path(choice).iterdir()) if path.suffix.lower() in (".jpg", ".jpeg", ".png")
    )


def write_picture(options: argparse.Namespace, groups: list[str], path: Path) -> None:
    """Draw the first case of every group."""
    names = _names(options.pictures)
    rows = []
    for group in groups:
        cases = make_cases(
            names, groups=[group], seeds=[options.first_seed], long_side=options.long_side, camera=options.camera
        )
        case = next(iter(cases))
        rows.append(case_row(case, METHODS["agree"](case.source, case.reference)[0]))
    write_rows(rows, path)


def main() -> None:
    options = _arguments()
    groups, methods = options.groups.split(","), options.methods.split(",")
    seeds = range(options.first_seed, options.first_seed + options.seeds)
    scores: list[Score] = []
    cases = make_cases(
        _names(options.pictures), groups=groups, seeds=seeds, long_side=options.long_side, camera=options.camera
    )
    for score in run(cases, methods, most=options.pixels):
        scores.append(score)
        if options.show and score.method != "none":
            print(f"{score.group:>9} {Path(score.name).name:<28} {score.seed:>5} {score.method:>10} "  # noqa: T201
                  f"{score.none:6.2f} → {score.score:6.2f}  {score.note}", flush=True)  # fmt: skip
    print(as_text(summarise(scores), groups, methods))  # noqa: T201
    if options.picture:
        write_picture(options, groups, options.picture)
    if options.json:
        options.json.write_text(json.dumps([attrs.asdict(score) for score in scores], indent=1), encoding="utf-8")


if __name__ == "__main__":
    main()
