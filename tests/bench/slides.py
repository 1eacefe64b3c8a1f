"""A one-gigapixel slide and one of a quarter: time over decoding and encoding the same tiles, and peak memory.

Run as `python -m bench.slides [megapixels]` from the tests' folder. The slides are made in a temporary folder from one
section repeated, and are removed at the end. Times are seconds of processor, which other work on the machine does not
lengthen.
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
from typing import Any

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.colour.encoding import SRGB
from hueferry.picture import Window
from hueferry.slides.codecs import CODECS, Packing
from hueferry.slides.levels import tile_at
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
    """Return the seconds of processor that decoding and encoding every tile takes, with the same threads."""
    slide, encode = open_slide(path), CODECS[Packing.JPEG].encode
    height, width = slide.shape

    def work(top: int) -> int:
        band = slide.read(Window(top, 0, min(TILE, height - top), width))
        return sum(len(encode(tile_at(band, left, TILE), 90)) for left in range(0, width, TILE))

    start = time.process_time()
    with ThreadPoolExecutor(THREADS) as pool:
        pending: deque[Future[int]] = deque()
        for top in range(0, height, TILE):
            pending.append(pool.submit(work, top))
            if len(pending) > THREADS:
                pending.popleft().result()
        for future in pending:
            future.result()
    slide.close()
    return time.process_time() - start


def run_job(source: Path, reference: Path, out: Path) -> None:
    """Do the job in this process; print seconds (all, of writing, by the clock), peak MB, and the slope of memory."""
    from hueferry.slides import run
    from hueferry.slides.gather import reference_from
    from hueferry.slides.settings import StainSettings

    writing: list[float] = []
    write = run.write_corrected

    def timed(*arguments: Any, **named: Any) -> Path:
        begun = time.process_time()
        made = write(*arguments, **named)
        writing.append(time.process_time() - begun)
        return made

    run.write_corrected = timed

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
    outcome = run.stain_slide(source, target, out, settings=StainSettings(threads=THREADS, correct_measured=True))
    seconds = time.perf_counter() - start
    done.set()
    watcher.join()
    slide = open_slide(outcome.output) if outcome.output else None
    tiles = 0 if slide is None else -(-slide.shape[0] // TILE) * -(-slide.shape[1] // TILE)
    late = np.array([(at, held) for at, held in seen if at > start + 0.2 * seconds])
    slope = np.polyfit((late[:, 0] - start) / seconds * tiles / 1000, late[:, 1], 1)[0] if len(late) > 3 else 0.0
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1000
    sys.stdout.write(f"{time.process_time():.2f} {writing[0]:.2f} {seconds:.2f} {peak:.0f} {slope:.2f}\n")


@attrs.frozen
class Row:
    """What one slide took.

    Attributes:
        megapixels: of the full size.
        seconds: of processor, the whole job.
        writing: of processor, from the table to the finished file; the rest does not grow with the slide.
        codec: of processor, decoding and encoding the same tiles.
        wall: seconds by the clock.
        peak: MB.
        slope: MB per 1,000 tiles over the last 80 %.
    """

    megapixels: float
    seconds: float
    writing: float
    codec: float
    wall: float
    peak: float
    slope: float

    def __str__(self) -> str:
        """One line of the table."""
        return (
            f"{self.megapixels:6.0f} megapixels: {self.seconds:6.1f} s of processor, {self.writing:.1f} s of them "
            f"writing ({self.wall:.1f} s by the clock), "
            f"{self.seconds / self.codec:.2f} × decode + encode, peak {self.peak:.0f} MB, "
            f"{self.slope:+.2f} MB per 1,000 tiles\n"
        )


def measure(megapixels: float, reference: Path, folder: Path) -> Row:
    """Make a slide, run the job in a fresh process, and say what it took."""
    source = make_slide(folder / "source.tif", megapixels, changed=False)
    (folder / "out").mkdir()
    command = [sys.executable, "-m", "bench.slides", "--job", str(source), str(reference), str(folder / "out")]
    codec = codec_time(source)
    answer = subprocess.run(command, check=True, capture_output=True, text=True).stdout.split()
    seconds, writing, wall, peak, slope = (float(word) for word in answer)
    return Row(megapixels, seconds, writing, (codec + codec_time(source)) / 2, wall, peak, slope)


def main(megapixels: float) -> None:
    """Print the table of a slide and of one of a quarter."""
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        reference = make_slide(folder / "reference.tif", min(megapixels, 4.0), changed=True)
        rows = []
        for size in (megapixels / 4, megapixels):
            with tempfile.TemporaryDirectory(dir=folder) as own:
                rows.append(measure(size, reference, Path(own)))
            sys.stdout.write(str(rows[-1]))
            sys.stdout.flush()
    whole, writing = (getattr(rows[1], name) / getattr(rows[0], name) for name in ("seconds", "writing"))
    sys.stdout.write(f"4 × the pixels take {whole:.2f} × the time, and {writing:.2f} × that of writing\n")


if __name__ == "__main__":
    if sys.argv[1:2] == ["--job"]:
        run_job(*(Path(word) for word in sys.argv[2:5]))
    else:
        main(float(sys.argv[1]) if len(sys.argv) > 1 else 1000.0)
