"""Files that mean harm, or were damaged: a map or a sentence, never a hang, a crash or a number that is none."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from hueferry.errors import InputError, MapFileError
from hueferry.tables.cdl_files import read_decision_list
from hueferry.tables.clf import clf_text, read_clf
from hueferry.tables.lookup import look_up
from hueferry.tables.process import read_process
from hueferry.tables.saved_map import read_map
from hueferry.tables.table import Table
from tables.test_express import CORRECTION, collection
from tables.test_process import FLOAT, NODES, listed

SHORT = ["a curve", "three curves", "range", "matrix 10i to 12i", "linToLog", "monCurveFwd", "Fwd", "RevNoClamp"]
OURS = clf_text(
    Table(np.random.default_rng(1).uniform(0, 1, (2, 2, 2, 3)), np.stack([[0.0, 0.4, 1.0]] * 3)), encoding="sRGB"
)
WHOLE = {
    "ours.clf": OURS,
    "list.clf": listed("".join(NODES[name].replace('"10i"', '"32f"').replace('"12i"', '"32f"') for name in SHORT[4:])),
    "array.clf": listed(NODES["three curves"]),
    "range.clf": listed(NODES["range"]),
    "one.cc": CORRECTION.format(name="one", power=1.2),
    "many.ccc": collection("one", "two"),
}
COLOURS = np.random.default_rng(2).uniform(-0.5, 1.5, (64, 3))


def mutated(text: str, rng: np.random.Generator) -> bytes:
    """Change bytes, cut pieces out, double them, or swap numbers for strange ones."""
    data = bytearray(text.encode())
    for _ in range(int(rng.integers(1, 5))):
        start, length = int(rng.integers(0, len(data))), int(rng.integers(1, 12))
        kind = int(rng.integers(0, 4))
        if kind == 0:
            data[start] = int(rng.integers(0, 256))
        elif kind == 1:
            del data[start : start + length]
        elif kind == 2:
            data[start:start] = data[start : start + length]
        else:
            strange = [b"nan", b"-1e308", b"1e400", b"0", b"&amp;", b"<a/>", b'" x="', b"99999999999999999999", b"\x00"]
            data[start : start + length] = strange[int(rng.integers(0, len(strange)))]
        data = data or bytearray(b" ")
    return bytes(data)


def results(path: Path) -> np.ndarray:
    if path.name == "ours.clf":
        return look_up(read_clf(path), COLOURS)
    if path.suffix == ".clf":
        return read_process(path)(COLOURS)
    return read_decision_list(path, name="two" if path.suffix == ".ccc" else None).grade(COLOURS)


def test_a_thousand_mutated_maps_are_maps_or_sentences(tmp_path: Path) -> None:
    rng = np.random.default_rng(9)
    refused = 0
    for number in range(1002):
        name = list(WHOLE)[number % len(WHOLE)]
        path = tmp_path / name
        path.write_bytes(mutated(WHOLE[name], rng))
        try:
            assert np.isfinite(results(path)).all()
        except MapFileError as error:
            refused += 1
            sentence = str(error)
            assert sentence.isprintable(), sentence
            assert len(sentence) < 500 + len(str(path))
    assert refused > 500


def test_every_whole_file_is_read(tmp_path: Path) -> None:
    for name, text in WHOLE.items():
        (tmp_path / name).write_text(text, encoding="utf-8")
        assert results(tmp_path / name).shape == COLOURS.shape


BOMB = "".join(f'<!ENTITY e{i} "&e{i - 1};&e{i - 1};&e{i - 1};&e{i - 1};">' for i in range(1, 30))
HOSTILE = {
    "entities": f'<!DOCTYPE a [<!ENTITY e0 "ha">{BOMB}]><ProcessList id="a" compCLFversion="3">&e29;</ProcessList>',
    "a file of this machine": '<!DOCTYPE a [<!ENTITY e SYSTEM "file:///etc/hostname">]><ProcessList>&e;</ProcessList>',
    "promises": listed(f'<LUT1D {FLOAT}><Array dim="65536 65536">1</Array></LUT1D>'),
    "great promises": listed(f'<LUT3D {FLOAT}><Array dim="129 129 129 3">1</Array></LUT3D>'),
    "negative sizes": listed(f'<LUT3D {FLOAT}><Array dim="-2 -2 2 3">1</Array></LUT3D>'),
    "sizes without end": listed(f'<LUT1D {FLOAT}><Array dim="{"9" * 5000} 1">1</Array></LUT1D>'),
    "many nodes": listed(NODES["Fwd"] * 65),
    "depth": "<a>" * 100_000,
    "nothing": "",
    "bytes": "\x00\x01\x02",
    "a program": "import os\nos.abort()\n",
    "a page": "<html><script>alert(1)</script></html>",
}


@pytest.mark.parametrize("suffix", [".clf", ".cc"])
@pytest.mark.parametrize("name", HOSTILE)
def test_hostile_files_are_refused(name: str, suffix: str, tmp_path: Path) -> None:
    path = tmp_path / f"map{suffix}"
    path.write_text(HOSTILE[name], encoding="utf-8")

    with pytest.raises(MapFileError):
        read_map(path)


def test_folders_and_names_that_are_not_there_are_refused(tmp_path: Path) -> None:
    for path in (tmp_path, tmp_path / "none.clf", tmp_path / "none.cc"):
        with pytest.raises(InputError, match=r"folder|no such file"):
            read_map(path)


def test_values_that_32_bits_cannot_hold_stay_within_them(tmp_path: Path) -> None:
    path = tmp_path / "list.clf"
    great = f'<Matrix {FLOAT}><Array dim="3 3">3e38 3e38 3e38 -3e38 3e38 0 0 0 -3e38</Array></Matrix>'
    path.write_text(listed(great * 3 + NODES["Fwd"] + great + NODES["basicRev"]), encoding="utf-8")

    assert (np.abs(read_process(path)(COLOURS)) <= np.finfo(np.float32).max).all()
