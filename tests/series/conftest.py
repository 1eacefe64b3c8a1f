"""One rendered series for all tests of this folder."""

from __future__ import annotations

import pytest

from series.rendered import Shot, shoot


@pytest.fixture(scope="session")
def shots() -> list[Shot]:
    """Take 24 frames of one scene with changing framing; the first is the reference."""
    return shoot(seed=11)
