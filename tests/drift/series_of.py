"""Synthetic devices: weekly control frames of a scanner that scatters, and may drift."""

from __future__ import annotations

from datetime import UTC, datetime, timedelta

import numpy as np

from hueferry.drift.reading import Reading

WEEKS_A_MONTH = 30.44 / 7
SCATTER = 0.2  # ΔE*ab in each of L*, a*, b*, from one control frame to the next
YELLOWING = np.array([-0.3, 0.1, 0.95])
START = datetime(2026, 1, 5, 9, 0, tzinfo=UTC)


def readings(seed: int, weeks: int, *, monthly: float = 0.0, begin: int = 0, device: str = "scanner") -> list[Reading]:
    """Readings of `weeks` weeks, drifting by `monthly` ΔE*ab a month from week `begin` on."""
    rng = np.random.default_rng(seed)
    direction = YELLOWING / np.linalg.norm(YELLOWING)
    made = []
    for week in range(weeks):
        shift = np.array([0.4, -0.1, 0.3]) + rng.normal(scale=SCATTER, size=3)
        shift = shift + direction * monthly * max(week - begin, 0) / WEEKS_A_MONTH
        when = START + timedelta(weeks=week)
        lightness, a, b = (float(value) for value in shift)
        made.append(Reading(when, device, f"{week}.tif", "standard", lightness, a, b, float(np.linalg.norm(shift))))
    return made
