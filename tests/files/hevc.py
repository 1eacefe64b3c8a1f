"""HEIC files made by hand: HEVC whose blocks hold samples as they are (pulse code modulation), so nothing is lost.

References:
    ITU-T H.265, clauses 7.3 (syntax), 9.3 (arithmetic coding) and table 9-52 (ranges); ISO/IEC 14496-15, clause 8.3.3.
"""

from __future__ import annotations

import struct

import numpy as np

from hueferry.files.isobmff import Item, Items, assemble

BLOCK = 16
_VPS, _SPS, _PPS, _IDR = 32, 33, 34, 19
_RANGES = (
    (128, 176, 208, 240), (128, 167, 197, 227), (128, 158, 187, 216), (123, 150, 178, 205),
    (116, 142, 169, 195), (111, 135, 160, 185), (105, 128, 152, 175), (100, 122, 144, 166),
)  # fmt: skip
"""Range of the less probable symbol in the first eight states: as many blocks can be coded."""


class Bits:
    """Bits of a payload, the highest first."""

    def __init__(self) -> None:
        self.bits: list[int] = []

    def u(self, count: int, value: int) -> None:
        self.bits += [value >> place & 1 for place in range(count - 1, -1, -1)]

    def ue(self, value: int) -> None:
        length = (value + 1).bit_length()
        self.u(2 * length - 1, value + 1)

    def all(self, text: str, *values: int) -> None:
        """Write values, each as "e" (exponential Golomb) or as a number of bits."""
        for kind, value in zip(text.split(), values, strict=True):
            self.ue(value) if kind == "e" else self.u(int(kind), value)

    def align(self) -> None:
        self.bits += [0] * (-len(self.bits) % 8)

    def unit(self, kind: int) -> bytes:
        """Return a network unit: its header, and the payload with a byte put in wherever a start code would arise."""
        self.align()
        payload, zeros = bytearray(), 0
        for byte in np.packbits(np.array(self.bits, np.uint8)).tobytes():
            if zeros >= 2 and byte <= 3:
                payload.append(3)
                zeros = 0
            payload.append(byte)
            zeros = zeros + 1 if byte == 0 else 0
        return bytes([kind << 1, 1]) + bytes(payload)


class Arithmetic:
    """The encoder of clause 9.3.5, for decisions that are always the more probable ones, and terminating ones."""

    def __init__(self, out: Bits) -> None:
        self.out, self.low, self.range, self.first, self.waiting = out, 0, 510, True, 0

    def probable(self, state: int) -> None:
        self.range -= _RANGES[state][self.range >> 6 & 3]
        self._renormalise()

    def terminate(self, last: int) -> None:
        self.range -= 2
        if last:
            self.low += self.range
            self.range = 2
        self._renormalise()
        if last:
            self._put(self.low >> 9 & 1)
            self.out.u(2, self.low >> 7 & 3 | 1)

    def _renormalise(self) -> None:
        while self.range < 256:
            if self.low < 256:
                self._put(0)
            elif self.low >= 512:
                self.low -= 512
                self._put(1)
            else:
                self.low -= 256
                self.waiting += 1
            self.range, self.low = self.range << 1, self.low << 1

    def _put(self, bit: int) -> None:
        if not self.first:
            self.out.u(1, bit)
        self.first = False
        self.out.bits += [1 - bit] * self.waiting
        self.waiting = 0


def _level(bits: Bits) -> None:
    """Profile, tier and level: the range extensions, which have 4:4:4."""
    bits.all("2 1 5 32 4 32 12 8", 0, 0, 4, 1 << 27, 0b1001, 0, 0, 120)


def _video() -> bytes:
    bits = Bits()
    bits.all("4 1 1 6 3 1 16", 0, 1, 1, 0, 0, 1, 0xFFFF)
    _level(bits)
    bits.all("1 e e e 6 e 1 1 1", 1, 0, 0, 0, 0, 0, 0, 0, 1)
    return bits.unit(_VPS)


def _sequence(height: int, width: int, depth: int) -> bytes:
    tall, wide = -height % BLOCK, -width % BLOCK
    bits = Bits()
    bits.all("4 3 1", 0, 0, 1)
    _level(bits)
    bits.all("e e 1 e e", 0, 3, 0, width + wide, height + tall)
    bits.all("1 e e e e", 1, 0, wide, 0, tall)
    bits.all("e e e 1 e e e", depth - 8, depth - 8, 0, 1, 0, 0, 0)
    bits.all("e e e e e e", 1, 0, 0, 2, 0, 0)  # blocks of 16, transforms of 4 to 16
    bits.all("1 1 1", 0, 0, 0)
    bits.all("1 4 4 e e 1", 1, depth - 1, depth - 1, 1, 0, 1)  # samples as they are, in blocks of 16
    bits.all("e 1 1 1 1 1 1", 0, 0, 0, 0, 0, 0, 1)
    return bits.unit(_SPS)


def _picture() -> bytes:
    bits = Bits()
    bits.all("e e 1 1 3 1 1 e e e", 0, 0, 0, 0, 0, 0, 0, 0, 0, 0)
    bits.all("1 1 1 e e 1 1 1 1 1 1 1", 0, 0, 0, 0, 0, 0, 0, 0, 0, 0, 0, 0)
    bits.all("1 1 1 1 1 e 1 1 1", 1, 0, 1, 0, 0, 0, 0, 0, 1)  # no deblocking
    return bits.unit(_PPS)


def _slice(planes: np.ndarray, depth: int) -> bytes:
    bits = Bits()
    bits.all("1 1 e e e 1", 1, 0, 0, 2, 0, 1)
    bits.align()
    coder = Arithmetic(bits)
    blocks = [(top, left) for top in range(0, planes.shape[1], BLOCK) for left in range(0, planes.shape[2], BLOCK)]
    for state, (top, left) in enumerate(blocks):
        coder.probable(state)  # one part
        coder.terminate(1)  # samples follow
        bits.align()
        for sample in planes[:, top : top + BLOCK, left : left + BLOCK].ravel():
            bits.u(depth, int(sample))
        coder = Arithmetic(bits)
        coder.terminate(int(state + 1 == len(blocks)))
    return bits.unit(_IDR)


def heic(
    pixels: np.ndarray,
    depth: int = 8,
    *,
    colour: bytes = b"nclx\0\x01\0\x0d\0\0\x80",
    more: tuple[tuple[bytes, bytes, bool], ...] = (),
    exif: bytes = b"",
) -> bytes:
    """Return a HEIC file of (height, width, 3) codes; at most eight blocks of 16 × 16.

    Args:
        pixels: red, green, blue.
        depth: bits a channel.
        colour: payload of its colour property; by default sRGB by numbers, and green, blue and red as they are.
        more: further properties of the picture: kind, payload, essential.
        exif: an EXIF block.
    """
    height, width = pixels.shape[:2]
    padded = np.pad(pixels, ((0, -height % BLOCK), (0, -width % BLOCK), (0, 0)), mode="edge")
    sets = (_video(), _sequence(height, width, depth), _picture())
    units = b"".join(
        struct.pack(">BHH", 0x80 | kind, 1, len(unit)) + unit
        for kind, unit in zip((_VPS, _SPS, _PPS), sets, strict=True)
    )
    head = struct.pack(">BBI6sBHBBBBHBB", 1, 4, 1 << 27, b"\x90" + bytes(5), 120, 0xF000, 0xFC, 0xFF,
                       0xF8 | depth - 8, 0xF8 | depth - 8, 0, 0x0F, 3)  # fmt: skip
    coded = _slice(np.moveaxis(padded[:, :, [1, 2, 0]], -1, 0), depth)
    properties = (
        (b"ispe", struct.pack(">III", 0, width, height), False),
        (b"hvcC", head + units, True),
        (b"pixi", struct.pack(">IBBBB", 0, 3, depth, depth, depth), False),
        (b"colr", colour, False),
        *more,
    )
    links = tuple((place, essential) for place, (_, _, essential) in enumerate(properties))
    items = {1: Item(b"hvc1", properties=links)}
    bodies = {1: struct.pack(">I", len(coded)) + coded}
    references: tuple[tuple[bytes, int, tuple[int, ...]], ...] = ()
    if exif:
        items[2], bodies[2] = Item(b"Exif"), bytes(4) + exif
        references = ((b"cdsc", 2, (1,)),)
    held = tuple((kind, payload) for kind, payload, _ in properties)
    return assemble(b"heic\0\0\0\0mif1heic", Items(1, items, held, references), bodies)
