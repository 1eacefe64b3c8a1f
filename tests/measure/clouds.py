"""Clouds of colours for tests of measures."""

from __future__ import annotations

import numpy as np

from hueferry.colour.spaces import lab_to_oklab
from hueferry.measure.cloud import LabCloud
from hueferry.palettes.palette import Palette


def cloud(lab: np.ndarray, weights: np.ndarray | None = None) -> LabCloud:
    lab = np.asarray(lab, dtype=float)
    return LabCloud(lab, np.full(len(lab), 1 / len(lab)) if weights is None else weights, 0.0)


def palette(lab: np.ndarray, weights: np.ndarray | None = None) -> Palette:
    lab = np.asarray(lab, dtype=float)
    return Palette(lab_to_oklab(lab), np.full(len(lab), 1 / len(lab)) if weights is None else weights)


def scattered(seed: int, size: int = 60, *, centre=(50.0, 5.0, -5.0), scale=(12.0, 8.0, 6.0)) -> np.ndarray:
    rng = np.random.default_rng(seed)
    return np.array(centre) + rng.normal(size=(size, 3)) * np.array(scale)


def weights_of(seed: int, size: int = 60) -> np.ndarray:
    return np.random.default_rng(seed + 1000).dirichlet(np.ones(size))
