"""What a person would otherwise do with general-purpose libraries, on the same pair of 24 megapixels."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path
from tempfile import TemporaryDirectory

import numpy as np

from bench.inputs import write_pair
from bench.timing import Ratio, ratio_of, seconds
from hueferry.files.read import read
from hueferry.fitting.fit import fit_picture
from hueferry.fitting.reference import Reference
from hueferry.fitting.settings import Settings


def measure_peers(turns: int, *, shape: tuple[int, int]) -> Iterator[Ratio]:
    """Compare fit + apply on pixels in memory with scikit-image's histogram matching."""
    from skimage.exposure import match_histograms

    with TemporaryDirectory() as folder:
        paths = write_pair(Path(folder), shape=shape)
        picture, other = (read(path) for path in paths)
        reference = Reference.of_picture(other)
        ours, theirs = [], []
        for _ in range(max(2, turns // 2)):
            ours.append(seconds(lambda: fit_picture(picture, [reference], Settings()).apply(picture)))
            theirs.append(seconds(lambda: match_histograms(picture.pixels, other.pixels, channel_axis=-1)))
        # Three times as fast is a ratio of a third.
        yield ratio_of("fit + apply in memory, default, over match_histograms", ours, theirs, must=1 / 3, aim=1 / 10)


def peer_memory(shape: tuple[int, int]) -> float:
    """Return the peak memory, MB, of histogram matching in a process of its own."""
    from bench.timing import peak_megabytes

    code = (
        "import numpy as np\nfrom skimage.exposure import match_histograms\n"
        f"a = np.random.default_rng(0).integers(0, 256, ({shape[0]}, {shape[1]}, 3), dtype=np.uint8)\n"
        "match_histograms(a, a[::-1], channel_axis=-1)"
    )
    return peak_megabytes(code)


def growth(sizes: tuple[int, ...] = (1, 4, 24)) -> dict[str, list[float]]:
    """Return seconds and peak memory, MB, of one JPEG from file to file, by megapixels."""
    from bench.jobs import peak_of_one_picture, stages

    found: dict[str, list[float]] = {"megapixels": [], "milliseconds": [], "peak MB": []}
    for size in sizes:
        height = int(np.sqrt(size * 1e6 / 1.5))
        shape = height, int(height * 1.5)
        row = stages(shape, 2)["default"]
        found["megapixels"].append(size)
        found["milliseconds"].append(sum(row[stage]["wall"] for stage in ("read", "fit", "apply", "write")))
        found["peak MB"].append(peak_of_one_picture(shape, "default"))
    return found
