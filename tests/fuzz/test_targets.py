"""The fuzz targets, briefly on every run and for long with -m slow."""

from __future__ import annotations

import pytest

from fuzz.__main__ import run
from fuzz.seeds import SEEDS
from fuzz.targets import NAMES, decode


@pytest.mark.parametrize("name", NAMES)
def test_seeds_are_whole(name: str) -> None:
    assert all(decode(name, seed) is not None for seed in SEEDS[name])


@pytest.mark.parametrize("name", NAMES)
def test_no_broken_file_is_taken_badly(name: str) -> None:
    run(name, 150)


@pytest.mark.slow
@pytest.mark.parametrize("name", NAMES)
def test_no_broken_file_is_taken_badly_in_the_long_run(name: str, request: pytest.FixtureRequest) -> None:
    if "slow" not in (request.config.getoption("markexpr") or ""):
        pytest.skip("takes minutes: ask for it with -m slow")
    run(name, 20_000)
