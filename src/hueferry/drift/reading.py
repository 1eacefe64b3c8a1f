"""One reading of a control frame: how far a device is from its reference, signed."""

from __future__ import annotations

import math
from datetime import UTC, datetime

import attrs

from hueferry.arrays import Mask
from hueferry.errors import InputError
from hueferry.measure.cloud import LabCloud
from hueferry.measure.transport_costs import bracketed_w2
from hueferry.palettes.build import palette_of
from hueferry.palettes.palette import Palette
from hueferry.palettes.reduce import thin
from hueferry.picture import Picture

_W2_COLOURS = 128


def _finite(_: object, attribute: attrs.Attribute[float], value: object) -> None:
    if not isinstance(value, int | float) or not math.isfinite(value):
        raise InputError(f"{attribute.name} of a reading must be a finite number, not {value!r}")


def _not_negative(instance: object, attribute: attrs.Attribute[float], value: object) -> None:
    _finite(instance, attribute, value)
    if isinstance(value, int | float) and value < 0:
        raise InputError(f"{attribute.name} of a reading must not be negative, not {value!r}")


def _as_utc(when: datetime) -> datetime:
    moment = when.replace(tzinfo=UTC) if when.tzinfo is None else when.astimezone(UTC)
    return moment.replace(microsecond=0)


@attrs.frozen
class Reading:
    """How a control frame differed from its reference.

    Attributes:
        when: when it was taken, UTC, to the second.
        device: what took it, as its owner calls it.
        picture: name of the control frame's file.
        reference: what it was compared with.
        l: L* of the frame's mean colour less that of the reference; positive is lighter.
        a: the same for a*; positive is redder.
        b: the same for b*; positive is yellower.
        w2: W2 to the reference, ΔE*ab (D50), never negative.
        stain_angles: turn of the first and second stain vector against the reference in degrees, for slides.
    """

    when: datetime = attrs.field(converter=_as_utc)
    device: str
    picture: str
    reference: str
    l: float = attrs.field(validator=_finite)  # noqa: E741 - L*, a*, b* are called so
    a: float = attrs.field(validator=_finite)
    b: float = attrs.field(validator=_finite)
    w2: float = attrs.field(validator=_not_negative)
    stain_angles: tuple[float, float] | None = attrs.field(default=None)

    @stain_angles.validator
    def _check_angles(self, attribute: attrs.Attribute[tuple[float, float] | None], value: object) -> None:
        for angle in value if isinstance(value, tuple) else ():
            _finite(self, attribute, angle)  # type: ignore[arg-type]


@attrs.frozen
class Labels:
    """What a reading is called by.

    Attributes:
        device: what took the frame.
        picture: name of the control frame's file.
        reference: name of what it is compared with.
        when: when it was taken; None means now.
    """

    device: str = ""
    picture: str = ""
    reference: str = ""
    when: datetime | None = None


def measure_reading(
    picture: Picture,
    reference: Palette,
    labels: Labels,
    *,
    mask: Mask | None = None,
    stain_angles: tuple[float, float] | None = None,
) -> Reading:
    """Measure a control frame against its reference.

    Both must show the same thing: then a difference of their mean colours is the device's, not the content's.

    Args:
        picture: the control frame.
        reference: palette of the reference frame.
        labels: names and date that go with the reading.
        mask: (rows, columns) of the picture, true where pixels count.
        stain_angles: turn of both stain vectors in degrees, where they were measured.

    Raises:
        InputError: no pixel was counted.
    """
    palette = palette_of(picture, mask=mask)
    frame, standard = LabCloud.of(palette), LabCloud.of(reference)
    shift = frame.mean - standard.mean
    w2 = bracketed_w2(LabCloud.of(thin(palette, _W2_COLOURS)), LabCloud.of(thin(reference, _W2_COLOURS)))
    return Reading(
        when=labels.when or datetime.now(UTC),
        device=labels.device,
        picture=labels.picture or (picture.path.name if picture.path else ""),
        reference=labels.reference,
        l=float(shift[0]),
        a=float(shift[1]),
        b=float(shift[2]),
        w2=w2.value,
        stain_angles=stain_angles,
    )
