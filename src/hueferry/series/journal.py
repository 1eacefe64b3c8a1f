"""The journal of a folder: what was done from which bytes, so that a later run can go on where an earlier one ended.

One SQLite file in `.hueferry/` of the output folder. Only the process that runs the series writes it, and holds it
locked meanwhile. A row is committed before the picture it speaks of gets its name: a picture under a final name whose
bytes are those of a row is ours, and any other is somebody else's.
"""

from __future__ import annotations

import json
import shutil
import sqlite3
import tempfile
from collections.abc import Iterator, Mapping
from contextlib import contextmanager, suppress
from pathlib import Path
from types import TracebackType
from typing import Any

import attrs

from hueferry.errors import OutputError

FOLDER = ".hueferry"
NAME = "journal.sqlite"
SCHEMA = "hueferry/journal-1"

_TABLES = """
CREATE TABLE facts (name TEXT PRIMARY KEY, value TEXT NOT NULL);
CREATE TABLE pictures (
    output TEXT PRIMARY KEY, source TEXT NOT NULL, size INTEGER NOT NULL, changed INTEGER NOT NULL,
    sha256 TEXT NOT NULL, wanted TEXT NOT NULL, state TEXT NOT NULL, output_sha256 TEXT NOT NULL,
    former_sha256 TEXT NOT NULL, entry TEXT NOT NULL, arrays BLOB NOT NULL, reason TEXT NOT NULL
);
"""


@attrs.frozen(kw_only=True)
class Row:
    """What the journal says of one picture.

    Attributes:
        output: name below the folder of the run.
        source: path of the input, POSIX form.
        size: bytes of the input.
        changed: when the input was last modified, ns since 1970.
        sha256: of the input.
        wanted: hash of settings, references and versions.
        state: "done" or "failed".
        output_sha256: of the result; empty if it failed.
        former_sha256: of the result before this one, which may still have the name; or empty.
        entry: JSON of the record's entry; empty if it failed.
        arrays: thumbnails and palettes.
        reason: why it failed.
    """

    output: str
    source: str
    size: int
    changed: int
    sha256: str
    wanted: str
    state: str
    output_sha256: str = ""
    former_sha256: str = ""
    entry: str = ""
    arrays: bytes = b""
    reason: str = ""


_COLUMNS = tuple(field.name for field in attrs.fields(Row))
_HEAVY = frozenset({"entry", "arrays"})
_LIGHT = tuple(name for name in _COLUMNS if name not in _HEAVY)
_INSERT = f"INSERT OR REPLACE INTO pictures ({', '.join(_COLUMNS)}) VALUES ({', '.join('?' * len(_COLUMNS))})"  # noqa: S608 - names of our own


class Journal:
    """The journal of one output folder; nothing is created before `begin`.

    Raises:
        OutputError: another run is at work in the folder, or the file is not a journal.
    """

    def __init__(self, out: Path) -> None:
        self._out, self._home = out, out / FOLDER
        self._path = self._home / NAME
        self._made_folder = not out.exists()
        self._connection: sqlite3.Connection | None = None
        self._stage: Path | None = None
        if self._home.is_symlink() or self._path.is_symlink():
            raise OutputError(self._home, "this is a link, and nothing is written outside the folder; remove it")
        if self._path.exists():
            self._connect()

    def __enter__(self) -> Journal:
        return self

    def __exit__(self, kind: type[BaseException] | None, error: BaseException | None, at: TracebackType | None) -> None:
        if self._stage is not None:
            shutil.rmtree(self._stage, ignore_errors=True)
        if self._connection is not None:
            empty = not self._connection.execute("SELECT 1 FROM pictures WHERE state = 'done'").fetchone()
            self._connection.close()
            if empty and self._stage is not None:
                self._vanish()

    @property
    def exists(self) -> bool:
        """Whether an earlier run left a journal, or this one has begun."""
        return self._connection is not None

    def begin(self) -> Path:
        """Make ready to write, forget the seal, and return an empty folder for results that have no name yet."""
        try:
            self._home.mkdir(parents=True, exist_ok=True)
            for left in self._home.glob("stage-*"):  # of a run that was killed
                shutil.rmtree(left, ignore_errors=True)
            for half in self._out.glob(".hueferry-*"):  # a record or page that such a run was about to name
                if half.is_file():
                    half.unlink(missing_ok=True)
            self._stage = Path(tempfile.mkdtemp(prefix="stage-", dir=self._home))
        except OSError as error:
            raise OutputError(self._out, f"nothing can be written here: {error.strerror or error}") from error
        if self._connection is None:
            self._connect()
        self.seal({})
        return self._stage

    def rows(self) -> dict[str, Row]:
        """Return what is known of every output, without entries and arrays."""
        if self._connection is None:
            return {}
        with self._readable():
            found = self._connection.execute(f"SELECT {', '.join(_LIGHT)} FROM pictures").fetchall()  # noqa: S608
        return {row[0]: Row(**dict(zip(_LIGHT, row, strict=True))) for row in found}

    def whole(self, output: str) -> Row:
        """Return everything that is known of an output that `rows` names."""
        if self._connection is None:
            raise KeyError(output)
        query = f"SELECT {', '.join(_COLUMNS)} FROM pictures WHERE output = ?"  # noqa: S608
        with self._readable():
            row = self._connection.execute(query, (output,)).fetchone()
        return Row(**dict(zip(_COLUMNS, row, strict=True)))

    def store(self, row: Row) -> None:
        """Put a row on disk."""
        self._change(_INSERT, attrs.astuple(row))

    def forget(self, output: str) -> None:
        """Take a row out."""
        self._change("DELETE FROM pictures WHERE output = ?", (output,))

    def seal(self, seal: Mapping[str, Any]) -> None:
        """Say that a run is finished, and by what it can be told; an empty seal says that it is not."""
        self._change("INSERT OR REPLACE INTO facts VALUES ('seal', ?)", (json.dumps(seal),))

    def read_seal(self) -> dict[str, Any]:
        """Return the seal, empty if no run was finished."""
        if self._connection is None:
            return {}
        with self._readable():
            row = self._connection.execute("SELECT value FROM facts WHERE name = 'seal'").fetchone()
            seal = json.loads(row[0]) if row else {}
        return seal if isinstance(seal, dict) else {}

    def _connect(self) -> None:
        connection = sqlite3.connect(self._path, timeout=0.0, isolation_level=None)
        try:
            connection.execute("PRAGMA trusted_schema = OFF")
            connection.execute("PRAGMA locking_mode = EXCLUSIVE")
            connection.execute("BEGIN EXCLUSIVE")  # kept until the connection is closed
            if not connection.execute("SELECT 1 FROM sqlite_master WHERE name = 'facts'").fetchone():
                for statement in _TABLES.split(";"):
                    connection.execute(statement)
                connection.execute("INSERT INTO facts VALUES ('schema', ?)", (SCHEMA,))
            schema = connection.execute("SELECT value FROM facts WHERE name = 'schema'").fetchone()
            connection.execute("COMMIT")
        except sqlite3.Error as error:
            connection.close()
            raise OutputError(self._path, _sentence(error)) from error
        if schema != (SCHEMA,):
            connection.close()
            raise OutputError(self._path, f"this is not of the schema {SCHEMA}; choose another folder")
        self._connection = connection

    def _change(self, statement: str, values: tuple[Any, ...]) -> None:
        if self._connection is None:
            raise RuntimeError("the journal has not begun")
        try:
            self._connection.execute(statement, values)
        except sqlite3.Error as error:
            raise OutputError(self._path, _sentence(error)) from error

    @contextmanager
    def _readable(self) -> Iterator[None]:
        try:
            yield
        except (sqlite3.Error, ValueError, TypeError) as error:
            raise OutputError(self._path, _sentence(error)) from error

    def _vanish(self) -> None:
        """Leave nothing where nothing was done."""
        self._path.unlink(missing_ok=True)
        with suppress(OSError):
            self._home.rmdir()
            if self._made_folder:
                self._out.rmdir()


def _sentence(error: Exception) -> str:
    if "locked" in str(error):
        return "another run is at work in this folder; wait for it, or choose another folder"
    if "full" in str(error):
        return "the disk is full; free some space and run again, what was done so far is kept"
    return f"this journal cannot be used ({error}); remove it, or choose another folder"
