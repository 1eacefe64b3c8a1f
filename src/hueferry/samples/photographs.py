"""The sample series: an afternoon at Marrowfield Tileworks, an invented workshop."""

from __future__ import annotations

from pathlib import Path

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.colour.encoding import SRGB
from hueferry.colour.make_profile import profile_of
from hueferry.samples.camera import Exposure, Light, lit, photograph
from hueferry.samples.render import Framing, Layers, render_layers

SIZE = (1067, 1600)
DEEP_SIZE = (480, 720)
GRAIN = 0.35


@attrs.frozen
class Frame:
    """One picture of the series: where it looks, in what light, how it was exposed, and what EXIF says of it."""

    name: str
    framing: Framing
    light: Light
    exposure: Exposure
    taken: str
    seconds: tuple[int, int]
    iso: int


HERO = Frame(
    "hero",
    Framing(pan=-1.5, tilt=-7.5, field=43.0),
    Light((1.0, 1.0, 1.0), (1.0, 0.97, 0.92)),
    Exposure(),
    "2026:05:14 13:48:00",
    (1, 60),
    200,
)
FRAMES = (
    Frame(
        "bench-1",
        Framing(pan=-4.0, tilt=-6.0, field=46.0),
        Light((0.80, 0.96, 1.22), (0.78, 0.94, 1.16)),
        Exposure(-0.35, (1.02, 1.0, 0.98)),
        "2026:05:14 13:05:00",
        (1, 80),
        200,
    ),
    Frame(
        "bench-2",
        Framing(pan=5.0, tilt=-8.5, field=38.0),
        Light((1.06, 1.0, 0.93), (1.0, 0.97, 0.92)),
        Exposure(0.30, (1.0, 1.0, 1.0)),
        "2026:05:14 14:20:00",
        (1, 50),
        200,
    ),
    Frame(
        "bench-3",
        Framing(x=0.03, pan=-7.5, tilt=-9.5, field=35.0, roll=0.8),
        Light((1.18, 1.0, 0.78), (1.06, 0.97, 0.84)),
        Exposure(-0.15, (1.0, 1.0, 1.04), 1.06),
        "2026:05:14 15:30:00",
        (1, 60),
        200,
    ),
    Frame(
        "bench-4",
        Framing(pan=2.0, tilt=-4.0, field=44.0, roll=-0.6),
        Light((1.32, 1.0, 0.60), (1.12, 0.97, 0.76)),
        Exposure(0.10, (1.0, 1.0, 1.0), 1.04),
        "2026:05:14 16:40:00",
        (1, 40),
        200,
    ),
    Frame(
        "bench-5",
        Framing(pan=-1.0, tilt=-11.0, field=37.0),
        Light((0.72, 0.50, 0.27), (0.60, 0.48, 0.34)),
        Exposure(0.15, (0.95, 1.0, 1.12), 0.94),
        "2026:05:14 17:35:00",
        (1, 40),
        400,
    ),
    Frame(
        "bench-6",
        Framing(x=-0.03, pan=3.5, tilt=-6.5, field=41.0),
        Light((0.40, 0.47, 0.60), (0.46, 0.44, 0.42)),
        Exposure(0.45, (1.06, 1.0, 0.95), 0.92),
        "2026:05:14 18:20:00",
        (1, 25),
        640,
    ),
)
DEEP = attrs.evolve(FRAMES[3], name="bench-7-deep", framing=Framing(pan=-2.5, tilt=-9.0, field=40.0))


def render_frame(
    frame: Frame, *, size: tuple[int, int] = SIZE, samples: int = 4, grain: float = GRAIN
) -> NDArray[np.float64]:
    """Render a frame as it was taken: (height, width, 3) sRGB codes 0 … 1."""
    return develop(frame, layers_of(frame, size=size, samples=samples), grain=grain)


def layers_of(frame: Frame, *, size: tuple[int, int] = SIZE, samples: int = 4) -> Layers:
    """Render the light of a frame's framing; `develop` makes any light and exposure of it."""
    return render_layers(frame.framing, size, samples=samples, seed=_seed(frame))


def develop(frame: Frame, layers: Layers, *, grain: float = GRAIN) -> NDArray[np.float64]:
    """Give a framing the light and exposure of `frame`."""
    return photograph(lit(layers, frame.light), frame.exposure, grain=grain, seed=_seed(frame))


def under_hero_light(frame: Frame) -> Frame:
    """Return the frame as it would have been taken in the hero's light with the hero's exposure: the ground truth."""
    return attrs.evolve(frame, light=HERO.light, exposure=HERO.exposure)


def render_samples(folder: Path) -> list[Path]:
    """Write the whole series into `folder` and return the files: hero, six frames, one 16-bit TIFF."""
    folder.mkdir(parents=True, exist_ok=True)
    paths = [_write_jpeg(frame, folder / f"{frame.name}.jpg") for frame in (HERO, *FRAMES)]
    return [*paths, _write_deep(folder / f"{DEEP.name}.tif")]


def _seed(frame: Frame) -> int:
    return sum(frame.name.encode()) % 9973


def _write_jpeg(frame: Frame, path: Path) -> Path:
    from PIL import Image

    codes = np.rint(255 * render_frame(frame)).astype(np.uint8)
    image = Image.fromarray(codes)
    image.save(path, quality=91, subsampling="4:2:0", exif=_exif(frame), icc_profile=profile_of(SRGB), optimize=True)
    return path


def _exif(frame: Frame) -> bytes:
    from PIL import Image

    exif = Image.Exif()
    exif[0x010F], exif[0x0110], exif[0x0112] = "Marrowfield", "Marrowfield field camera", 1
    exif[0x0132], exif[0x8298] = frame.taken, "Marrowfield Tileworks (invented)"
    details = exif.get_ifd(0x8769)
    details[0x829A] = frame.seconds
    details[0x829D] = (56, 10)
    details[0x8827] = frame.iso
    details[0x9003] = frame.taken
    return exif.tobytes()


def _write_deep(path: Path) -> Path:
    from hueferry.files.write import write
    from hueferry.picture import Metadata, Picture

    codes = np.rint(65535 * render_frame(DEEP, size=DEEP_SIZE, samples=9)).astype(np.uint16)
    return write(Picture(codes, SRGB, Metadata(format="tiff"), bits=16), path, overwrite=True)
