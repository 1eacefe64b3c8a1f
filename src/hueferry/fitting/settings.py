"""What a caller may decide about a fit."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from enum import StrEnum
from typing import Any

import attrs

from hueferry.errors import InputError
from hueferry.maps.method import Method


class Aim(StrEnum):
    """What a correction is for."""

    AGREE = "agree"
    """Remove differences of light, camera and stain; leave differences of content alone."""
    ADOPT = "adopt"
    """Take on the reference's palette fully."""


class Only(StrEnum):
    """The part of a correction that is wanted."""

    TONE = "tone"
    CHROMA = "chroma"


@attrs.frozen(kw_only=True)
class Settings:
    """Settings of a fit; equal settings and equal inputs give equal bytes.

    Attributes:
        aim: what the correction is for.
        method: the transport method; None chooses (`entropic` under adopt, the evidence's own map under agree).
        strength: share of the way to go, 0 … 1, along the displacement interpolation.
        only: correct tone or chroma alone; None corrects both.
        keep_neutrals: leave the gray axis without colour.
        max_gain: largest stretch of the table on occupied cells, in code values; None means 2.5 for 8-bit sources
            and 4 for deeper ones.
        table_size: nodes along an axis of the table; None takes 33, or 65 where the table error asks for it.
        seed: seed of every draw.
    """

    aim: Aim = Aim.AGREE
    method: Method | None = None
    strength: float = attrs.field(default=1.0, validator=[attrs.validators.ge(0.0), attrs.validators.le(1.0)])
    only: Only | None = None
    keep_neutrals: bool = False
    max_gain: float | None = attrs.field(default=None, validator=attrs.validators.optional(attrs.validators.ge(1.0)))
    table_size: int | None = None
    seed: int = 0

    def gain_cap(self, bits: int) -> float:
        """Return the largest gain accepted for a source of `bits` significant bits a channel."""
        if self.max_gain is not None:
            return self.max_gain
        return 2.5 if bits <= 8 else 4.0

    @classmethod
    def from_dict(cls, values: Mapping[str, Any]) -> Settings:
        """Return the settings that `as_dict` gave.

        Raises:
            InputError: these are not settings.
        """
        kinds: Mapping[str, Callable[[Any], Any]] = {"aim": Aim, "method": Method, "only": Only}
        try:
            return cls(
                **{
                    name: kinds[name](value) if name in kinds and value is not None else value
                    for name, value in values.items()
                }
            )
        except (TypeError, ValueError) as error:
            raise InputError(f"these are not the settings of a fit: {error}") from error

    def as_dict(self) -> dict[str, Any]:
        """Return the settings as JSON values."""
        return {name: (value.value if isinstance(value, StrEnum) else value) for name, value in _items(self)}


def _items(settings: Settings) -> list[tuple[str, Any]]:
    return [(field.name, getattr(settings, field.name)) for field in attrs.fields(type(settings))]
