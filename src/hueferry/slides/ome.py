"""The few words of OME-XML that a slide needs: size, channels, pixel pitch."""

from __future__ import annotations

from xml.sax.saxutils import quoteattr

_SCHEMA = "http://www.openmicroscopy.org/Schemas/OME/2016-06"
_TO_MICROMETRES = {"": 1.0, "µm": 1.0, "μm": 1.0, "um": 1.0, "nm": 1e-3, "mm": 1e3, "cm": 1e4, "m": 1e6}
_LONGEST = 1 << 22


def describe(shape: tuple[int, int], dtype: str, pitch: tuple[float, float] | None, *, note: str = "") -> bytes:
    """Return OME-XML for one interleaved RGB plane; sizes in pixels, pitch in micrometres (the schema's own default).

    Args:
        shape: rows and columns.
        dtype: "uint8", "uint16" or "float32".
        pitch: (x, y), or None where it is not known; nothing is made up.
        note: one sentence on how the picture came about.
    """
    physical = "" if pitch is None else f' PhysicalSizeX="{pitch[0]:.9g}" PhysicalSizeY="{pitch[1]:.9g}"'
    kind = "float" if dtype == "float32" else dtype
    described = f"<Description>{_escaped(note)}</Description>" if note else ""
    return (
        f'<?xml version="1.0" encoding="UTF-8"?><OME xmlns={quoteattr(_SCHEMA)}>'
        f'<Image ID="Image:0">{described}<Pixels ID="Pixels:0" DimensionOrder="XYCZT" Type="{kind}" '
        f'SizeX="{shape[1]}" SizeY="{shape[0]}" SizeC="3" SizeZ="1" SizeT="1" Interleaved="true"{physical}>'
        '<Channel ID="Channel:0:0" SamplesPerPixel="3"/><TiffData IFD="0" PlaneCount="1"/></Pixels></Image></OME>'
    ).encode("ascii", "xmlcharrefreplace")


def pitch_of(xml: str) -> tuple[float, float] | None:
    """Return (x, y) micrometres a pixel of the first image, or None where the XML does not say or is broken."""
    from defusedxml import DefusedXmlException
    from defusedxml.ElementTree import ParseError, fromstring

    if len(xml) > _LONGEST:
        return None
    try:
        root = fromstring(xml)
    except (ParseError, DefusedXmlException, ValueError):
        return None
    pixels = next((element for element in root.iter() if element.tag.rpartition("}")[2] == "Pixels"), None)
    if pixels is None:
        return None
    sizes = [
        _micrometres(pixels.get(f"PhysicalSize{axis}"), pixels.get(f"PhysicalSize{axis}Unit", "")) for axis in "XY"
    ]
    return (sizes[0], sizes[1]) if sizes[0] is not None and sizes[1] is not None else None


def _micrometres(value: str | None, unit: str) -> float | None:
    try:
        number = float(value or "") * _TO_MICROMETRES[unit]
    except (ValueError, KeyError):
        return None
    return number if 0 < number < 1e6 else None


def _escaped(text: str) -> str:
    return text.replace("&", "&amp;").replace("<", "&lt;").replace(">", "&gt;")
