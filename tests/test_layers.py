"""Imports follow the way of the data in one direction only, and a third-party package has one home."""

from __future__ import annotations

import ast
from collections.abc import Iterator
from pathlib import Path

import pytest

import hueferry

PACKAGE = Path(hueferry.__file__).parent

LAYERS = (
    "errors",
    "arrays",
    "threads",
    "picture",
    "colour",
    "files",
    "palettes",
    "transport",
    "maps",
    "measure",
    "evidence",
    "tables",
    "applying",
    "fitting",
    "record",
    "slides",
    "series",
    "drift",
    "reports",
    "api",
    "map_jobs",
    "jobs",
    "cli",
)
SAMPLES_MAY_USE = {"errors", "arrays", "picture", "colour", "files", "samples"}

HOMES = {
    "ot": {"transport"},
    "tifffile": {"files", "slides"},
    "imagecodecs": {"files", "slides", "colour"},
    "pyjpegxl": {"files"},
    "OpenEXR": {"files"},
    "Imath": {"files"},
    "pi_heif": {"files"},
    "PIL": {"files", "colour", "samples"},
    "PyOpenColorIO": {"tables", "applying"},
    "cv2": {"evidence", "palettes", "files"},
    "openslide": {"slides"},
    "pydicom": {"slides"},
    "zarr": {"slides"},
    "dask": {"series"},
    "distributed": {"series"},
    "typer": {"cli"},
    "rich": {"cli"},
    "jinja2": {"reports"},
    "sqlite3": {"series", "drift"},
}


def _layer(path: Path) -> str:
    return path.relative_to(PACKAGE).parts[0].removesuffix(".py")


def _imports(path: Path) -> Iterator[tuple[int, str]]:
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            yield from ((node.lineno, alias.name) for alias in node.names)
        elif isinstance(node, ast.ImportFrom) and node.module:
            yield node.lineno, node.module
            if node.module == "hueferry":
                yield from ((node.lineno, f"hueferry.{alias.name}") for alias in node.names)


MODULES = sorted(path for path in PACKAGE.rglob("*.py") if path.name not in ("__init__.py", "__main__.py"))


@pytest.mark.parametrize("path", MODULES, ids=lambda path: str(path.relative_to(PACKAGE)))
def test_imports_never_point_back(path: Path) -> None:
    layer = _layer(path)
    for line, name in _imports(path):
        if not name.startswith("hueferry."):
            continue
        target = name.split(".")[1]
        if layer == "samples":
            assert target in SAMPLES_MAY_USE, f"{path}:{line} samples may not use {target}"
        elif target == "samples":
            assert layer in ("jobs", "cli"), f"{path}:{line} only jobs and cli may use samples"
        elif target in LAYERS:
            assert LAYERS.index(target) <= LAYERS.index(layer), f"{path}:{line} {layer} may not import {target}"


@pytest.mark.parametrize("path", MODULES, ids=lambda path: str(path.relative_to(PACKAGE)))
def test_a_third_party_package_stays_at_home(path: Path) -> None:
    for line, name in _imports(path):
        homes = HOMES.get(name.split(".")[0])
        assert homes is None or _layer(path) in homes, f"{path}:{line} {name} belongs in {homes}"


def test_every_module_lies_in_a_known_layer() -> None:
    assert {_layer(path) for path in MODULES} <= {*LAYERS, "samples", "errors", "arrays", "picture", "api"}
