"""Adaptive binary range coder.

An encoder or decoder is three whole numbers that live in the caller's local variables (compiled code keeps them in
registers): ``position`` in the buffer, ``low`` or ``code``, and ``width`` of the interval. A context is a row of the
state table: two estimates of the probability of a one on 16 bits, a fast and a slow one, and the number of bits seen,
by which both adapt quickly at first. The mean of the two is used.
"""

from __future__ import annotations

from typing import Any, TypeAlias

import numpy as np
import numpy.typing as npt
from numba import njit

__all__ = [
    "NARROW",
    "WIDE",
    "Coder",
    "adapted",
    "decode_bit",
    "decode_raw",
    "decode_sign",
    "encode_bit",
    "encode_raw",
    "finish_encoding",
    "new_states",
    "shift_in",
    "shift_out",
    "start_decoding",
]

Array: TypeAlias = npt.NDArray[Any]
Coder: TypeAlias = tuple[int, int, int]

WIDE = (1 << 48) - 1
"""Width of the interval at the start."""
NARROW = 1 << 32
"""An interval narrower than this is widened by two bytes. The odds are kept within 2**-11, so once is enough."""
FIRST = (1 << 36) | (1 << 19)
"""A fresh context: both estimates even, no bit seen."""


def new_states(contexts: int) -> npt.NDArray[np.int64]:
    """Fresh contexts, each with even odds: (contexts,). A state is fast << 21 | slow << 4 | bits seen."""
    return np.full(contexts, FIRST, dtype=np.int64)


@njit(cache=True, nogil=True, _nrt=False, forceinline=True)
def adapted(state: int, bit: int) -> int:
    """Move both estimates towards the bit, by 1/2, 1/4, ... at first, then by 1/16 and 1/128; within 32 to 65504."""
    seen = state & 15
    fast = state >> 21
    slow = (state >> 4) & 0x1FFFF
    target = 32 + bit * 65472
    fast += (target - fast) >> min(seen + 1, 4)
    slow += (target - slow) >> min(seen + 1, 7)
    return (fast << 21) | (slow << 4) | min(seen + 1, 6)


@njit(cache=True, nogil=True, _nrt=False, forceinline=True)
def _one_share(state: int, width: int) -> int:
    """Part of the interval that a one takes: probability on 15 bits, 16 to 32752 as `adapted` keeps it."""
    return (width >> 15) * (((state >> 21) + ((state >> 4) & 0x1FFFF)) >> 2)


@njit(cache=True, nogil=True, _nrt=False)
def _carry(buffer: Array, position: int) -> None:
    """Add one to the number that the bytes before a position form."""
    back = position - 1
    while buffer[back] == 255:
        buffer[back] = 0
        back -= 1
    buffer[back] += 1


@njit(cache=True, nogil=True, _nrt=False, forceinline=True)
def shift_out(buffer: Array, position: int, low: int, width: int) -> Coder:
    """Move two bytes out, a pending carry first; one move always makes the interval wide enough."""
    if low >> 48:
        _carry(buffer, position)
    place = np.uintp(position)
    buffer[place] = (low >> 40) & 0xFF
    buffer[place + np.uintp(1)] = (low >> 32) & 0xFF
    return position + 2, (low & 0xFFFFFFFF) << 16, width << 16


@njit(cache=True, nogil=True, _nrt=False, forceinline=True)
def encode_bit(buffer: Array, coder: Coder, states: Array, context: int, bit: int) -> Coder:
    """Write one bit under a context; the caller keeps room in the buffer."""
    position, low, width = coder
    place = np.uintp(context)
    state = states[place]
    share = _one_share(state, width)
    if bit:
        width = share
    else:
        low += share
        width -= share
    states[place] = adapted(state, bit)
    if width < NARROW:
        position, low, width = shift_out(buffer, position, low, width)
    return position, low, width


@njit(cache=True, nogil=True, _nrt=False, forceinline=True)
def encode_raw(buffer: Array, coder: Coder, value: int, bits: int) -> Coder:
    """Write the low `bits` (1 to 16) of a value with even odds."""
    position, low, width = coder
    width >>= bits
    low += (value & ((1 << bits) - 1)) * width
    if width < NARROW:
        position, low, width = shift_out(buffer, position, low, width)
    return position, low, width


@njit(cache=True, nogil=True, _nrt=False)
def finish_encoding(buffer: Array, coder: Coder) -> int:
    """Write what a decoder needs to tell the last bits; return the number of bytes."""
    position, low, width = coder
    position, low, width = shift_out(buffer, position, low + NARROW - 1, width)
    return int(position)


@njit(cache=True, nogil=True, _nrt=False)
def start_decoding(buffer: Array) -> Coder:
    """Read the first six bytes; what lies behind the end reads as zero."""
    code: Any = 0
    for k in range(6):
        code = (code << 8) | (np.int64(buffer[k]) if k < buffer.shape[0] else 0)
    return 6, code, WIDE


@njit(cache=True, nogil=True, _nrt=False, forceinline=True)
def shift_in(buffer: Array, position: int, code: int, width: int) -> Coder:
    """Take two bytes in; what lies behind the end reads as zero."""
    two: Any = 0
    if position + 1 < buffer.shape[0]:
        place = np.uintp(position)
        two = (np.int64(buffer[place]) << 8) | np.int64(buffer[place + np.uintp(1)])
    return position + 2, (code << 16) | two, width << 16


@njit(cache=True, nogil=True, _nrt=False, forceinline=True)
def decode_bit(buffer: Array, coder: Coder, states: Array, context: int) -> tuple[Coder, int]:
    """Read one bit under a context."""
    position, code, width = coder
    place = np.uintp(context)
    state = states[place]
    share = _one_share(state, width)
    bit = 1 if code < share else 0
    if bit:
        width = share
    else:
        code -= share
        width -= share
    states[place] = adapted(state, bit)
    if width < NARROW:
        position, code, width = shift_in(buffer, position, code, width)
    return (position, code, width), bit


@njit(cache=True, nogil=True, _nrt=False, forceinline=True)
def decode_sign(buffer: Array, coder: Coder) -> tuple[Coder, bool]:
    """Read one bit of even odds."""
    position, code, width = coder
    width >>= 1
    negative = code >= width
    if negative:
        code -= width
    if width < NARROW:
        position, code, width = shift_in(buffer, position, code, width)
    return (position, code, width), negative


@njit(cache=True, nogil=True, _nrt=False)
def decode_raw(buffer: Array, coder: Coder, bits: int) -> tuple[Coder, int]:
    """Read `bits` (1 to 16) bits of even odds."""
    position, code, width = coder
    width >>= bits
    value = min(code // width, (1 << bits) - 1)
    code -= value * width
    if width < NARROW:
        position, code, width = shift_in(buffer, position, code, width)
    return (position, code, width), value
