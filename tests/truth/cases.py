"""Cases of the benchmark: a source, a reference, and what the source should become."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from types import MappingProxyType

import attrs
import cv2
import numpy as np
from numpy.typing import NDArray

from truth.grades import Change, draw_foreign_grade, draw_grade
from truth.pictures import load

Pixels8 = NDArray[np.uint8]


@attrs.frozen(eq=False)
class Case:
    """One question with its right answer.

    Attributes:
        group: how source and reference are related.
        name: the picture, and the other one where there is one.
        seed: what the change was drawn from.
        source: (height, width, 3) sRGB.
        reference: (height, width, 3) sRGB.
        wanted: `G(source)`.
    """

    group: str
    name: str
    seed: int
    source: Pixels8
    reference: Pixels8
    wanted: Pixels8


Maker = Callable[[Pixels8, Pixels8, Change, np.random.Generator], tuple[Pixels8, Pixels8]]


def _same(picture: Pixels8, _: Pixels8, grade: Change, __: np.random.Generator) -> tuple[Pixels8, Pixels8]:
    return picture, grade(picture)


def _overlap(picture: Pixels8, _: Pixels8, grade: Change, rng: np.random.Generator) -> tuple[Pixels8, Pixels8]:
    """Cut out 40 … 60 % of each side, turned by at most 7°, scaled by at most 1.15, as a JPEG of quality 90."""
    height, width = picture.shape[:2]
    rows, columns = (round(side * rng.uniform(0.4, 0.6)) for side in (height, width))
    centre = rng.uniform(columns / 2, width - columns / 2), rng.uniform(rows / 2, height - rows / 2)
    turn = cv2.getRotationMatrix2D(centre, rng.uniform(-7, 7), rng.uniform(1 / 1.15, 1.15))
    turn[:, 2] += np.array([columns / 2, rows / 2]) - centre
    part = cv2.warpAffine(picture, turn, (columns, rows), flags=cv2.INTER_CUBIC, borderMode=cv2.BORDER_REFLECT_101)
    packed = cv2.imencode(".jpg", grade(part)[:, :, ::-1], [cv2.IMWRITE_JPEG_QUALITY, 90])[1]
    return picture, np.ascontiguousarray(cv2.imdecode(packed, cv2.IMREAD_COLOR)[:, :, ::-1])


def _crop(picture: Pixels8, _: Pixels8, grade: Change, rng: np.random.Generator) -> tuple[Pixels8, Pixels8]:
    """Cut out 50 % of one side and 30 % of the other."""
    height, width = picture.shape[:2]
    shares = (0.5, 0.3) if rng.random() < 0.5 else (0.3, 0.5)
    rows, columns = round(height * shares[0]), round(width * shares[1])
    top, left = rng.integers(height - rows + 1), rng.integers(width - columns + 1)
    return picture, grade(picture[top : top + rows, left : left + columns])


def _halves(picture: Pixels8, _: Pixels8, grade: Change, rng: np.random.Generator) -> tuple[Pixels8, Pixels8]:
    middle = picture.shape[1] // 2
    left, right = picture[:, :middle], picture[:, middle:]
    return (left, grade(right)) if rng.random() < 0.5 else (right, grade(left))


def _strangers(picture: Pixels8, other: Pixels8, grade: Change, _: np.random.Generator) -> tuple[Pixels8, Pixels8]:
    return picture, grade(other)


MAKERS: Mapping[str, Maker] = MappingProxyType(
    {"same": _same, "overlap": _overlap, "crop": _crop, "halves": _halves, "strangers": _strangers}
)


CAMERAS: Mapping[str, Callable[[np.random.Generator], Change]] = MappingProxyType(
    {"own": draw_grade, "foreign": draw_foreign_grade}
)


def make_cases(
    names: Sequence[str], *, groups: Sequence[str], seeds: Sequence[int], long_side: int = 512, camera: str = "own"
) -> Iterator[Case]:
    """Yield every picture with every seed in every group; strangers are drawn among `names`, grades of `camera`."""
    for group in groups:
        for index, name in enumerate(names):
            for seed in seeds:
                rng = np.random.default_rng([seed, index, list(MAKERS).index(group)])
                others = [other for other in names if other != name]
                other = others[rng.integers(len(others))] if others else name
                grade = CAMERAS[camera](rng)
                source, reference = MAKERS[group](load(name, long_side), load(other, long_side), grade, rng)
                title = f"{name}>{other}" if group == "strangers" else name
                yield Case(group, title, seed, source, reference, grade(source))
