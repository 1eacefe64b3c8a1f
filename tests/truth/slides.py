"""Stained sections with a known change of stain and scanner: the slide rows of the benchmark.

Run as `python -m truth.slides [seed …]` from the tests' folder.
"""

from __future__ import annotations

import sys
from collections import defaultdict
from collections.abc import Iterator, Sequence

import attrs
import numpy as np
from numpy.typing import NDArray
from skimage import data

from hueferry.colour.difference import delta_e_2000
from hueferry.colour.encoding import SRGB
from hueferry.colour.spaces import xyz_to_lab
from hueferry.slides.fit import fit_slide
from hueferry.slides.look import look_at
from hueferry.slides.reference import reference_of
from hueferry.tables.lookup import look_up
from slides.sections import rendered, restain

Pixels8 = NDArray[np.uint8]

GROUPS = ("same", "left/right", "top/bottom")


@attrs.frozen(eq=False)
class SlideCase:
    """A source, a reference, and what the source should become."""

    group: str
    name: str
    seed: int
    source: Pixels8
    reference: Pixels8
    wanted: Pixels8


@attrs.frozen
class SlideScore:
    """Mean ΔE00 to the truth, before and after; how far glass is from its target; whether the map is safe."""

    group: str
    name: str
    seed: int
    none: float
    after: float
    glass_codes: float
    safe: bool


def slide_cases(
    names: Sequence[str], seeds: Sequence[int], groups: Sequence[str] = GROUPS, step: int = 1
) -> Iterator[SlideCase]:
    """Yield sections, "ihc" (in scikit-image's wheel) or "section-N" (rendered), with every change and grouping."""
    for name in names:
        picture, stains = _section(name)
        picture = picture[::step, ::step]
        for group in groups:
            for seed in seeds:
                rng = np.random.default_rng([seed, 5])
                change = restain(rng, stains, 0.95)
                parts = [picture, picture] if group == "same" else _halves(picture, group)
                if group != "same" and rng.random() < 0.5:
                    parts.reverse()
                yield SlideCase(group, name, seed, parts[0], change(parts[1]), change(parts[0]))


def judge(case: SlideCase) -> SlideScore:
    """Fit a case, and compare every second pixel of every second row with the truth."""
    source, reference = look_at(case.source, SRGB), reference_of([look_at(case.reference, SRGB)])
    fit = fit_slide(source, reference)
    codes, wanted = (picture[::2, ::2].reshape(-1, 3) / 255 for picture in (case.source, case.wanted))
    result = np.rint(255 * np.clip(look_up(fit.table, codes), 0, 1)) / 255
    glass = look_up(fit.table, source.scale.glass[None, :])[0]
    return SlideScore(
        case.group, case.name, case.seed, _error(codes, wanted), _error(result, wanted),
        float(255 * np.abs(glass - reference.glass).max()), fit.certificate.safe,
    )  # fmt: skip


def _section(name: str) -> tuple[Pixels8, tuple[int, int]]:
    if name == "ihc":
        return data.immunohistochemistry(), (0, 2)
    return rendered(int(name.removeprefix("section-"))), (0, 1)


def _halves(picture: Pixels8, group: str) -> list[Pixels8]:
    axis = 1 if group == "left/right" else 0
    return list(np.array_split(picture, 2, axis=axis))


def _error(codes: NDArray[np.float64], wanted: NDArray[np.float64]) -> float:
    labs = [xyz_to_lab(SRGB.to_xyz(part)) for part in (codes, wanted)]
    return float(delta_e_2000(labs[0], labs[1]).mean())


def main(seeds: Sequence[int]) -> None:
    """Print the table."""
    scores = defaultdict(list)
    for case in slide_cases(("ihc", "section-7", "section-8"), seeds):
        score = judge(case)
        scores[case.group, case.name].append(score)
        scores[case.group, "all"].append(score)
    sys.stdout.write("group        section     none  after  worst harm  glass  unsafe\n")
    for (group, name), found in sorted(scores.items()):
        none, after = (np.mean([getattr(score, field) for score in found]) for field in ("none", "after"))
        worst = max(score.after - score.none for score in found)
        glass, unsafe = max(score.glass_codes for score in found), sum(not score.safe for score in found)
        sys.stdout.write(f"{group:<12} {name:<10} {none:5.2f} {after:6.2f} {worst:+11.2f} {glass:6.2f} {unsafe:7d}\n")


if __name__ == "__main__":
    main([int(seed) for seed in sys.argv[1:]] or [0, 1, 2])
