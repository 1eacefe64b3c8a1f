"""What a run brings its pictures towards, and the maps that they decide together as one series."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from functools import partial
from pathlib import Path
from typing import Any

import attrs

from hueferry.errors import HueferryError
from hueferry.fitting.fit import Given
from hueferry.fitting.reference import Reference, joint_palette
from hueferry.fitting.settings import Settings
from hueferry.series.groups import components
from hueferry.series.links import Link, find_link, find_links
from hueferry.series.references import load_references
from hueferry.series.solution import Solution, solve_series
from hueferry.series.views import View, view_of
from hueferry.series.work import Work
from hueferry.series.workers import Died

LEAST_TOGETHER = 3
"""Pictures that make a series."""


@attrs.frozen(eq=False)
class Together:
    """What was decided before any picture is touched.

    Attributes:
        references: what the pictures are brought towards.
        sentences: the same in words, and what is to be said of the series.
        given: maps that the series decided, by the names of the results.
        overview: groups, links and outliers of the series, as JSON values.
    """

    references: Sequence[Reference]
    sentences: Sequence[str]
    given: Mapping[str, Given] = attrs.field(factory=dict)
    overview: Mapping[str, Any] = attrs.field(factory=dict)


def bring_together(work: Work, to: Sequence[Path], settings: Settings, *, time_lapse: bool = False) -> Together:
    """Decide what the pictures of a run are brought towards, and how, as far as they decide it together.

    Args:
        work: the run.
        to: references as the caller named them.
        settings: of every fit.
        time_lapse: keep what changes slowly over the series; then there are no references.

    Raises:
        InputError: a named reference cannot be read, or no picture can serve as one.
    """
    steps = work.schedule.steps
    errands = [step.errand for step in steps]
    if not work.schedule.joint or not work.schedule.to_do:
        references, sentence = load_references(to, errands, settings)
        return Together(references, [sentence])
    named, sentence = load_references(to, errands, settings) if to else ([], "")
    shown = [view for number, path in enumerate(to) if (view := look((path, f"/{number}"))) is not None]
    colourless = len(shown) < sum(reference.witness is not None for reference in named)
    views = [] if colourless else _looked_at(work)
    if len(views) < LEAST_TOGETHER:
        references, sentence = (named, sentence) if to else load_references(to, errands, settings)
        return Together(references, [sentence])
    palette = joint_palette(named) if named and not shown else None
    solution = solve_series(
        views, references=shown, palette=palette, time_lapse=time_lapse, spread=partial(_links, work)
    )
    if solution.base is not None:
        base = next(step.errand.source for step in steps if step.output == solution.base)
        named, sentence = [Reference.of_file(base)], f"towards {base.name}, the middle of the series"
    elif time_lapse:
        named, sentence = load_references(to, errands, settings)
        sentence = f"along its own slow changes; costs are {sentence}"
    given = {frame.name: Given(frame.map, frame.evidence, open=not time_lapse) for frame in solution.frames}
    return Together(named, [sentence, *solution.sentences], given, _overview(solution))


def foresee_groups(work: Work, to: Sequence[Path]) -> list[list[str]]:
    """Return which pictures would be solved together, by the names of their results; single ones are groups of one.

    Pictures are read and compared for it; nothing is written.
    """
    views = _looked_at(work)
    shown = [view for number, path in enumerate(to) if (view := look((path, f"/{number}"))) is not None]
    everything = [*views, *shown]
    if not views:
        return []
    links = find_links(everything, anchors=range(len(views), len(everything)), spread=partial(_links, work))
    labels = components(len(everything), links)[: len(views)]
    groups: dict[int, list[str]] = {}
    for view, label in zip(views, labels, strict=True):
        groups.setdefault(int(label), []).append(view.name)
    return sorted(groups.values(), key=lambda group: (-len(group), group))


def _looked_at(work: Work) -> list[View]:
    """Return views of the pictures that can be read and have colour, in the order of the run."""
    steps = work.schedule.steps
    tasks = [(step.errand.source.absolute(), step.output) for step in steps]
    found = dict(work.share(look, tasks))
    return [view for number in range(len(tasks)) if isinstance(view := found[number], View)]


def look(task: tuple[Path, str]) -> View | None:
    """Look at one picture; None if it cannot be read, or is gray: its own job says so."""
    from hueferry.files.exif import taken_at
    from hueferry.files.read import read

    path, name = task
    try:
        picture = read(path)
        view = view_of(picture, name, taken=taken_at(picture.metadata.exif))
    except (HueferryError, MemoryError):
        return None
    return None if picture.is_gray or view.unpack().is_gray else view


def _links(work: Work, pairs: Sequence[tuple[View, View]]) -> list[Link | None]:
    found = dict(work.share(_find, pairs))
    return [None if isinstance(link := found[number], Died) else link for number in range(len(pairs))]


def _find(pair: tuple[View, View]) -> Link | None:
    return find_link(*pair)


def _overview(solution: Solution) -> dict[str, Any]:
    groups = [list(group) for group in solution.groups]
    return {"groups": groups, "links": solution.links, "outliers_of_series": list(solution.outliers)}
