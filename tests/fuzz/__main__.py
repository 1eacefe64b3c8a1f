"""Run the targets for as long as one likes: `python -m fuzz [target] [examples]`."""

from __future__ import annotations

import sys

from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from fuzz.seeds import SEEDS
from fuzz.targets import NAMES, broken, decode, edits


def run(name: str, examples: int) -> None:
    """Look for a file that one reader takes badly."""

    @settings(max_examples=examples, deadline=None, suppress_health_check=list(HealthCheck), database=None)
    @given(st.sampled_from(SEEDS[name]), edits)
    def search(seed: bytes, changes: list[tuple[str, int, int]]) -> None:
        decode(name, broken(seed, changes))

    search()


if __name__ == "__main__":
    chosen = [word for word in sys.argv[1:] if word in NAMES] or list(NAMES)
    count = next((int(word) for word in sys.argv[1:] if word.isdigit()), 10_000)
    for target in chosen:
        run(target, count)
        sys.stdout.write(f"{target}: {count:,} files, none taken badly\n")
