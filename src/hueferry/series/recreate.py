"""A result made again from the record alone, to show that a second person gets the same bytes."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from pathlib import Path
from tempfile import TemporaryDirectory
from typing import Any

from hueferry.errors import InputError
from hueferry.fitting.settings import Settings
from hueferry.record.record import FileFact, installed_versions, read_record
from hueferry.series.match import MatchOrder, match_pictures

Json = Mapping[str, Any]


def recreate(folder: Path, name: str) -> list[str]:
    """Make one result of a run again, away from its folder, and say in what it differs from the record.

    Args:
        folder: of the run.
        name: of the result, as the record has it.

    Returns:
        Sentences; none if the same bytes came out.

    Raises:
        InputError: there is no record, none of this kind, or no such result in it.
    """
    record = read_record(folder)
    if record["command"] != "match":
        raise InputError(f"{folder} is of the command {record['command']!r}; only results of match are made again")
    entry = _entry(record, name)
    complaints = [complaint for fact in _inputs(record, entry) if (complaint := _changed(fact))]
    if complaints:
        return complaints
    with TemporaryDirectory(prefix="hueferry-") as place:
        order = _order(record, entry, Path(place) / "again")
        run = match_pictures(order)
        made = {one.source.path: one.output.sha256 for one in run.record.entries if one.output is not None}
    if made.get(entry["source"]["path"]) == entry["output"]["sha256"]:
        return []
    return [f"{name} came out with other bytes than the record says", *_other_versions(record["versions"])]


def _entry(record: Json, name: str) -> Json:
    entries: list[Json] = [entry for entry in record["entries"] if entry["output"] is not None]
    found = next((entry for entry in entries if entry["output"]["path"] == name), None)
    if found is None:
        known = ", ".join(entry["output"]["path"] for entry in entries[:10])
        raise InputError(f"the record knows no result {name!r}; it has {known}")
    return found


def _sources(record: Json, entry: Json) -> list[Json]:
    """Return the inputs that decide how a picture comes out: all of them where they decided it together."""
    alone = record["references"] and not record.get("series", {}).get("joint")
    return [entry["source"]] if alone else [one["source"] for one in record["entries"]]


def _inputs(record: Json, entry: Json) -> list[Json]:
    held = record.get("hold")
    return [*_sources(record, entry), *record["references"], *([] if held is None else [held])]


def _changed(fact: Json) -> str:
    path = Path(fact["path"])
    if not path.is_file():
        return f"input {path} is gone"
    return "" if FileFact.of(path).sha256 == fact["sha256"] else f"input {path} differs from the record"


def _order(record: Json, entry: Json, out: Path) -> MatchOrder:
    sources = [source["path"] for source in _sources(record, entry)]
    held, series = record.get("hold"), record.get("series", {})
    return MatchOrder(
        # What failed took part in nothing, but counts among the pictures of the run.
        inputs=[Path(path) for path in dict.fromkeys([*sources, *_failed(record)])],
        to=[Path(fact["path"]) for fact in record["references"]],
        out=out,
        settings=Settings.from_dict(record["settings"]),
        hold=None if held is None else Path(held["path"]),
        joint=bool(series.get("joint")),
        time_lapse=bool(series.get("time_lapse")),
    )


def _failed(record: Json) -> list[str]:
    paths = [str(failure["path"]) for failure in record["failures"]]
    return [path for path in paths if record.get("series", {}).get("joint") and Path(path).exists()]


def _other_versions(recorded: Mapping[str, str]) -> Sequence[str]:
    here = installed_versions()
    names = sorted(name for name in {*recorded, *here} if recorded.get(name) != here.get(name))
    return [f"{name} was {recorded.get(name, 'absent')} and is {here.get(name, 'absent')} here" for name in names]
