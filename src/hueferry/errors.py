"""Everything hueferry raises on purpose.

HueferryError
├── InputError          the caller's fault: exit code 2
│   ├── PictureError    a file could not be read as a picture
│   ├── RefusedError    a file was understood, and cannot be done without loss or danger
│   ├── MapFileError    a file could not be read as a map
│   ├── PaletteError    a palette file or a set of colours is not a palette
│   └── OutputError     nothing can be written there, or a file would be overwritten
└── SolverError         ours: exit code 3
    └── NotConverged    the iteration limit came first

Errors cross to worker processes, so `args` always holds everything the constructor needs.
"""

from __future__ import annotations

from pathlib import Path


class HueferryError(Exception):
    """Root of every error raised on purpose."""


class InputError(HueferryError):
    """The caller asked for something that cannot be done as asked."""


class PictureError(InputError):
    """A file could not be read as a picture."""

    def __init__(self, path: Path, reason: str) -> None:
        super().__init__(path, reason)
        self.path, self.reason = path, reason

    def __str__(self) -> str:
        return f"{self.path}: {self.reason}"


class RefusedError(PictureError):
    """A picture was understood, but going on would lose or endanger something; the reason says the way round."""


class MapFileError(InputError):
    """A file could not be read as a map."""

    def __init__(self, path: Path, reason: str) -> None:
        super().__init__(path, reason)
        self.path, self.reason = path, reason

    def __str__(self) -> str:
        return f"{self.path}: {self.reason}"


class PaletteError(InputError):
    """Colours and weights, or the file that holds them, are not a palette."""


class OutputError(InputError):
    """Nothing can be written at a path, or something that must stay would be overwritten."""

    def __init__(self, path: Path, reason: str) -> None:
        super().__init__(path, reason)
        self.path, self.reason = path, reason

    def __str__(self) -> str:
        return f"{self.path}: {self.reason}"


class SolverError(HueferryError):
    """A solver could not return a plan that it can vouch for."""


class NotConverged(SolverError):  # noqa: N818 - reads as the state it reports
    """The iteration limit left more mass misplaced than the caller accepts."""

    def __init__(self, solver: str, iterations: int, misplaced: float, tolerance: float) -> None:
        super().__init__(solver, iterations, misplaced, tolerance)
        self.solver, self.iterations, self.misplaced, self.tolerance = solver, iterations, misplaced, tolerance

    def __str__(self) -> str:
        return (
            f"the {self.solver} solver left {self.misplaced:.3g} of the mass misplaced after {self.iterations} "
            f"iterations, and {self.tolerance:.3g} was asked for; allow more iterations or more blur"
        )
