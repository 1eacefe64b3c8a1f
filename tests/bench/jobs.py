"""The whole job of one picture, from file to file, over decoding and encoding that very file."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from pathlib import Path
from tempfile import TemporaryDirectory

import attrs
import imagecodecs
import numpy as np
import tifffile

from bench.inputs import graded, photograph, write_pair
from bench.timing import Ratio, both_seconds, peak_megabytes, ratio_of, seconds
from hueferry.applying.engine import apply_table
from hueferry.files.read import read
from hueferry.files.write import write
from hueferry.fitting.fit import fit_picture
from hueferry.fitting.reference import Reference
from hueferry.fitting.settings import Aim, Settings
from hueferry.maps.method import Method

SETTINGS = {
    "Gaussian": Settings(aim=Aim.ADOPT, method=Method.GAUSSIAN),
    "default": Settings(),
}


@attrs.frozen
class Subject:
    """A file, its reference, and its codec alone.

    Attributes:
        name: in words.
        picture: the file.
        reference: the other.
        codec: decode and encode once, single-threaded, with the file's own codec and options.
        bars: must and aim by settings.
    """

    name: str
    picture: Path
    reference: Path
    codec: Callable[[], object]
    bars: dict[str, tuple[float | None, float | None]]


def measure_jobs(turns: int, *, shape: tuple[int, int]) -> Iterator[Ratio]:
    """Compare every kind of file under the Gaussian method and the default with its codec; references are cached."""
    with TemporaryDirectory() as name:
        folder = Path(name)
        for subject in _subjects(folder, shape):
            reference = Reference.of_picture(read(subject.reference))
            for title, settings in SETTINGS.items():
                few = turns if subject.picture.suffix == ".jpg" else max(2, turns // 3)
                yield _measure(subject, reference, title, settings, few)


def stages(shape: tuple[int, int], turns: int) -> dict[str, dict[str, dict[str, float]]]:
    """Return milliseconds of each stage of a JPEG by settings: median wall time, and processor time of all threads."""
    found: dict[str, dict[str, dict[str, float]]] = {}
    with TemporaryDirectory() as name:
        paths = write_pair(Path(name), shape=shape)
        reference = Reference.of_picture(read(paths[1]))
        data = paths[0].read_bytes()
        for title, settings in SETTINGS.items():
            rows = [_one_run(paths[0], data, reference, settings) for _ in range(turns + 1)][1:]
            found[title] = {
                stage: {
                    kind: 1000 * float(np.median([row[stage][number] for row in rows]))
                    for number, kind in enumerate(("wall", "processor"))
                }
                for stage in rows[0]
            }
    return found


def peak_of_one_picture(shape: tuple[int, int], method: str) -> float:
    """Return the peak memory, MB, of one JPEG from file to file in a process of its own."""
    with TemporaryDirectory() as name:
        picture, reference = write_pair(Path(name), shape=shape)
        return peak_megabytes(
            f"import hueferry as hf\np = hf.read({str(picture)!r})\n"
            f"f = hf.fit(p, to={str(reference)!r}, **{_OPTIONS[method]!r})\n"
            f"hf.write(f.apply(p), {str(Path(name) / 'out.jpg')!r})"
        )


_OPTIONS = {"Gaussian": {"aim": "adopt", "method": "gaussian"}, "default": {}}


def _measure(subject: Subject, reference: Reference, title: str, settings: Settings, turns: int) -> Ratio:
    out = subject.picture.with_name("out" + subject.picture.suffix)

    def work() -> None:
        picture = read(subject.picture)
        write(fit_picture(picture, [reference], settings).apply(picture), out, overwrite=True)

    work(), subject.codec()
    first, second = [], []
    for _ in range(turns):
        first.append(seconds(work))
        second.append(seconds(subject.codec))
    must, aim = subject.bars[title]
    return ratio_of(
        f"{subject.name}, {title}: read + fit + apply + write over codec", first, second, must=must, aim=aim
    )


def _one_run(path: Path, data: bytes, reference: Reference, settings: Settings) -> dict[str, tuple[float, float]]:
    kept: dict[str, object] = {}

    def keep(name: str, value: object) -> None:
        kept[name] = value

    pixels = imagecodecs.jpeg8_decode(data)
    row = {
        "decode alone": both_seconds(lambda: imagecodecs.jpeg8_decode(data)),
        "encode alone": both_seconds(lambda: imagecodecs.jpeg8_encode(pixels, level=96, subsampling="420")),
        "read": both_seconds(lambda: keep("picture", read(path))),
    }
    picture = kept["picture"]
    row["fit"] = both_seconds(lambda: keep("fit", fit_picture(picture, [reference], settings)))  # type: ignore[arg-type]
    row["apply"] = both_seconds(lambda: keep("result", apply_table(kept["fit"].table, picture)))  # type: ignore[attr-defined, arg-type]
    row["write"] = both_seconds(lambda: write(kept["result"], path.with_name("out.jpg"), overwrite=True))  # type: ignore[arg-type]
    return row


def _subjects(folder: Path, shape: tuple[int, int]) -> Iterator[Subject]:
    jpeg = {"Gaussian": (2.0, 1.15), "default": (2.6, 1.5)}
    for sampling in ("420", "444"):
        picture, reference = write_pair(folder, subsampling=sampling, shape=shape)
        name = f"JPEG 4:{sampling[1]}:{sampling[2]}"
        yield Subject(name, picture, reference, _jpeg_codec(picture.read_bytes(), sampling), jpeg)
    pixels = photograph(shape)
    other = graded(pixels[: shape[0] // 2, : shape[1] // 2])
    deep = [(one.astype(np.uint16) * 257, name) for one, name in ((pixels, "picture.tif"), (other, "reference.tif"))]
    for array, name in deep:
        tifffile.imwrite(folder / name, array, photometric="rgb", compression="zstd", rowsperstrip=64, predictor=True)
    bars: dict[str, tuple[float | None, float | None]] = {"Gaussian": (2.0, 1.3), "default": (None, None)}
    yield Subject(
        "TIFF 16 bit zstd", folder / "picture.tif", folder / "reference.tif", _tiff_codec(folder / "picture.tif"), bars
    )
    for array, name in ((pixels, "picture.png"), (other, "reference.png")):
        (folder / name).write_bytes(imagecodecs.png_encode(array, level=5))
    none: dict[str, tuple[float | None, float | None]] = {"Gaussian": (None, None), "default": (None, None)}
    yield Subject(
        "PNG 8 bit", folder / "picture.png", folder / "reference.png", _png_codec(folder / "picture.png"), none
    )


def _jpeg_codec(data: bytes, sampling: str) -> Callable[[], object]:
    return lambda: imagecodecs.jpeg8_encode(imagecodecs.jpeg8_decode(data), level=96, subsampling=sampling)


def _png_codec(path: Path) -> Callable[[], object]:
    return lambda: imagecodecs.png_encode(imagecodecs.png_decode(path.read_bytes()), level=5)


def _tiff_codec(path: Path) -> Callable[[], object]:
    options = {"photometric": "rgb", "compression": "zstd", "rowsperstrip": 64, "predictor": True, "maxworkers": 1}
    out = path.with_name("codec.tif")

    def run() -> None:
        tifffile.imwrite(out, tifffile.imread(path, maxworkers=1), **options)  # type: ignore[arg-type]

    return run
