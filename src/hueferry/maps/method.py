"""The names of the transport methods, apart from their code: the command line lists them before NumPy is loaded."""

from __future__ import annotations

from enum import StrEnum


class Method(StrEnum):
    """How a map is computed from two palettes; `maps.methods` has the fitter of each."""

    GAUSSIAN = "gaussian"
    SLICED = "sliced"
    ENTROPIC = "entropic"
    EXACT = "exact"
    CHANNELS = "channels"
    MIXTURE = "mixture"
