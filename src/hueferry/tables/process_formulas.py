"""Process nodes with parameters, out of a file: Exponent, Log and ASC_CDL.

References:
    Academy S-2014-006, Common LUT Format, version 3.0; SMPTE ST 2136-1.
"""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING

from hueferry.errors import MapFileError
from hueferry.tables.cdl import Style
from hueferry.tables.cdl_files import read_grade
from hueferry.tables.formulas import (
    EXPONENT_STYLES,
    LOG_STYLES,
    LineFunction,
    LogCurve,
    PerChannel,
    same_for_all,
)
from hueferry.tables.markup import attribute_number, children, local_name
from hueferry.tables.operations import Operation

if TYPE_CHECKING:
    from xml.etree.ElementTree import Element

_CHANNELS = ("R", "G", "B")
_EXPONENT = frozenset({"exponent", "offset", "channel"})
_LOG = {
    "base": "base",
    "logSideSlope": "log_slope",
    "logSideOffset": "log_offset",
    "linSideSlope": "lin_slope",
    "linSideOffset": "lin_offset",
    "linSideBreak": "lin_break",
    "linearSlope": "straight_slope",
}
_CAMERA = frozenset({"linSideBreak", "linearSlope"})


def read_exponent(path: Path, node: Element, _reads: float, _writes: float) -> Operation:
    """Read an Exponent; a channel without parameters has an exponent of 1."""
    style = _style(path, node, tuple(EXPONENT_STYLES))

    def function(parameters: Element) -> LineFunction:
        _check_known(path, parameters, _EXPONENT)
        exponent = attribute_number(path, parameters, "exponent")
        joined = style.startswith("monCurve")
        if not joined and parameters.get("offset") is not None:
            raise MapFileError(path, f"its Exponent of style {style} has an offset; only monCurve styles have one")
        offset = attribute_number(path, parameters, "offset") if joined else 0.0
        low, high = (1.0, 10.0) if joined else (0.01, 100.0)
        if not low <= exponent <= high or not 0.0 <= offset <= 0.9:
            raise MapFileError(
                path, f"its Exponent has {exponent:g}, offset {offset:g}; {low:g} … {high:g} and 0 … 0.9 are allowed"
            )
        return EXPONENT_STYLES[style](exponent, offset)

    return _by_channel(path, node, "ExponentParams", function, missing=EXPONENT_STYLES[style](1.0, 0.0))


def read_log(path: Path, node: Element, _reads: float, _writes: float) -> Operation:
    """Read a Log; pure logarithms have no parameters."""
    style = _style(path, node, tuple(LOG_STYLES))
    if "og2" in style or "og10" in style:
        if next(children(node, "LogParams"), None) is not None:
            raise MapFileError(path, f"its Log of style {style} has parameters, and pure logarithms have none")
        return same_for_all(LOG_STYLES[style](LogCurve()))

    def function(parameters: Element) -> LineFunction:
        return LOG_STYLES[style](_log_curve(path, parameters, is_camera=style.startswith("camera")))

    return _by_channel(path, node, "LogParams", function, missing=None)


def _log_curve(path: Path, parameters: Element, *, is_camera: bool) -> LogCurve:
    allowed = frozenset(_LOG) | {"channel"}
    _check_known(path, parameters, allowed if is_camera else allowed - _CAMERA)
    if is_camera:
        attribute_number(path, parameters, "linSideBreak")
    given = {name: attribute_number(path, parameters, name) for name in _LOG if parameters.get(name) is not None}
    curve = LogCurve(**{_LOG[name]: value for name, value in given.items()})
    if curve.base <= 0 or curve.base == 1 or 0 in (curve.log_slope, curve.lin_slope, curve.straight_slope):
        raise MapFileError(
            path, "its Log has a base or a slope that leaves no logarithm: bases > 0, not 1; slopes not 0"
        )
    if is_camera and curve.lin_slope * (curve.lin_break or 0.0) + curve.lin_offset <= 0:
        raise MapFileError(path, "its Log has a break where the logarithm does not exist")
    return curve


def read_cdl(path: Path, node: Element, _reads: float, _writes: float) -> Operation:
    """Read an ASC_CDL."""
    style = _style(path, node, tuple(Style), default=Style.FORWARD)
    return read_grade(path, node, style=Style(style))


def _style(path: Path, node: Element, styles: tuple[str, ...], default: str | None = None) -> str:
    stated = node.get("style", default)
    found = next((style for style in styles if stated is not None and style.lower() == stated.lower()), None)
    if found is None:
        raise MapFileError(
            path, f"its {local_name(node)} has style {(stated or '')[:40]!r}; it must be one of {', '.join(styles)}"
        )
    return str(found)


def _check_known(path: Path, parameters: Element, known: frozenset[str]) -> None:
    strange = sorted(set(parameters.keys()) - known)
    if strange:
        raise MapFileError(
            path,
            f"its {local_name(parameters)} has the attribute {strange[0][:40]!r}, which this style does not define",
        )


def _by_channel(
    path: Path, node: Element, name: str, function: Callable[[Element], LineFunction], *, missing: LineFunction | None
) -> Operation:
    """Return one function for all channels, or one for each that is named; `missing` stands for those that are not."""
    parameters = list(children(node, name))
    stated = [element.get("channel") for element in parameters]
    if stated == [None]:
        return same_for_all(function(parameters[0]))
    if not stated or len(set(stated)) != len(stated) or not set(stated) <= set(_CHANNELS):
        raise MapFileError(path, f"its {local_name(node)} must have one {name}, or one for each of R, G and B")
    named = {channel: function(element) for channel, element in zip(stated, parameters, strict=True)}
    if missing is None and len(named) < 3:
        raise MapFileError(path, f"its {local_name(node)} does not say what becomes of every channel")
    red, green, blue = (named[channel] if missing is None else named.get(channel, missing) for channel in _CHANNELS)
    return PerChannel((red, green, blue))
