"""A file appears whole under its name or not at all, with the rights that new files get, and nothing is left behind."""

from __future__ import annotations

import os
import stat
from pathlib import Path

import numpy as np
import pytest
from PIL import Image

from hueferry.colour.encoding import SRGB
from hueferry.errors import OutputError
from hueferry.files import atomic, verify
from hueferry.files.write import write
from hueferry.picture import Picture


def test_rights_are_those_of_new_files_and_the_mask_is_never_touched(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    before = os.umask(0o027)
    try:
        monkeypatch.setattr(os, "umask", lambda _: pytest.fail("the mask belongs to the whole process"))
        atomic.write_bytes(tmp_path / "a", b"1")
        monkeypatch.undo()
        (tmp_path / "b").touch()
    finally:
        os.umask(before)
    assert stat.S_IMODE((tmp_path / "a").stat().st_mode) == stat.S_IMODE((tmp_path / "b").stat().st_mode) == 0o640


def test_file_and_folder_are_flushed(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    flushed: list[bool] = []
    real = os.fsync
    monkeypatch.setattr(
        os, "fsync", lambda handle: (flushed.append(stat.S_ISDIR(os.fstat(handle).st_mode)), real(handle))
    )

    atomic.write_bytes(tmp_path / "a", b"1")

    assert flushed == [False, True]


@pytest.mark.parametrize("links", [True, False])
def test_a_name_taken_meanwhile_stays_whose_it_is(links: bool, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """With and without hard links; the other one comes just before the name is given."""
    if not links:
        monkeypatch.setattr(os, "link", lambda *_: (_ for _ in ()).throw(PermissionError(1, "no links here")))

    def interfere(_: Path) -> None:
        (tmp_path / "a").write_bytes(b"theirs")

    with pytest.raises(OutputError, match="meanwhile"):
        atomic.write_bytes(tmp_path / "a", b"ours", verify=interfere)

    assert (tmp_path / "a").read_bytes() == b"theirs"
    assert len(list(tmp_path.iterdir())) == 1


def test_without_links_files_are_written_all_the_same(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(os, "link", lambda *_: (_ for _ in ()).throw(PermissionError(1, "no links here")))

    atomic.write_bytes(tmp_path / "a", b"ours")

    assert [(path.name, path.read_bytes()) for path in tmp_path.iterdir()] == [("a", b"ours")]


def test_what_fails_leaves_nothing(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(os, "link", lambda *_: (_ for _ in ()).throw(PermissionError(1, "no links here")))
    monkeypatch.setattr(Path, "replace", lambda *_: (_ for _ in ()).throw(OSError(28, "No space left on device")))

    with pytest.raises(OutputError, match="No space left"):
        atomic.write_bytes(tmp_path / "a", b"ours")

    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize(
    "name", ["n" * 251 + ".png", "[red].png", "line\nbreak.png", "\x1b[31mred.png", "\u202egnp.png"]
)
def test_hostile_names_are_names(name: str, tmp_path: Path) -> None:
    atomic.write_bytes(tmp_path / name, b"1")

    assert [path.name for path in tmp_path.iterdir()] == [name]


@pytest.mark.parametrize("channels", [1, 2, 3, 4])
@pytest.mark.parametrize("depth", [8, 16])
def test_a_png_that_came_out_wrong_is_not_published(channels: int, depth: int, tmp_path: Path) -> None:
    rng = np.random.default_rng(channels)
    dtype = np.uint8 if depth == 8 else np.uint16
    pixels = rng.integers(0, 2**depth, (9, 7, channels)).astype(dtype)
    path = write(Picture(pixels, SRGB, bits=depth), tmp_path / "a.png")
    other = pixels.copy()
    other[4, 4, 0] ^= 1 << (depth - 1)

    verify.verify(path, tmp_path / "b.png", pixels, "png")
    with pytest.raises(OutputError, match="pixels are not those"):
        verify.verify(path, tmp_path / "b.png", other, "png")


def test_a_file_of_another_kind_or_size_is_not_published(tmp_path: Path) -> None:
    pixels = np.zeros((9, 7, 3), np.uint8)
    Image.fromarray(pixels[:5]).save(tmp_path / "a.webp", lossless=True)

    with pytest.raises(OutputError, match="came back as webp"):
        verify.verify(tmp_path / "a.webp", tmp_path / "b", pixels, "webp")
    (tmp_path / "cut.webp").write_bytes((tmp_path / "a.webp").read_bytes()[:-9])
    with pytest.raises(OutputError, match="cannot be read again"):
        verify.verify(tmp_path / "cut.webp", tmp_path / "b", pixels, "webp")
