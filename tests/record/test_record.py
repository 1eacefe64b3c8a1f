"""The record holds what a second person needs, and nothing of it changes on the way through JSON."""

from __future__ import annotations

import hashlib
import json
from pathlib import Path

import pytest

from hueferry.errors import InputError
from hueferry.record.record import NAME, SCHEMA, Entry, Failure, FileFact, Record, read_record, to_json


def test_a_fact_is_the_hash_that_the_standard_library_gives(tmp_path: Path) -> None:
    path = tmp_path / "a.bin"
    path.write_bytes(b"abc" * 700_000)

    fact = FileFact.of(path, shown_as="a.bin")

    assert fact == FileFact("a.bin", 2_100_000, hashlib.sha256(b"abc" * 700_000).hexdigest())


def test_a_fact_of_abc_is_the_published_digest(tmp_path: Path) -> None:
    """FIPS 180-2, appendix B.1: SHA-256 of the three bytes "abc"."""
    path = tmp_path / "abc"
    path.write_bytes(b"abc")

    assert FileFact.of(path).sha256 == "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"


def test_a_record_comes_back_as_it_was_written(tmp_path: Path) -> None:
    fact = FileFact("north/a.jpg", 3, "00")
    record = Record(
        "match", {"seed": 7}, [fact], [Entry(fact, fact, {"moved": 1.5}, ("said",))], [Failure("b.jpg", "broken")]
    )
    (tmp_path / NAME).write_text(to_json(record), encoding="utf-8")

    data = read_record(tmp_path)

    assert data == json.loads(to_json(record))
    assert data["schema"] == SCHEMA
    assert data["entries"][0]["numbers"]["moved"] == 1.5
    assert data["failures"] == [{"path": "b.jpg", "reason": "broken"}]
    assert data["versions"]["numpy"]


@pytest.mark.parametrize(
    ("text", "complaint"),
    [("{", "is not a record"), ('{"schema": "other"}', "is not of the schema"), ("[" * 100_000, "is not a record")],
)
def test_what_is_not_a_record_is_refused(tmp_path: Path, text: str, complaint: str) -> None:
    (tmp_path / NAME).write_text(text, encoding="utf-8")

    with pytest.raises(InputError, match=complaint):
        read_record(tmp_path)


def test_a_folder_without_a_record_is_refused(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="holds no record"):
        read_record(tmp_path)
