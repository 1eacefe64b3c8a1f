"""What all readers of slides have alike: facts found once, when the file is opened."""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Sequence

import attrs

from hueferry.arrays import Pixels
from hueferry.picture import Encoding, Window
from hueferry.slides.source import SlideFacts


@attrs.frozen
class Opened:
    """What is known of a slide once it is open.

    Attributes:
        levels: rows and columns of every level, largest first.
        encoding: by the profile of the file; sRGB where there is none.
        bits: significant bits a channel.
        facts: what else the file says.
    """

    levels: Sequence[tuple[int, int]]
    encoding: Encoding
    bits: int
    facts: SlideFacts


class FileSlide(ABC):
    """A `SlideSource` whose facts stand; a reader says how to open it and how to read a window of a level."""

    _opened: Opened

    @property
    def shape(self) -> tuple[int, int]:
        """Rows and columns at full size."""
        return self._opened.levels[0]

    @property
    def levels(self) -> Sequence[tuple[int, int]]:
        """Rows and columns of every level, largest first."""
        return self._opened.levels

    @property
    def encoding(self) -> Encoding:
        """How code values stand for colour."""
        return self._opened.encoding

    @property
    def bits(self) -> int:
        """Significant bits a channel."""
        return self._opened.bits

    @property
    def facts(self) -> SlideFacts:
        """What else the file says."""
        return self._opened.facts

    def read(self, window: Window) -> Pixels:
        """Return a window of the full size."""
        return self.read_level(0, window)

    @abstractmethod
    def read_level(self, level: int, window: Window) -> Pixels:
        """Return a window of a level."""

    def close(self) -> None:  # noqa: B027 - a reader that holds nothing has nothing to let go of
        """Let go of the file."""
