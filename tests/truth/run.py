"""Running cases through methods."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping, Sequence

from truth.cases import Case
from truth.methods import METHODS
from truth.score import Score, Summary, mean_error


def run(cases: Iterable[Case], methods: Sequence[str], *, most: int = 20_000) -> Iterator[Score]:
    """Score every case with every method; `most` pixels of each are compared, 0 for all."""
    for case in cases:
        none = mean_error(None, case.source, case.wanted, most=most)
        for method in methods:
            map_, note = METHODS[method](case.source, case.reference)
            score = none if map_ is None else mean_error(map_, case.source, case.wanted, most=most)
            yield Score(method, case.group, case.name, case.seed, score, none, note)


def as_text(summaries: Mapping[tuple[str, str], Summary], groups: Sequence[str], methods: Sequence[str]) -> str:
    """Lay the table out: a line a method, a column a group; mean ΔE00, its ratio to none, share harmed, worst harm."""
    lines = [
        "mean ΔE00 · ratio to none · harmed · worst harm",
        f"{'':>10}" + "".join(f"{group:>30}" for group in groups),
    ]
    for method in methods:
        cells = [summaries[method, group] for group in groups if (method, group) in summaries]
        text = [f"{s.mean:6.2f} · {s.ratio:4.2f} · {s.harmed:4.0%} · {s.worst:+5.2f}" for s in cells]
        lines.append(f"{method:>10}" + "".join(f"{cell:>30}" for cell in text))
    return "\n".join(lines)
