"""A one-gigapixel slide: time over decoding and encoding the same tiles, and peak memory.

Run as `python -m bench.slides [megapixels]` from the tests' folder. The slide is made in a temporary folder from one
section repeated, and is removed at the end.
"""

from __future__ import annotations

import os
import resource
import subprocess
import sys
import tempfile
import threading
import time
from collections import deque
from collections.abc import Iterator
from concurrent.futures import Future, ThreadPoolExecutor
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from hueferry.colour.encoding import SRGB
from hueferry.picture import Window
from hueferry.slides.codecs import CODECS, Packing
from hueferry.slides.levels import tiles_of
from hueferry.slides.readers import open_slide
from hueferry.slides.tiff_writer import TILE, Layout, SlideForm, TiffOptions, write_tiff_slide
from slides.sections import rendered, restain

THREADS = 2


def make_slide(path: Path, megapixels: float, *, changed: bool) -> Path:
    """Write a slide of JPEG tiles: one section, repeated and turned."""
    section = rendered(3, height=1024, width=1024)
    section = restain(np.random.default_rng(4), (0, 1), 0.95)(section) if changed else section
    side = int((megapixels * 1e6) ** 0.5) // 1024 * 1024 or 1024

    def bands() -> Iterator[NDArray[np.uint8]]:
        for top in range(0, side, TILE):
            start = top % 1024
            yield np.ascontiguousarray(np.tile(section[start : start + TILE], (1, side // 1024, 1)))

    form = SlideForm((side, side), np.dtype(np.uint8), SRGB, (0.25, 0.25))
    return write_tiff_slide(path, bands(), form, options=TiffOptions(layout=Layout.FLAT, quality=90, threads=THREADS))


def codec_time(path: Path) -> float:
    """Return the seconds that decoding and encoding every tile of the full size takes, with the same threads."""
    slide, encode = open_slide(path), CODECS[Packing.JPEG].encode
    height, width = slide.shape

    def work(top: int) -> int:
        band = slide.read(Window(top, 0, min(TILE, height - top), width))
        return sum(len(encode(tile, 90)) for tile in tiles_of(band, TILE))

    start = time.perf_counter()
    with ThreadPoolExecutor(THREADS) as pool:
        pending: deque[Future[int]] = deque()
        for top in range(0, height, TILE):
            pending.append(pool.submit(work, top))
            if len(pending) > THREADS:
                pending.popleft().result()
        for future in pending:
            future.result()
    slide.close()
    return time.perf_counter() - start


def run_job(source: Path, reference: Path, out: Path) -> None:
    """Do the job in this process; print seconds, peak MB, and the slope of memory over the last 80 %."""
    from hueferry.slides.gather import reference_from
    from hueferry.slides.run import stain_slide
    from hueferry.slides.settings import StainSettings

    target = reference_from([reference])
    seen: list[tuple[float, float]] = []
    done = threading.Event()

    def watch() -> None:
        page = os.sysconf("SC_PAGE_SIZE")
        while not done.wait(0.25):
            held = int(Path("/proc/self/statm").read_text(encoding="ascii").split()[1]) * page / 1e6
            seen.append((time.perf_counter(), held))

    watcher = threading.Thread(target=watch)
    watcher.start()
    start = time.perf_counter()
    outcome = stain_slide(source, target, out, settings=StainSettings(threads=THREADS, correct_measured=True))
    seconds = time.perf_counter() - start
    done.set()
    watcher.join()
    slide = open_slide(outcome.output) if outcome.output else None
    tiles = 0 if slide is None else -(-slide.shape[0] // TILE) * -(-slide.shape[1] // TILE)
    late = np.array([(at, held) for at, held in seen if at > start + 0.2 * seconds])
    slope = np.polyfit((late[:, 0] - start) / seconds * tiles / 1000, late[:, 1], 1)[0] if len(late) > 3 else 0.0
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1000
    sys.stdout.write(f"{seconds:.2f} {peak:.0f} {slope:.2f}\n")


def main(megapixels: float) -> None:
    """Make a slide, run the job in a fresh process, and print the table."""
    with tempfile.TemporaryDirectory() as folder:
        source = make_slide(Path(folder) / "source.tif", megapixels, changed=False)
        reference = make_slide(Path(folder) / "reference.tif", min(megapixels, 4.0), changed=True)
        out = Path(folder) / "out"
        out.mkdir()
        codec = codec_time(source)
        command = [sys.executable, "-m", "bench.slides", "--job", str(source), str(reference), str(out)]
        answer = subprocess.run(command, check=True, capture_output=True, text=True).stdout.split()
        seconds, peak, slope = (float(word) for word in answer)
        codec = (codec + codec_time(source)) / 2
    sys.stdout.write(
        f"{megapixels:.0f} megapixels: {seconds:.1f} s, {seconds / codec:.2f} × decode + encode ({codec:.1f} s), "
        f"peak {peak:.0f} MB, {slope:+.2f} MB per 1,000 tiles over the last 80 %\n"
    )


if __name__ == "__main__":
    if sys.argv[1:2] == ["--job"]:
        run_job(*(Path(word) for word in sys.argv[2:5]))
    else:
        main(float(sys.argv[1]) if len(sys.argv) > 1 else 1000.0)
