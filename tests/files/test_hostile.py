"""Hundreds of broken files of every kind and names of every sort: pictures or refusals in words, and nothing left."""

from __future__ import annotations

import json
import struct
import subprocess
import sys
import zlib
from pathlib import Path

import numpy as np
import pytest

from fuzz.seeds import SEEDS
from hueferry.errors import PictureError
from hueferry.files.formats import SUFFIXES
from hueferry.files.read import read

FORMATS = ("jpeg", "png", "webp")
NAMES = (
    "[red].png",
    "[bold]a[end].png",
    "line\nbreak.png",
    "\x1b[31mred\x1b[0m.png",
    "\u202egnp.exe.png",
    "n" * 251 + ".png",
    "\N{ARTIST PALETTE}\N{RAINBOW}.png",
    "naïve é.png",
    "<img src=x onerror=alert(1)>.png",
    "-rf.png",
    "%s%n.png",
)


def cut(seed: bytes) -> list[bytes]:
    """Cut a file at a hundred places, from its first byte to its last but one."""
    return [seed[: int(place)] for place in np.unique(np.linspace(1, len(seed) - 1, 100).astype(int))]


def flipped(seed: bytes, number: int) -> list[bytes]:
    """Set a few bytes, three out of four of them among the first 400, where headers are."""
    rng = np.random.default_rng(number)
    made = []
    for index in range(120):
        data = bytearray(seed)
        for _ in range(int(rng.integers(1, 5))):
            data[int(rng.integers(0, min(len(data), 400 if index % 4 else len(data))))] = int(rng.integers(0, 256))
        made.append(bytes(data))
    return made


def lying(seed: bytes) -> list[bytes]:
    """Put the largest numbers at every place of the first 120 bytes behind the signature."""
    values = (b"\xff" * 4, b"\x7f\xff\xff\xff")
    return [seed[:at] + value + seed[at + 4 :] for at in range(8, 120, 3) for value in values]


@pytest.mark.parametrize("format_", FORMATS)
def test_broken_files_are_pictures_or_refusals(format_: str, tmp_path: Path) -> None:
    """A file that lost its end is never a picture (a PNG or JPEG may lose what stands behind its end)."""
    path = tmp_path / f"a{SUFFIXES[format_][0]}"
    for number, seed in enumerate(SEEDS[format_]):
        for data in cut(seed):
            path.write_bytes(data)
            with pytest.raises(PictureError) as caught:
                read(path)
            assert caught.value.path == path
        for data in flipped(seed, number) + lying(seed):
            path.write_bytes(data)
            try:
                picture = read(path, guarded=False)
            except PictureError:
                continue
            assert picture.pixels.size > 0
    assert list(tmp_path.iterdir()) == [path]


def chunk(kind: bytes, body: bytes, length: int | None = None) -> bytes:
    stated = len(body) if length is None else length
    return struct.pack(">I", stated) + kind + body + struct.pack(">I", zlib.crc32(kind + body))


def header(width: int, height: int, depth: int = 8, colour: int = 2) -> bytes:
    return chunk(b"IHDR", struct.pack(">IIBBBBB", width, height, depth, colour, 0, 0, 0))


ROWS = chunk(b"IDAT", zlib.compress(bytes(4 * 13)))
END = chunk(b"IEND", b"")
HAND_BROKEN = {
    "no rows": header(4, 4) + END,
    "rows of another picture": header(400, 400) + ROWS + END,
    "no size": header(0, 4) + ROWS + END,
    "odd depth": header(4, 4, depth=3) + ROWS + END,
    "palette without colours": header(4, 4, colour=3) + ROWS + END,
    "a length beyond the file": header(4, 4) + chunk(b"IDAT", b"x", 1 << 31) + END,
    "largest length": header(4, 4) + chunk(b"tEXt", b"x", 0xFFFFFFFF) + END,
    "a bomb": header(60_000, 60_000) + ROWS + END,
    "wide": header(0x7FFFFFFF, 1) + ROWS + END,
    "header twice": header(4, 4) + header(5, 5) + END,
    "no header": ROWS + END,
    "not zlib": header(4, 4) + chunk(b"IDAT", b"\0" * 40) + END,
}


@pytest.mark.parametrize("name", HAND_BROKEN)
def test_hand_broken_png_files_are_refused(name: str, tmp_path: Path) -> None:
    (tmp_path / "a.png").write_bytes(b"\x89PNG\r\n\x1a\n" + HAND_BROKEN[name])

    with pytest.raises(PictureError):
        read(tmp_path / "a.png")


def run(*words: str | Path) -> subprocess.CompletedProcess[str]:
    code = "from hueferry.cli.main import main; main()"
    return subprocess.run([sys.executable, "-c", code, *words], capture_output=True, check=False, text=True)


def test_a_folder_of_broken_files_with_hostile_names_ends_in_words(tmp_path: Path) -> None:
    """Good ones are done, bad ones are named; the terminal's codes are not sent on, and no trace is shown."""
    source, out = tmp_path / "in", tmp_path / "out"
    source.mkdir()
    good = SEEDS["png"][0].replace(b"iCCP", b"ixCP")
    for number, name in enumerate(NAMES):
        (source / name).write_bytes(SEEDS["png"][2] if number % 2 else good[: 40 + number])
    (tmp_path / "hero.png").write_bytes(SEEDS["png"][2])

    ran = run("match", source, "--to", tmp_path / "hero.png", "--out", out)

    said = ran.stdout + ran.stderr
    assert ran.returncode == 1
    assert "Traceback" not in said
    assert "\x1b[31m" not in said
    assert "\u202e" not in said
    written = {path.name for path in out.rglob("*.png")}
    assert written >= {name for number, name in enumerate(NAMES) if number % 2}
    assert not [path for path in out.rglob("*") if path.name.startswith(".hueferry-")]


@pytest.mark.parametrize("format_", FORMATS)
def test_one_broken_file_ends_with_the_callers_fault(format_: str, tmp_path: Path) -> None:
    path = tmp_path / f"a{SUFFIXES[format_][0]}"
    path.write_bytes(SEEDS[format_][0][:300])

    ran = run("cost", path, path, "--json")

    assert ran.returncode == 2
    assert "Traceback" not in ran.stderr
    assert json.loads(ran.stdout)
