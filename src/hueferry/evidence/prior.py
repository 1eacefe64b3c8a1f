"""What is known before looking: how far real changes of light and camera go, centred on no change."""

from __future__ import annotations

from collections.abc import Mapping
from math import log, sqrt
from types import MappingProxyType

import attrs
import numpy as np
from numpy.typing import NDArray

from hueferry.arrays import read_only
from hueferry.evidence.camera import NAMES, SIZE, Parameters

EXPOSURE_STOPS = 0.45
"""Deviation of the exposure between two frames that somebody wants to bring together, in stops."""

METADATA_STOPS = 0.25
"""Deviation of the exposure around what the files' exposure values say, where they agree."""

SPREAD: Mapping[str, float] = MappingProxyType(
    {
        "gain_red": 0.12, "gain_green": 0.12, "gain_blue": 0.12, "shoulder": 0.7, "knee": 0.2, "power": 0.12,
        "bend": 0.02, "lift": 0.01, "chroma": 0.2, "chroma_slope": 0.15, "turn": 0.08, "stretch": 0.03, "shear": 0.03,
        "tone_a": 0.004, "tone_b": 0.004,
    }
)  # fmt: skip
"""One standard deviation of each parameter; the gains' is that of white balance, beside the common exposure."""


@attrs.frozen(eq=False)
class Prior:
    """A Gaussian over the camera parameters.

    Attributes:
        mean: (15,) most plausible change.
        precision: (15, 15) inverse covariance.
    """

    mean: Parameters = attrs.field(converter=read_only)
    precision: NDArray[np.float64] = attrs.field(converter=read_only)

    @property
    def deviations(self) -> Parameters:
        """(15,) standard deviations."""
        return np.sqrt(np.diag(np.linalg.inv(self.precision)))


def no_change(*, source_exposure: float | None = None, reference_exposure: float | None = None) -> Prior:
    """Return the prior; where both files state an exposure value, they are one more witness of the exposure.

    Of one scene in one light, the frame at the higher value is darker by the difference; but an automatic exposure
    follows the light, and then renders alike. The witness stands between the two, with half the difference as doubt.
    """
    deviations = np.array([SPREAD[name] for name in NAMES])
    covariance, mean = np.diag(deviations**2), np.zeros(SIZE)
    stops = EXPOSURE_STOPS
    if source_exposure is not None and reference_exposure is not None:
        darker = reference_exposure - source_exposure
        doubt = METADATA_STOPS**2 + (darker / 2) ** 2
        share = EXPOSURE_STOPS**2 / (EXPOSURE_STOPS**2 + doubt)
        mean[:3] = -share * darker / 2 * log(2)
        stops = EXPOSURE_STOPS * sqrt(1 - share)
    covariance[:3, :3] += (stops * log(2)) ** 2
    return Prior(mean, np.linalg.inv(covariance))
