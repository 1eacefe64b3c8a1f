"""Every format that is known: how it is recognised, what it holds and keeps, who reads and writes it."""

from __future__ import annotations

import importlib.util
from collections.abc import Callable, Mapping
from pathlib import Path
from types import MappingProxyType
from typing import Literal

import attrs

from hueferry.files import sniff as signs
from hueferry.files.codec import Codec, LoadCodec
from hueferry.files.load import (
    load_avif,
    load_exr,
    load_hdr,
    load_heic,
    load_jpeg,
    load_jxl,
    load_png,
    load_tiff,
    load_webp,
)

_ALL = frozenset({"profile", "exif", "xmp"})

Turn = Literal["exif", "own", "upright"]
"""Where a file states how it is to be turned: in EXIF, in a field of its own, or nowhere: its pixels are upright."""


@attrs.frozen
class Format:
    """A format that is read.

    Attributes:
        name: in `Metadata.format`, lower case.
        title: for people.
        suffixes: usual ends of its names; the first one is the usual one.
        announced: whether the first bytes of a file announce it.
        load: gives its reader and writer.
        depths: bits a channel that are read and written; 32 stands for float.
        alpha: whether it holds alpha.
        gray: whether it holds gray as such.
        lossless: whether pictures come back to the bit by default; if not, at least 45 dB.
        keeps: what comes back as it was: "profile", "exif", "xmp", "iptc", …
        turn: where it states its orientation.
        scene_linear: whether it holds light that goes on beyond diffuse white, and nothing else.
        writes: whether it is written.
        written_as: the format that pictures of one that is not written go into.
        needs: the module of an optional package without which it is not read, or an empty string.
        extra: the name under which hueferry's installation brings that package.
        remark: what else a user should know.
    """

    name: str
    title: str
    suffixes: tuple[str, ...]
    announced: Callable[[bytes], bool]
    load: LoadCodec
    depths: tuple[int, ...]
    alpha: bool
    gray: bool
    lossless: bool
    keeps: frozenset[str]
    turn: Turn = "exif"
    scene_linear: bool = False
    writes: bool = True
    written_as: str = ""
    needs: str = ""
    extra: str = ""
    remark: str = ""


@attrs.frozen
class Refused:
    """A format that is recognised and not read.

    Attributes:
        title: for people.
        announced: whether the first bytes of a file announce it.
        reason: why, and the way round.
    """

    title: str
    announced: Callable[[bytes], bool]
    reason: str


FORMATS: Mapping[str, Format] = MappingProxyType(
    {
        one.name: one
        for one in (
            Format(
                "jpeg",
                "JPEG",
                (".jpg", ".jpeg", ".jpe"),
                signs.starts(b"\xff\xd8\xff"),
                load_jpeg,
                depths=(8,),
                alpha=False,
                gray=True,
                lossless=False,
                keeps=_ALL | {"iptc"},
                remark="quantisation and chroma sampling no coarser than the source's",
            ),
            Format(
                "png",
                "PNG",
                (".png",),
                signs.starts(b"\x89PNG\r\n\x1a\n"),
                load_png,
                depths=(8, 16),
                alpha=True,
                gray=True,
                lossless=True,
                keeps=_ALL,
            ),
            Format(
                "tiff",
                "TIFF",
                (".tif", ".tiff"),
                signs.is_tiff,
                load_tiff,
                depths=(8, 16, 32),
                alpha=True,
                gray=True,
                lossless=True,
                keeps=_ALL | {"iptc"},
                turn="own",
            ),
            Format(
                "webp",
                "WebP",
                (".webp",),
                signs.is_webp,
                load_webp,
                depths=(8,),
                alpha=True,
                gray=False,
                lossless=True,
                keeps=_ALL,
                remark="lossless, unless the source was a lossy WebP or a quality is given",
            ),
            Format(
                "avif",
                "AVIF",
                (".avif",),
                signs.is_avif,
                load_avif,
                depths=(8, 10, 12),
                alpha=True,
                gray=True,
                lossless=True,
                keeps=_ALL,
                turn="own",
                remark="lossless, unless the source was a lossy AVIF or a quality is given",
            ),
            Format(
                "jxl",
                "JPEG XL",
                (".jxl",),
                signs.starts(b"\xff\x0a", b"\0\0\0\x0cJXL \r\n\x87\n"),
                load_jxl,
                depths=(8, 16, 32),
                alpha=True,
                gray=True,
                lossless=True,
                keeps=_ALL,
                turn="upright",
                needs="pyjpegxl",
                extra="jxl",
                remark="lossless, unless a quality is given; turned upright, since its turn is not EXIF's",
            ),
            Format(
                "exr",
                "OpenEXR",
                (".exr",),
                signs.starts(b"\x76\x2f\x31\x01"),
                load_exr,
                depths=(32,),
                alpha=True,
                gray=True,
                lossless=True,
                keeps=frozenset({"attributes"}),
                turn="upright",
                scene_linear=True,
                needs="OpenEXR",
                extra="exr",
                remark="one part of R, G, B or Y, with or without A, half or float; lossy packings become ZIP",
            ),
            Format(
                "hdr",
                "Radiance HDR",
                (".hdr",),
                signs.starts(b"#?RADIANCE", b"#?RGBE"),
                load_hdr,
                depths=(32,),
                alpha=False,
                gray=False,
                lossless=True,
                keeps=frozenset({"header lines"}),
                turn="upright",
                scene_linear=True,
                remark="eight bits of mantissa a channel: what is changed is rounded to them",
            ),
            Format(
                "heic",
                "HEIC",
                (".heic", ".heif", ".hif"),
                signs.is_heic,
                load_heic,
                depths=(8, 10, 12),
                alpha=True,
                gray=False,
                lossless=False,
                keeps=_ALL,
                turn="upright",
                writes=False,
                written_as="avif",
                needs="pi_heif",
                extra="heic",
                remark="read only, upright; its encoders are under the GPL: write AVIF, which is built alike",
            ),
        )
    }
)
"""Formats that are read, by name."""

REFUSED: tuple[Refused, ...] = (
    Refused(
        "GIF",
        signs.starts(b"GIF87a", b"GIF89a"),
        "it holds at most 256 colours, often of several frames, and mapped colours would not fit; save it as PNG",
    ),
    Refused("BMP", signs.is_bitmap, "it keeps neither profile nor metadata in a dependable way; save it as PNG"),
    Refused(
        "JPEG 2000",
        signs.starts(b"\0\0\0\x0cjP  \r\n\x87\n", b"\xff\x4f\xff\x51"),
        "its profiles and metadata are not carried yet; save it as TIFF, or as PNG, at its own depth",
    ),
    Refused(
        "a camera's raw format",
        signs.is_raw,
        "sensor data have no colours before they are developed; develop it to 16-bit TIFF with a profile first",
    ),
    Refused(
        "a layered document (PSD)", signs.starts(b"8BPS"), "layers would be lost; flatten a copy and save it as TIFF"
    ),
    Refused("PDF", signs.is_page, "pages are not pictures; export the picture that is meant as TIFF, PNG or JPEG"),
    Refused("SVG", signs.is_drawing, "drawings have no pixels; export it as PNG at the size that is needed"),
)
"""Formats that are recognised and refused."""

SUFFIXES: Mapping[str, tuple[str, ...]] = MappingProxyType({name: one.suffixes for name, one in FORMATS.items()})
"""Suffixes by format, for names in folders and for choosing what is written."""


def sniff(head: bytes) -> str:
    """Return the format that is read and that the first bytes of a file announce, or an empty string."""
    return next((name for name, one in FORMATS.items() if one.announced(head)), "")


def refusal(head: bytes) -> str:
    """Return why a file that its first bytes announce is not read, or an empty string if it is unknown."""
    refused = next((one for one in REFUSED if one.announced(head)), None)
    return "" if refused is None else f"this is {refused.title}, which is not read: {refused.reason}"


def missing(format_: Format) -> str:
    """Return what is to be installed before a format can be read and written, or an empty string."""
    if not format_.needs or importlib.util.find_spec(format_.needs) is not None:
        return ""
    return f"{format_.title} needs the optional package {format_.needs}; install hueferry[{format_.extra}]"


def named(path: Path) -> Format | None:
    """Return the format that is written and that the suffix of a path names."""
    suffix = path.suffix.lower()
    return next((one for one in FORMATS.values() if one.writes and suffix in one.suffixes), None)


def written_name(path: Path) -> Path:
    """Return the name under which what became of a picture is written: its own, unless its format is only read."""
    suffix = path.suffix.lower()
    only_read = next((one for one in FORMATS.values() if not one.writes and suffix in one.suffixes), None)
    return path if only_read is None else path.with_suffix(FORMATS[only_read.written_as].suffixes[0])


def codec(name: str) -> Codec:
    """Return reader and writer of a format, importing what they need."""
    return FORMATS[name].load()
