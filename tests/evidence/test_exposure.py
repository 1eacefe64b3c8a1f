"""Exposure values out of EXIF blocks, friendly and hostile."""

import struct

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hueferry.evidence.exposure import exposure_value


def exif(order: str, time: tuple[int, int], f_number: tuple[int, int], iso: int) -> bytes:
    """Lay out a TIFF header, a directory that points to the Exif directory, and three tags in it."""
    mark = b"II*\0" if order == "<" else b"MM\0*"
    head = mark + struct.pack(order + "I", 8)
    first = struct.pack(order + "HHHIII", 1, 0x8769, 4, 1, 26, 0)
    at = 26 + 2 + 3 * 12 + 4
    entries = struct.pack(order + "H", 3)
    entries += struct.pack(order + "HHII", 0x829A, 5, 1, at)
    entries += struct.pack(order + "HHII", 0x829D, 5, 1, at + 8)
    entries += struct.pack(order + "HHIHH", 0x8827, 3, 1, iso, 0)
    return head + first + entries + struct.pack(order + "I", 0) + struct.pack(order + "IIII", *time, *f_number)


@pytest.mark.parametrize("order", ["<", ">"])
def test_sunny_sixteen_is_nearly_fifteen_stops(order: str) -> None:
    """ISO 2720: EV = log2(N² / t); f/16 at 1/125 s and ISO 100 is log2(32000) = 14.966."""
    assert exposure_value(exif(order, (1, 125), (16, 1), 100)) == pytest.approx(14.9658, abs=1e-4)


def test_four_times_the_iso_takes_two_stops_off() -> None:
    base, fast = (exposure_value(exif("<", (1, 60), (4, 1), iso)) for iso in (100, 400))

    assert base is not None
    assert fast == pytest.approx(base - 2)


@pytest.mark.parametrize("time", [(0, 1), (1, 0), (0, 0)])
def test_impossible_times_say_nothing(time: tuple[int, int]) -> None:
    assert exposure_value(exif("<", time, (4, 1), 100)) is None


@given(st.binary(max_size=200), st.integers(0, 100))
def test_no_block_however_odd_raises(junk: bytes, cut: int) -> None:
    whole = exif("<", (1, 60), (4, 1), 100)

    for block in (junk, b"II*\0" + junk, b"MM\0*" + junk, whole[:cut], whole[:cut] + junk):
        value = exposure_value(block)
        assert value is None or abs(value) < 40
