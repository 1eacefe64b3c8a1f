"""Runs whose pictures are solved as one series, from file to file."""

from __future__ import annotations

import json
from pathlib import Path

import attrs
import numpy as np
import pytest
from PIL import Image

from hueferry.colour.difference import delta_e_2000
from hueferry.colour.encoding import SRGB
from hueferry.colour.spaces import oklab_to_lab, xyz_to_oklab
from hueferry.errors import InputError
from hueferry.fitting.settings import Aim, Settings
from hueferry.jobs import check_folder, match_files
from hueferry.series.match import MatchOrder, plan_match
from photographs import photograph

CASTS = {"a": (1.0, 1.0, 1.0), "b": (0.95, 0.8, 0.62), "c": (0.7, 0.82, 0.95), "d": (0.78, 0.72, 0.8)}
"""Gains in linear light; a is the reference."""

PLACES = {"a": 0, "b": 110, "c": 220, "d": 330}
"""First column of each frame: neighbours overlap by half, the first and the last not at all."""

WIDTH = 230


def lit(pixels: np.ndarray, gains: tuple[float, float, float]) -> np.ndarray:
    """The same scene with gains in linear light, in place of sRGB's curve a plain power: (x^2.2 g)^(1/2.2)."""
    return np.rint(255 * np.clip(pixels / 255 * np.array(gains) ** (1 / 2.2), 0, 1)).astype(np.uint8)


def difference(one: np.ndarray, other: np.ndarray) -> float:
    """Mean ΔE00."""
    labs = [oklab_to_lab(xyz_to_oklab(SRGB.to_xyz(pixels.reshape(-1, 3) / 255))) for pixels in (one, other)]
    return float(delta_e_2000(*labs).mean())


def scene(name: str) -> np.ndarray:
    return photograph("coffee", step=1)[:300, PLACES[name] : PLACES[name] + WIDTH]


@pytest.fixture
def order(tmp_path: Path) -> MatchOrder:
    (tmp_path / "pan").mkdir()
    for name in ("b", "c", "d"):
        Image.fromarray(lit(scene(name), CASTS[name])).save(tmp_path / "pan" / f"{name}.png")
    Image.fromarray(scene("a")).save(tmp_path / "hero.png")
    return MatchOrder(inputs=[tmp_path / "pan"], to=[tmp_path / "hero.png"], out=tmp_path / "out", settings=Settings())


def error(folder: Path, name: str) -> float:
    with Image.open(folder / f"{name}.png") as image:
        return difference(np.asarray(image), scene(name))


def test_a_picture_that_shares_nothing_with_the_reference_comes_right_by_its_neighbours(order: MatchOrder) -> None:
    record = match_files(order)
    match_files(attrs.evolve(order, out=order.out.with_name("single"), joint=False))

    for name in ("b", "c", "d"):
        before = difference(lit(scene(name), CASTS[name]), scene(name))
        assert error(order.out, name) < 0.2 * before
    assert error(order.out.with_name("single"), "d") > 3 * error(order.out, "d")
    assert record.overview["groups"] == [["b.png", "c.png", "d.png"]]
    assert record.series == {"joint": True, "time_lapse": False}
    assert check_folder(order.out, recreated="d.png") == []


def test_without_a_reference_they_are_brought_to_one_of_them(order: MatchOrder) -> None:
    record = match_files(attrs.evolve(order, to=[]))

    still = [entry for entry in record.entries if entry.numbers["evidence"]["basis"] == "none"]
    assert len(still) == 1
    assert Path(still[0].source.path).name in record.sentences[0]
    assert (order.out / Path(still[0].source.path).name).read_bytes() == Path(still[0].source.path).read_bytes()


def test_a_plan_tells_the_groups_and_writes_nothing(order: MatchOrder) -> None:
    Image.fromarray(photograph("rocket")[:300, :300]).save(order.inputs[0] / "x.png")

    plan = plan_match(order)

    assert plan.groups == [["b.png", "c.png", "d.png"], ["x.png"]]
    assert any("x.png" in sentence for sentence in plan.sentences)
    assert not order.out.exists()


def test_other_aims_and_two_pictures_are_no_series(order: MatchOrder) -> None:
    adopted = match_files(attrs.evolve(order, settings=Settings(aim=Aim.ADOPT)))
    (order.inputs[0] / "d.png").unlink()
    two = match_files(attrs.evolve(order, out=order.out.with_name("two")))

    assert adopted.series["joint"] is two.series["joint"] is False


def test_a_broken_and_a_gray_picture_do_not_stop_the_series(order: MatchOrder) -> None:
    (order.inputs[0] / "broken.png").write_bytes(b"\x89PNG\r\n\x1a\n")
    Image.fromarray(scene("c")).convert("L").save(order.inputs[0] / "gray.png")

    record = match_files(order)

    assert len(record.entries) == 4
    assert len(record.failures) == 1
    assert error(order.out, "d") < 2


def test_a_time_lapse_follows_no_reference(order: MatchOrder) -> None:
    with pytest.raises(InputError, match="leave out --to"):
        match_files(attrs.evolve(order, time_lapse=True))


def test_a_time_lapse_loses_its_flicker_and_keeps_its_course(tmp_path: Path) -> None:
    """A patch of a still scene in light that falls evenly, with a random exposure a frame."""
    (tmp_path / "lapse").mkdir()
    rng = np.random.default_rng(11)
    course, flicker = np.linspace(1.0, 0.6, 20), np.exp(rng.normal(0, 0.08, 20))
    for number, gain in enumerate(0.8 * course * flicker):
        Image.fromarray(lit(photograph("coffee")[:150, :200], (gain,) * 3)).save(
            tmp_path / "lapse" / f"{number:02}.png"
        )
    order = MatchOrder(inputs=[tmp_path / "lapse"], to=[], out=tmp_path / "out", settings=Settings(), time_lapse=True)

    match_files(order)

    light = []
    for number in range(20):
        with Image.open(tmp_path / "out" / f"{number:02}.png") as image:
            light.append(np.log((np.asarray(image)[60:90, 60:90] / 255.0).mean() ** 2.2))
    wanted = np.log(course)
    off = np.array(light) - wanted
    assert np.std(off) < 0.2 * np.std(np.log(flicker))
    slope, true_slope = (np.polyfit(np.arange(20), values, 1)[0] for values in (light, wanted))
    assert slope == pytest.approx(true_slope, rel=0.1)


def test_the_record_of_a_series_is_json(order: MatchOrder) -> None:
    match_files(order)

    overview = json.loads((order.out / "record.json").read_text())["overview"]

    assert overview["links"] >= 3
    assert overview["outliers_of_series"] == []
