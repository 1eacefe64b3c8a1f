"""Saved maps: ours to the bit, understood by other software, and refused where they are broken."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import PyOpenColorIO
import pytest

from hueferry.errors import MapFileError
from hueferry.tables.clf import clf_text, read_clf
from hueferry.tables.lookup import look_up
from hueferry.tables.table import Table


def table(*, size: int = 9, curved: bool = False) -> Table:
    """A table that differs in every axis, so that a swapped one shows."""
    rng = np.random.default_rng(1)
    nodes = np.stack(np.meshgrid(*[np.linspace(0, 1, size)] * 3, indexing="ij"), axis=-1)
    lattice = nodes * [0.9, 0.8, 1.05] + rng.normal(0, 0.01, nodes.shape)
    curves = np.stack([np.linspace(0, 1, 129) ** power for power in (0.8, 1.0, 1.3)])
    return Table(lattice, curves if curved else None)


def colours() -> np.ndarray:
    rng = np.random.default_rng(2)
    grays = np.repeat(np.linspace(0, 1, 4096)[:, None], 3, axis=1)
    corners = np.array(np.meshgrid([0, 1], [0, 1], [0, 1])).reshape(3, -1).T
    return np.concatenate([grays, corners, rng.uniform(-0.1, 1.1, (200_000, 3))]).astype(np.float32)


@pytest.mark.parametrize("curved", [False, True])
def test_ours_comes_back_to_the_bit(curved: bool, tmp_path: Path) -> None:
    made = table(curved=curved)
    (tmp_path / "m.clf").write_text(clf_text(made, encoding="sRGB", facts={"who": "<&\"'>", "why": "a\nb"}))

    again = read_clf(tmp_path / "m.clf")

    np.testing.assert_array_equal(again.lattice, made.lattice)
    if made.curves is not None:
        np.testing.assert_array_equal(again.curves, made.curves)


@pytest.mark.parametrize("curved", [False, True])
def test_opencolorio_computes_what_we_compute(curved: bool, tmp_path: Path) -> None:
    """200,000 colours, neutrals and corners too, also beyond 0 … 1: within 1e-5 of our own NumPy look-up."""
    made = table(size=17, curved=curved)
    path = tmp_path / f"m-{curved}.clf"
    path.write_text(clf_text(made, encoding="sRGB"))
    processor = (
        PyOpenColorIO.Config.CreateRaw()
        .getProcessor(PyOpenColorIO.FileTransform(src=str(path)))
        .getDefaultCPUProcessor()
    )

    theirs = colours()
    processor.applyRGB(theirs)

    np.testing.assert_allclose(theirs, look_up(made, colours().astype(float)), atol=1e-5)


HAND_MADE = """<?xml version="1.0" encoding="UTF-8"?>
<ProcessList id="hand" compCLFversion="3.0">
  <LUT3D inBitDepth="32f" outBitDepth="32f" interpolation="tetrahedral">
    <Array dim="2 2 2 3">
      0.00 0.00 0.00  0.05 0.02 0.90  0.10 0.80 0.06  0.07 0.85 0.95
      0.90 0.04 0.03  0.92 0.09 0.88  0.96 0.91 0.11  1.00 1.00 1.00
    </Array>
  </LUT3D>
</ProcessList>
"""


def test_a_table_made_by_hand_is_read_with_blue_fastest(tmp_path: Path) -> None:
    """A 2 × 2 × 2 table after Academy S-2014-006, tetrahedral; values by hand, OpenColorIO agrees to 1e-7."""
    (tmp_path / "hand.clf").write_text(HAND_MADE)
    inputs = [[0.25, 0.5, 0.75], [0.75, 0.5, 0.25], [0.2, 0.6, 0.4], [0.6, 0.2, 0.4], [0.5, 0.5, 0.5], [1, 0, 0]]
    outputs = [
        [0.28, 0.4675, 0.7125],
        [0.715, 0.4875, 0.285],
        [0.234, 0.53, 0.402],
        [0.564, 0.226, 0.382],
        [0.5, 0.5, 0.5],
        [0.9, 0.04, 0.03],
    ]

    read = read_clf(tmp_path / "hand.clf")

    np.testing.assert_allclose(look_up(read, np.array(inputs, dtype=float)), outputs, atol=2e-6)


def test_the_process_list_of_somebody_else_is_sampled(tmp_path: Path) -> None:
    """A matrix is affine, so a lattice holds it exactly; the values follow by hand."""
    text = """<?xml version="1.0" encoding="UTF-8"?>
<ProcessList id="matrix" compCLFversion="3.0">
  <Matrix inBitDepth="32f" outBitDepth="32f">
    <Array dim="3 4">1.2 .1 -.3 .05 -.05 1 .05 -.01 0 -.2 1.2 .02</Array>
  </Matrix>
</ProcessList>
"""
    (tmp_path / "matrix.clf").write_text(text)

    result = look_up(read_clf(tmp_path / "matrix.clf"), np.array([[0.3, 0.5, 0.7]]))

    np.testing.assert_allclose(result, [[0.25, 0.51, 0.76]], atol=1e-6)


@pytest.mark.parametrize(
    ("damage", "complaint"),
    [
        (lambda t: t.replace("</LUT3D>", ""), "not CLF"),
        (lambda _: "<html></html>", "its root is html"),
        (lambda t: t.replace("9 9 9 3", "9 9 8 3"), "promises"),
        (lambda t: t.replace('9 9 9 3">\n', '9 9 9 3">\nnan ', 1).replace(" 0.", " ", 1), "promises|finite"),
        (lambda t: t.replace("-0.0", "0.0", 1), "checksum"),
        (lambda t: '<!DOCTYPE x [<!ENTITY a "b">]>' + t.split("\n", 1)[1], "not CLF"),
        (lambda t: t.replace('dim="9 9 9 3"', 'dim="9 9 9 banana"'), "no number"),
    ],
)
def test_a_broken_map_is_refused_with_its_reason(damage: object, complaint: str, tmp_path: Path) -> None:
    text = damage(clf_text(table(), encoding="sRGB"))
    (tmp_path / "m.clf").write_text(text)

    with pytest.raises(MapFileError, match=complaint):
        read_clf(tmp_path / "m.clf")


def test_a_missing_map_is_refused(tmp_path: Path) -> None:
    with pytest.raises(MapFileError, match="no such file"):
        read_clf(tmp_path / "none.clf")


def test_a_thousand_mutated_maps_are_tables_or_typed_errors(tmp_path: Path) -> None:
    rng = np.random.default_rng(3)
    whole = [clf_text(table(size=2), encoding="sRGB").encode(), HAND_MADE.encode()]
    for number in range(1000):
        data = bytearray(whole[number % 2])
        for _ in range(int(rng.integers(1, 5))):
            data[int(rng.integers(0, len(data)))] = int(rng.integers(0, 256))
        path = tmp_path / f"{number}.clf"  # OpenColorIO remembers files by their path
        path.write_bytes(bytes(data[: len(data) if rng.random() < 0.7 else int(rng.integers(1, len(data)))]))
        try:
            found = read_clf(path)
        except MapFileError:
            continue
        assert np.isfinite(found.lattice).all()


@pytest.mark.parametrize("number", ["nan", "inf", "-inf", "1e99"])
def test_numbers_of_others_that_are_not_finite_are_refused(tmp_path: Path, number: str) -> None:
    path = tmp_path / "other.clf"
    path.write_text(
        '<?xml version="1.0" encoding="UTF-8"?>\n<ProcessList id="a" compCLFversion="3.0">'
        '<LUT1D inBitDepth="32f" outBitDepth="32f">'
        f'<Array dim="2 1">{number} 1</Array></LUT1D></ProcessList>\n',
        encoding="utf-8",
    )
    with pytest.raises(MapFileError, match="not finite"):
        read_clf(path)


def test_a_file_that_is_written_anew_is_read_anew(tmp_path: Path) -> None:
    """OpenColorIO remembers files by their path; a map that changed under its name must not come back as it was."""
    path = tmp_path / "gain.clf"
    found = []
    for gain in ("0.5", "0.25"):
        matrix = f"{gain} 0 0  0 {gain} 0  0 0 {gain}"
        path.write_text(
            '<?xml version="1.0" encoding="UTF-8"?><ProcessList id="gain" compCLFversion="3.0">'
            f'<Matrix inBitDepth="32f" outBitDepth="32f"><Array dim="3 3">{matrix}</Array></Matrix></ProcessList>'
        )
        found.append(float(look_up(read_clf(path), np.full((1, 3), 0.8))[0, 0]))

    np.testing.assert_allclose(found, [0.4, 0.2], atol=1e-6)
