"""The drift log: readings in a SQLite file."""

from __future__ import annotations

import sqlite3
from collections.abc import Iterator
from contextlib import contextmanager
from datetime import datetime
from pathlib import Path

from hueferry.arrays import Mask
from hueferry.drift.reading import Labels, Reading, measure_reading
from hueferry.errors import InputError
from hueferry.palettes.palette import Palette
from hueferry.picture import Picture

VERSION = 1
_APPLICATION = 0x68756664  # "hufd"
_SCHEMA = """CREATE TABLE readings (
    taken TEXT NOT NULL,
    device TEXT NOT NULL,
    picture TEXT NOT NULL,
    reference TEXT NOT NULL,
    l REAL NOT NULL,
    a REAL NOT NULL,
    b REAL NOT NULL,
    w2 REAL NOT NULL,
    first_stain REAL,
    second_stain REAL
)"""
_COLUMNS = "taken, device, picture, reference, l, a, b, w2, first_stain, second_stain"
_ROW = tuple[str, str, str, str, float, float, float, float, float | None, float | None]


def add_reading(
    log: Path,
    picture: Picture,
    reference: Palette,
    labels: Labels,
    *,
    mask: Mask | None = None,
    stain_angles: tuple[float, float] | None = None,
) -> Reading:
    """Measure a control frame against its reference and append the reading to a log; a new log is made.

    Args:
        log: path of the log.
        picture: the control frame.
        reference: palette of the reference frame, which shows the same thing.
        labels: device, names and date that go with the reading.
        mask: (rows, columns) of the picture, true where pixels count.
        stain_angles: turn of both stain vectors in degrees, where they were measured.

    Raises:
        InputError: no pixel was counted, the file is not a drift log, or it cannot be written.
    """
    reading = measure_reading(picture, reference, labels, mask=mask, stain_angles=stain_angles)
    append(log, reading)
    return reading


def append(log: Path, reading: Reading) -> None:
    """Append one reading; a new log is made where there is none.

    Raises:
        InputError: the file is not a drift log, or it cannot be written.
    """
    angles = reading.stain_angles or (None, None)
    names = (_storable(name) for name in (reading.device, reading.picture, reading.reference))
    row = (reading.when.isoformat(), *names, reading.l, reading.a, reading.b, reading.w2, *angles)
    with _opened(log, mode="rwc") as connection:
        if not connection.execute("SELECT count(*) FROM sqlite_master").fetchone()[0]:
            connection.execute(f"PRAGMA application_id = {_APPLICATION}")
            connection.execute(f"PRAGMA user_version = {VERSION}")
            connection.execute(_SCHEMA)
        _check(log, connection)
        connection.execute(f"INSERT INTO readings ({_COLUMNS}) VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?)", row)  # noqa: S608


def list_readings(log: Path, *, device: str | None = None) -> list[Reading]:
    """Return the readings of a log in the order of their dates; of one device only, if it is named.

    Raises:
        InputError: there is no such log, or the file is not one.
    """
    if not log.is_file():
        raise InputError(f"{log}: there is no such drift log; add a reading first")
    query = f"SELECT {_COLUMNS} FROM readings WHERE ?1 IS NULL OR device = ?1 ORDER BY taken, rowid"  # noqa: S608
    with _opened(log, mode="ro") as connection:
        _check(log, connection)
        rows = connection.execute(query, (None if device is None else _storable(device),)).fetchall()
    return [_reading(log, row) for row in rows]


def list_devices(log: Path) -> list[str]:
    """Return the devices of a log, each once, in alphabetical order."""
    return sorted({reading.device for reading in list_readings(log)})


@contextmanager
def _opened(log: Path, *, mode: str) -> Iterator[sqlite3.Connection]:
    """Open a log and commit at the end, or nothing at all if something went wrong."""
    connection = None
    try:
        connection = sqlite3.connect(f"{log.absolute().as_uri()}?mode={mode}", uri=True, timeout=10.0)
        connection.execute("PRAGMA trusted_schema = OFF")
        with connection:
            connection.execute("BEGIN IMMEDIATE" if mode == "rwc" else "BEGIN")
            yield connection
    except sqlite3.Error as error:
        raise InputError(f"{log}: cannot be used as a drift log ({error}); name a drift log or a new file") from error
    finally:
        if connection is not None:
            connection.close()


def _check(log: Path, connection: sqlite3.Connection) -> None:
    """Refuse any database that is not exactly a drift log: no foreign tables, views or triggers run."""
    application = connection.execute("PRAGMA application_id").fetchone()[0]
    version = connection.execute("PRAGMA user_version").fetchone()[0]
    if application != _APPLICATION:
        raise InputError(f"{log}: this is not a drift log; name a drift log or a new file")
    if version != VERSION:
        raise InputError(f"{log}: this drift log has version {version}, and {VERSION} is understood; update hueferry")
    if connection.execute("SELECT type, name, sql FROM sqlite_master").fetchall() != [("table", "readings", _SCHEMA)]:
        raise InputError(f"{log}: this drift log was changed by other software; start a new one")


def _reading(log: Path, row: _ROW) -> Reading:
    taken, device, picture, reference, lightness, a, b, w2, first, second = row
    angles = None if first is None or second is None else (first, second)
    try:
        return Reading(datetime.fromisoformat(taken), device, picture, reference, lightness, a, b, w2, angles)
    except (InputError, ValueError, TypeError) as error:
        raise InputError(f"{log}: a reading is damaged ({error}); restore the log from a copy") from error


def _storable(name: str) -> str:
    """Spell out what UTF-8 cannot hold, such as bytes of a file name in another encoding."""
    return name.encode("utf-8", "backslashreplace").decode("utf-8")
