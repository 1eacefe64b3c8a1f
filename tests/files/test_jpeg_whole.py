"""A JPEG that was cut short is refused, also where somebody put an end mark behind the cut."""

from __future__ import annotations

import io
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
from PIL import Image

from hueferry.errors import PictureError
from hueferry.files.read import read
from hueferry.files.write import write
from photographs import photograph


def encoded(kind: str) -> bytes:
    options: dict[str, object] = {
        "sequential": {"subsampling": "4:4:4"},
        "coarse": {"subsampling": "4:2:0", "optimize": True},
        "restarts": {"restart_marker_rows": 1},
        "progressive": {"progressive": True},
        "gray": {},
    }[kind]
    pixels = photograph("china", step=4)
    stream = io.BytesIO()
    Image.fromarray(pixels[:, :, 1] if kind == "gray" else pixels).save(stream, "jpeg", quality=88, **options)
    return stream.getvalue()


@pytest.mark.parametrize("kind", ["sequential", "coarse", "restarts", "progressive", "gray"])
def test_a_cut_with_an_end_mark_is_refused(kind: str, tmp_path: Path) -> None:
    data = encoded(kind)
    start = data.rindex(b"\xff\xda") if kind != "progressive" else data.index(b"\xff\xda")
    path = tmp_path / "a.jpg"
    path.write_bytes(data)
    assert read(path).notes == ("no profile: taken as sRGB",)

    for part in np.linspace(0.02, 0.97, 14):
        cut = int(start + 20 + part * (len(data) - start - 20))
        path.write_bytes(data[:cut].rstrip(b"\xff") + b"\xff\xd9")
        with pytest.raises(PictureError, match=r"early|last scans|cannot be decoded|longer"):
            read(path)


@pytest.mark.parametrize("level", [127, 128, 129])
@pytest.mark.parametrize("progressive", [False, True])
def test_gray_pictures_are_whole(level: int, progressive: bool, tmp_path: Path) -> None:
    """What missing data look like is also what some pictures are."""
    gray = np.full((33, 47, 3), level, np.uint8)
    gray[5:9, 4:30] = (200, 90, 30)
    Image.fromarray(gray).save(tmp_path / "a.jpg", quality=95, progressive=progressive)

    assert read(tmp_path / "a.jpg").shape == (33, 47)


@pytest.mark.parametrize("suffix", ["jpg", "png", "webp"])
def test_codecs_stay_silent_on_broken_files(suffix: str, tmp_path: Path) -> None:
    """Libraries in C write to the process's own standard error, which only another process can watch."""
    stream = io.BytesIO()
    Image.fromarray(photograph("china", step=8)).save(
        stream, {"jpg": "jpeg"}.get(suffix, suffix), icc_profile=bytes(200), exif=b"Exif\0\0II*\0\0\0"
    )
    data, rng = stream.getvalue(), np.random.default_rng(3)
    for number in range(40):
        broken = bytearray(data)
        for place in rng.integers(20, len(data), 6):
            broken[place] = int(rng.integers(0, 256))
        (tmp_path / f"{number}.{suffix}").write_bytes(bytes(broken))
    code = (
        "import sys, pathlib\nfrom hueferry.errors import HueferryError\nfrom hueferry.files.read import read\n"
        "done = 0\nfor path in sorted(pathlib.Path(sys.argv[1]).iterdir()):\n"
        "    try:\n        read(path)\n    except HueferryError:\n        pass\n    done += 1\nprint(done)"
    )

    ran = subprocess.run([sys.executable, "-c", code, str(tmp_path)], capture_output=True, check=False, text=True)

    assert (ran.returncode, ran.stdout.strip(), ran.stderr) == (0, "40", "")


@pytest.mark.parametrize("sampling", ["4:4:4", "4:2:2", "4:2:0"])
@pytest.mark.parametrize("quality", [75, 85, 92])
def test_writing_again_costs_little(sampling: str, quality: int, tmp_path: Path) -> None:
    """45 dB against what was read, for photographs that the source's own coding left at full chroma or less."""
    Image.fromarray(photograph("china")).save(tmp_path / "a.jpg", quality=quality, subsampling=sampling)
    first = read(tmp_path / "a.jpg")

    again = read(write(first, tmp_path / "b.jpg"))

    error = np.mean((first.pixels.astype(float) - again.pixels) ** 2)
    assert 10 * np.log10(255**2 / error) >= 45
