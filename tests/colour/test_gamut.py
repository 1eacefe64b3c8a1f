"""Laws of gamut compression."""

from __future__ import annotations

import numpy as np
import pytest

from hueferry.colour.encoding import DISPLAY_P3, SRGB, MatrixEncoding, from_oklab, to_oklab
from hueferry.colour.gamut import compress

INSIDE = to_oklab(SRGB, np.random.default_rng(1).uniform(0, 1, (4000, 3)))


def test_no_change_stays_no_change_up_to_the_very_edge() -> None:
    corners = to_oklab(SRGB, np.stack(np.meshgrid(*[[0.0, 0.5, 1.0]] * 3), axis=-1).reshape(-1, 3))
    colours = np.concatenate([INSIDE, corners])

    np.testing.assert_allclose(compress(colours, SRGB, source=colours), colours, atol=1e-9)


@pytest.mark.parametrize("encoding", [SRGB, DISPLAY_P3], ids=lambda e: e.name)
def test_whatever_goes_in_comes_out_inside(encoding: MatrixEncoding) -> None:
    wild = np.random.default_rng(2).uniform([-0.2, -0.6, -0.6], [1.5, 0.6, 0.6], (4000, 3))

    codes = from_oklab(encoding, compress(wild, encoding, source=INSIDE))

    outside = np.maximum(-codes, codes - 1).max(axis=1)
    assert np.quantile(outside, 0.95) < 1e-3
    assert np.quantile(outside, 0.99) < 1e-2


def test_more_chroma_in_is_never_less_chroma_out() -> None:
    source = np.repeat([[0.6, 0.02, 0.01]], 400, axis=0)
    ray = np.stack([np.full(400, 0.6), np.linspace(0, 0.5, 400), np.linspace(0, 0.2, 400)], axis=1)

    chroma = np.hypot(*compress(ray, SRGB, source=source)[:, 1:].T)

    assert (np.diff(chroma) > -1e-12).all()
    assert np.diff(chroma).max() < 2 * np.hypot(0.5, 0.2) / 399


def test_compression_sets_in_without_a_kink() -> None:
    """Its slope is 1 at the knee and falls from there, never below 0: no edge shows in a gradient."""
    ray = np.stack([np.full(4000, 0.6), np.linspace(0, 0.4, 4000), np.zeros(4000)], axis=1)

    chroma = compress(ray, SRGB, source=np.repeat([[0.6, 0.01, 0.0]], 4000, axis=0))[:, 1]
    slope = np.diff(chroma) / np.diff(ray[:, 1])

    assert slope[0] == pytest.approx(1)
    assert np.abs(np.diff(slope)).max() < 0.01
    assert slope.min() >= 0


def test_neutrals_keep_no_colour_and_rise() -> None:
    grays = np.zeros((300, 3))
    grays[:, 0] = np.linspace(0, 1.4, 300)

    out = compress(grays, SRGB, source=np.repeat([[0.5, 0.0, 0.0]], 300, axis=0))

    np.testing.assert_allclose(out[:, 1:], 0, atol=1e-7)
    assert (np.diff(out[:, 0]) >= -1e-12).all()
    assert out[:, 0].max() <= 1 + 1e-9


def test_hue_is_kept_where_clipping_turns_it() -> None:
    """What clipping channel by channel does to hue is the reason for all this."""
    rng = np.random.default_rng(3)
    hue, chroma = rng.uniform(-np.pi, np.pi, 2000), rng.uniform(0.2, 0.35, 2000)
    wild = np.stack([rng.uniform(0.35, 0.85, 2000), chroma * np.cos(hue), chroma * np.sin(hue)], axis=1)

    def turned(colours: np.ndarray) -> float:
        out = np.arctan2(colours[:, 2], colours[:, 1])
        return float(np.abs((out - hue + np.pi) % (2 * np.pi) - np.pi).mean())

    clipped = to_oklab(SRGB, np.clip(from_oklab(SRGB, wild), 0, 1))

    assert turned(clipped) > 0.05
    assert turned(compress(wild, SRGB)) < 1e-9
