"""The log: what goes in comes out, and nothing else is let in."""

from __future__ import annotations

import sqlite3
from datetime import UTC, datetime, timedelta, timezone
from pathlib import Path

import attrs
import numpy as np
import pytest
from skimage import data

from drift.series_of import readings
from hueferry.colour.spaces import lab_to_oklab, oklab_to_lab
from hueferry.drift.log import add_reading, append, list_devices, list_readings
from hueferry.drift.reading import Labels, Reading
from hueferry.errors import InputError
from hueferry.palettes.build import palette_of
from hueferry.picture import Picture
from palettes.coded import Coded

HOSTILE = [
    "'; DROP TABLE readings; --",
    '" OR 1=1',
    "<script>alert(1)</script>",
    "=cmd()",
    "a\nb\x1b[31m",
    "\u202egnp.exe",
    "é🎨" * 40,
    "\udcff raw byte",
    "",
]


def test_what_is_added_is_listed_in_the_order_of_dates(tmp_path: Path) -> None:
    log, series = tmp_path / "log.sqlite", readings(1, 5)

    for reading in (series[3], series[0], series[4], series[1], series[2]):
        append(log, reading)

    assert list_readings(log) == series


def test_devices_are_told_apart(tmp_path: Path) -> None:
    log = tmp_path / "log.sqlite"
    for device in ("b", "a", "b"):
        append(log, attrs.evolve(readings(1, 1)[0], device=device))

    assert list_devices(log) == ["a", "b"]
    assert len(list_readings(log, device="b")) == 2
    assert list_readings(log, device="c") == []


@pytest.mark.parametrize("name", HOSTILE)
def test_hostile_names_are_kept_as_text(tmp_path: Path, name: str) -> None:
    log = tmp_path / "log.sqlite"
    append(log, attrs.evolve(readings(1, 1)[0], device=name, picture=name, reference=name))
    append(log, attrs.evolve(readings(1, 1)[0], device="other"))

    kept = list_readings(log, device=name)

    assert len(kept) == 1
    assert kept[0].picture == name.encode("utf-8", "backslashreplace").decode()
    assert len(list_readings(log)) == 2


def test_times_of_any_zone_are_kept_in_utc(tmp_path: Path) -> None:
    log = tmp_path / "log.sqlite"
    noon = datetime(2026, 6, 1, 12, 0, 0, 5, tzinfo=timezone(timedelta(hours=2)))

    append(log, attrs.evolve(readings(1, 1)[0], when=noon))

    assert list_readings(log)[0].when == datetime(2026, 6, 1, 10, 0, tzinfo=UTC)


def test_a_picture_is_measured_against_its_reference(tmp_path: Path) -> None:
    """The reference is the same frame, 1 lighter, 2 greener and 2 bluer: the reading is −1, 2, 2, and W2 is 3."""
    picture = Picture(data.coffee(), Coded(), path=Path("/somewhere/frame.tif"))
    palette = palette_of(picture)
    moved = attrs.evolve(palette, colours=lab_to_oklab(oklab_to_lab(palette.colours) + np.array([1.0, -2.0, -2.0])))

    reading = add_reading(tmp_path / "log", picture, moved, Labels(device="d", reference="r"), stain_angles=(0.5, -1.5))

    assert (reading.l, reading.a, reading.b) == pytest.approx((-1, 2, 2), abs=1e-6)
    assert reading.w2 == pytest.approx(3, abs=0.15)
    assert (reading.picture, reading.device, reading.reference) == ("frame.tif", "d", "r")
    assert list_readings(tmp_path / "log") == [reading]


def test_the_same_frame_reads_zero(tmp_path: Path) -> None:
    picture = Picture(data.coffee(), Coded())

    reading = add_reading(tmp_path / "log", picture, palette_of(picture), Labels())

    assert (reading.l, reading.a, reading.b, reading.w2) == pytest.approx((0, 0, 0, 0), abs=1e-5)
    assert datetime.now(UTC) - reading.when < timedelta(minutes=5)


@pytest.mark.parametrize("value", [float("nan"), float("inf"), "1.0", None])
def test_readings_hold_finite_numbers_only(value) -> None:
    with pytest.raises(InputError, match="finite number"):
        attrs.evolve(readings(1, 1)[0], l=value)


def test_distances_are_not_negative() -> None:
    with pytest.raises(InputError, match="not be negative"):
        attrs.evolve(readings(1, 1)[0], w2=-1.0)


def test_a_log_that_is_not_there_is_not_made_by_listing(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="no such drift log"):
        list_readings(tmp_path / "none")
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize("content", [b"hello", b"\xff" * 5000, b"SQLite format 3\x00 and no more"])
def test_other_files_are_neither_read_nor_changed(tmp_path: Path, content: bytes) -> None:
    path = tmp_path / "photo.jpg"
    path.write_bytes(content)

    with pytest.raises(InputError, match="drift log"):
        append(path, readings(1, 1)[0])
    with pytest.raises(InputError, match="drift log"):
        list_readings(path)
    assert path.read_bytes() == content


def other_database(path: Path, *statements: str) -> None:
    connection = sqlite3.connect(path)
    with connection:
        for statement in statements:
            connection.execute(statement)
    connection.close()


def test_other_databases_are_refused(tmp_path: Path) -> None:
    other_database(tmp_path / "d", "CREATE TABLE readings (x)")
    before = (tmp_path / "d").read_bytes()

    for use in (lambda: append(tmp_path / "d", readings(1, 1)[0]), lambda: list_readings(tmp_path / "d")):
        with pytest.raises(InputError, match="not a drift log"):
            use()
    assert (tmp_path / "d").read_bytes() == before


@pytest.mark.parametrize(
    ("statement", "message"),
    [
        ("PRAGMA user_version = 2", "version 2"),
        ("CREATE TRIGGER t AFTER INSERT ON readings BEGIN DELETE FROM readings; END", "changed by other software"),
        ("CREATE VIEW v AS SELECT 1", "changed by other software"),
        ("UPDATE readings SET l = 'high'", "damaged"),
        ("UPDATE readings SET taken = 'yesterday'", "damaged"),
        ("UPDATE readings SET w2 = 9e999", "damaged"),
    ],
)
def test_logs_that_were_tampered_with_are_refused(tmp_path: Path, statement: str, message: str) -> None:
    log = tmp_path / "log"
    append(log, readings(1, 1)[0])
    other_database(log, statement)

    with pytest.raises(InputError, match=message):
        list_readings(log)


def test_a_folder_that_is_not_there_is_told(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="cannot be used as a drift log"):
        append(tmp_path / "none" / "log", readings(1, 1)[0])


def test_names_with_the_signs_of_addresses_are_plain_names(tmp_path: Path) -> None:
    log = tmp_path / "week?mode=ro&x#1%20.sqlite"

    append(log, readings(1, 1)[0])

    assert log.is_file()
    assert len(list_readings(log)) == 1


def test_readings_are_frozen() -> None:
    with pytest.raises(attrs.exceptions.FrozenInstanceError):
        readings(1, 1)[0].l = 3.0  # type: ignore[misc]
    assert isinstance(readings(1, 1)[0], Reading)
