"""A second person gets the same bytes from the record."""

from __future__ import annotations

import json
from pathlib import Path

import attrs
import pytest
from PIL import Image

from hueferry.errors import InputError
from hueferry.fitting.settings import Only, Settings
from hueferry.jobs import check_folder, match_files
from hueferry.series.match import MatchOrder
from hueferry.series.recreate import recreate
from photographs import in_other_light, photograph


@pytest.fixture
def order(tmp_path: Path) -> MatchOrder:
    (tmp_path / "shoot").mkdir()
    for number, gains in enumerate([(1.2, 1.0, 0.8), (0.9, 1.0, 1.15), (1.0, 1.0, 1.0)]):
        Image.fromarray(in_other_light(photograph("china"), gains=gains)).save(tmp_path / "shoot" / f"{number}.jpg")
    Image.fromarray(photograph("china")).save(tmp_path / "hero.png")
    Image.new("L", (320, 214), 0).save(tmp_path / "hold.png")
    settings = Settings(only=Only.CHROMA, strength=0.9, keep_neutrals=True)
    return MatchOrder(inputs=[tmp_path / "shoot"], to=[tmp_path / "hero.png"], out=tmp_path / "out", settings=settings)


@pytest.mark.parametrize("towards", ["a reference", "each other"])
def test_the_same_bytes_come_out_again(towards: str, order: MatchOrder) -> None:
    match_files(attrs.evolve(order, to=order.to if towards == "a reference" else []))

    assert recreate(order.out, "1.jpg") == []
    assert check_folder(order.out, recreated="0.jpg") == []


def test_a_record_of_other_settings_does_not_give_the_same_bytes(order: MatchOrder) -> None:
    match_files(order)
    record = json.loads((order.out / "record.json").read_text())
    record["settings"]["strength"] = 0.5
    record["versions"]["numpy"] = "0.1"
    (order.out / "record.json").write_text(json.dumps(record))

    differences = recreate(order.out, "0.jpg")

    assert "other bytes" in differences[0]
    assert any("numpy was 0.1" in one for one in differences)


def test_changed_and_lost_inputs_are_named(order: MatchOrder) -> None:
    match_files(order)
    (order.inputs[0] / "0.jpg").write_bytes(b"other")
    order.to[0].unlink()

    differences = recreate(order.out, "0.jpg")

    assert any("0.jpg differs" in one for one in differences)
    assert any("hero.png is gone" in one for one in differences)


def test_an_unknown_result_or_setting_is_one_sentence(order: MatchOrder) -> None:
    match_files(order)

    with pytest.raises(InputError, match=r"no result 'x\.jpg'; it has 0\.jpg"):
        recreate(order.out, "x.jpg")
    record = json.loads((order.out / "record.json").read_text())
    record["settings"]["speed"] = 3
    (order.out / "record.json").write_text(json.dumps(record))
    with pytest.raises(InputError, match="not the settings"):
        recreate(order.out, "0.jpg")
