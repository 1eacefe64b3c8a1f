"""A file that kills, stalls or bloats its decoder costs a process of its own, and is refused in words."""

from __future__ import annotations

import io
import sys
from pathlib import Path

import attrs
import numpy as np
import pytest
from PIL import Image

from hueferry.colour.encoding import DISPLAY_P3
from hueferry.errors import PictureError, RefusedError
from hueferry.files import guard
from hueferry.files.read import read
from photographs import photograph

pytestmark = pytest.mark.skipif(not guard.can_guard(), reason="children get open files on POSIX only")


def flat(side: int, kind: str) -> bytes:
    stream = io.BytesIO()
    Image.new("RGB", (side, side), (10, 20, 30)).save(stream, kind, quality=50)
    return stream.getvalue()


@pytest.mark.parametrize("suffix", ["jpg", "png", "tif"])
def test_what_comes_through_a_guard_is_the_same(suffix: str, tmp_path: Path) -> None:
    path = tmp_path / f"a.{suffix}"
    Image.fromarray(photograph("china", step=8)).save(path)

    plain, guarded = read(path), read(path, guarded=True)

    np.testing.assert_array_equal(guarded.pixels, plain.pixels)
    assert guarded.metadata == plain.metadata
    assert guarded.notes == plain.notes
    assert guarded.encoding is plain.encoding


def test_known_encodings_are_known_again() -> None:
    assert guard._known(attrs.evolve(DISPLAY_P3)) is DISPLAY_P3


def test_errors_come_through_a_guard(tmp_path: Path) -> None:
    (tmp_path / "a.png").write_bytes(flat(64, "png")[:-30])
    Image.new("CMYK", (9, 9)).save(tmp_path / "a.jpg")

    with pytest.raises(PictureError, match=r"early|longer"):
        read(tmp_path / "a.png", guarded=True)
    with pytest.raises(RefusedError, match="CMYK"):
        read(tmp_path / "a.jpg", guarded=True)


@pytest.mark.parametrize("kind", ["png", "jpeg"])
def test_a_bomb_is_kept_within_its_limit(kind: str, tmp_path: Path) -> None:
    """9,000 × 9,000 pixels of three channels are 243 MB; 100 MB do not hold them."""
    path = tmp_path / "bomb"
    path.write_bytes(flat(9000, kind))
    assert guard.is_suspicious(kind, path.read_bytes())

    with pytest.raises(PictureError, match=r"decoding its [\d,]+ bytes takes more memory than the limit of 100 MB"):
        guard.decode_guarded(path, kind, accept_loss=False, limits=guard.Limits(memory=100 << 20))


def test_a_decoder_that_takes_its_time_is_stopped(tmp_path: Path) -> None:
    path = tmp_path / "slow"
    path.write_bytes(flat(64, "png"))

    with pytest.raises(PictureError, match="within the limit of 1e-06 s; open it"):
        guard.decode_guarded(path, "png", accept_loss=False, limits=guard.Limits(seconds=1e-6))


def test_a_decoder_that_dies_is_named(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = tmp_path / "poison"
    path.write_bytes(flat(64, "png"))
    false = tmp_path / "python"
    false.write_text("#!/bin/sh\nkill -SEGV $$\n")
    false.chmod(0o755)
    monkeypatch.setattr(sys, "executable", str(false))

    with pytest.raises(PictureError, match=r"died of its [\d,]+ bytes \(signal 11\), under a limit of 4,096 MB"):
        guard.decode_guarded(path, "png", accept_loss=False)


def test_photographs_need_no_guard() -> None:
    stream = io.BytesIO()
    Image.fromarray(np.tile(photograph("china"), (10, 7, 1))).save(stream, "jpeg", quality=60)

    assert not guard.is_suspicious("jpeg", stream.getvalue())
    assert not guard.is_suspicious("png", flat(500, "png"))
