"""Lists of random nodes, bit depths and styles: OpenColorIO as the judge of what they do together."""

from __future__ import annotations

from collections.abc import Callable
from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest

from hueferry.tables.process import SCALES, read_process
from tables.test_process import BASIC, JOINED, listed, opencolorio

Scale = float


def spaced(numbers: object) -> str:
    return "\n".join(f"{x:.9g}" for x in np.ravel(numbers))


def matrix(rng: np.random.Generator, depths: str, reads: Scale, writes: Scale) -> str:
    rows = np.hstack([(np.eye(3) + rng.normal(0, 0.3, (3, 3))) * writes / reads, rng.normal(0, 0.1, (3, 1)) * writes])
    return f'<Matrix {depths}><Array dim="3 4">{spaced(rows)}</Array></Matrix>'


def range_(rng: np.random.Generator, depths: str, reads: Scale, writes: Scale) -> str:
    low, high = rng.uniform(-0.1, 0.2, 2) * [reads, writes], rng.uniform(0.7, 1.2, 2) * [reads, writes]
    style = rng.choice(["Clamp", "noClamp"])
    return (
        f'<Range {depths} style="{style}"><minInValue>{low[0]:.9g}</minInValue><maxInValue>{high[0]:.9g}</maxInValue>'
        f"<minOutValue>{low[1]:.9g}</minOutValue><maxOutValue>{high[1]:.9g}</maxOutValue></Range>"
    )


def curves(rng: np.random.Generator, depths: str, _: Scale, writes: Scale) -> str:
    n, columns = int(rng.integers(2, 40)), int(rng.choice([1, 3]))
    rows = writes * (np.linspace(0, 1, n)[:, None] + rng.uniform(-0.3, 0.3, (n, columns)) / n)
    return f'<LUT1D {depths}><Array dim="{n} {columns}">{spaced(rows)}</Array></LUT1D>'


def cube(rng: np.random.Generator, depths: str, _: Scale, writes: Scale) -> str:
    n, style = int(rng.integers(2, 7)), rng.choice(["", 'interpolation="tetrahedral"', 'interpolation="trilinear"'])
    even = np.stack(np.meshgrid(*[np.linspace(0, 1, n)] * 3, indexing="ij"), axis=-1)
    rows = writes * (even + rng.uniform(-0.3, 0.3, even.shape) / n)
    return f'<LUT3D {depths} {style}><Array dim="{n} {n} {n} 3">{spaced(rows)}</Array></LUT3D>'


def power(rng: np.random.Generator, depths: str, _: Scale, __: Scale) -> str:
    parts = "".join(
        f'<ExponentParams channel="{channel}" exponent="{rng.uniform(0.8, 2.6):.6g}"/>'
        for channel in "RGB"[: rng.integers(1, 4)]
    )
    return f'<Exponent {depths} style="{rng.choice(BASIC)}">{parts}</Exponent>'


def joined(rng: np.random.Generator, depths: str, _: Scale, __: Scale) -> str:
    parameters = f'exponent="{rng.uniform(1.2, 3):.6g}" offset="{rng.uniform(0.02, 0.3):.6g}"'
    return f'<Exponent {depths} style="{rng.choice(JOINED)}"><ExponentParams {parameters}/></Exponent>'


def logarithm(rng: np.random.Generator, depths: str, _: Scale, __: Scale) -> str:
    parameters = (
        f'base="{rng.choice([2, 10])}" logSideSlope="{rng.uniform(0.2, 0.4):.6g}" '
        f'logSideOffset="{rng.uniform(0.3, 0.6):.6g}" linSideSlope="{rng.uniform(0.8, 1.2):.6g}" '
        f'linSideOffset="{rng.uniform(0.01, 0.1):.6g}" linSideBreak="{rng.uniform(0.005, 0.05):.6g}"'
    )
    return f'<Log {depths} style="cameraLinToLog"><LogParams {parameters}/></Log>'


def grade(rng: np.random.Generator, depths: str, _: Scale, __: Scale) -> str:
    style = rng.choice(["Fwd", "Rev", "FwdNoClamp", "RevNoClamp"])
    return (
        f'<ASC_CDL {depths} style="{style}"><SOPNode><Slope>{spaced(rng.uniform(0.7, 1.3, 3))}</Slope>'
        f"<Offset>{spaced(rng.normal(0, 0.05, 3))}</Offset><Power>{spaced(rng.uniform(0.7, 1.4, 3))}</Power></SOPNode>"
        f"<SatNode><Saturation>{rng.uniform(0.5, 1.5):.6g}</Saturation></SatNode></ASC_CDL>"
    )


MAKERS: list[Callable[..., str]] = [matrix, range_, curves, cube, power, joined, logarithm, grade]


@pytest.mark.parametrize("first", range(0, 200, 50))
def test_random_lists_give_what_opencolorio_gives(first: int, tmp_path: Path) -> None:
    """One to four gentle nodes: steep ones would show nothing but the rounding of 32-bit numbers between them."""
    colours = np.random.default_rng(first).uniform(-0.1, 1.1, (2500, 3)).astype(np.float32)
    for seed in range(first, first + 50):
        rng = np.random.default_rng(seed)
        depths = rng.choice(list(SCALES), int(rng.integers(2, 6)))
        body = "".join(
            MAKERS[rng.integers(len(MAKERS))](
                rng, f'inBitDepth="{reads}" outBitDepth="{writes}"', SCALES[reads], SCALES[writes]
            )
            for reads, writes in pairwise(depths)
        )
        path = tmp_path / f"{seed}.clf"
        path.write_text(listed(body), encoding="utf-8")

        ours = read_process(path)(colours.astype(float))

        error = np.abs(ours - opencolorio(path)(colours)) / np.maximum(1.0, np.abs(ours))
        assert error.max() <= 1e-5, seed
