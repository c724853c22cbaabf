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
    "decode_bit",
    "decode_raw",
    "encode_bit",
    "encode_raw",
    "finish_encoding",
    "new_states",
    "start_decoding",
]

Array: TypeAlias = npt.NDArray[Any]
Coder: TypeAlias = tuple[int, int, int]

FIRST = (1 << 36) | (1 << 19)
"""A fresh context: both estimates even, no bit seen."""


def new_states(contexts: int) -> npt.NDArray[np.int64]:
    """Fresh contexts, each with even odds: (contexts,). A state is fast << 21 | slow << 4 | bits seen."""
    return np.full(contexts, FIRST, dtype=np.int64)


@njit(cache=True, nogil=True)
def _adapted(state: int, bit: int) -> int:
    """Move both estimates towards the bit, by 1/2, 1/4, ... at first, then by 1/16 and 1/128."""
    seen = state & 15
    fast = state >> 21
    slow = (state >> 4) & 0x1FFFF
    target = bit << 16
    fast += (target - fast) >> min(seen + 1, 4)
    slow += (target - slow) >> min(seen + 1, 7)
    return (fast << 21) | (slow << 4) | min(seen + 1, 6)


@njit(cache=True, nogil=True)
def _one_share(state: int, width: int) -> int:
    """Part of the interval that a one takes: probability on 15 bits, kept off both ends."""
    odds = ((state >> 21) + ((state >> 4) & 0x1FFFF)) >> 2
    return (width >> 15) * min(max(odds, 16), 32752)


@njit(cache=True, nogil=True)
def _write(buffer: Array, position: int, low: int, width: int) -> Coder:
    """Carry into what is written, then move whole bytes out until the interval is wide enough."""
    if low >> 32:
        low &= 0xFFFFFFFF
        back = position - 1
        while buffer[back] == 255:
            buffer[back] = 0
            back -= 1
        buffer[back] += 1
    while width < 1 << 24:
        buffer[position] = low >> 24
        position += 1
        low = (low << 8) & 0xFFFFFFFF
        width <<= 8
    return position, low, width


@njit(cache=True, nogil=True)
def encode_bit(buffer: Array, coder: Coder, states: Array, context: int, bit: int) -> Coder:
    """Write one bit under a context; the caller keeps 8 bytes of the buffer free."""
    position, low, width = coder
    place = np.uintp(context)
    state = states[place]
    share = _one_share(state, width)
    if bit:
        width = share
    else:
        low += share
        width -= share
    states[place] = _adapted(state, bit)
    if (low >> 32) | (width < 1 << 24):
        return _write(buffer, position, low, width)
    return position, low, width


@njit(cache=True, nogil=True)
def encode_raw(buffer: Array, coder: Coder, value: int, bits: int) -> Coder:
    """Write the low `bits` (0 to 32) of a value with even odds."""
    position, low, width = coder
    while bits > 0:
        part = min(bits, 8)
        bits -= part
        width >>= part
        low += ((value >> bits) & ((1 << part) - 1)) * width
        position, low, width = _write(buffer, position, low, width)
    return position, low, width


@njit(cache=True, nogil=True)
def finish_encoding(buffer: Array, coder: Coder) -> int:
    """Write what a decoder needs to tell the last bits; return the number of bytes."""
    position, low, width = coder
    position, low, width = _write(buffer, position, low + (width >> 1), 0x1000000)
    for _ in range(2):
        buffer[position] = low >> 24
        position += 1
        low = (low << 8) & 0xFFFFFFFF
    return position


@njit(cache=True, nogil=True)
def start_decoding(buffer: Array) -> Coder:
    """Read the first four bytes; what lies behind the end reads as zero."""
    code = 0
    for k in range(4):
        code = (code << 8) | (buffer[k] if k < buffer.shape[0] else 0)
    return 4, code, 0xFFFFFFFF


@njit(cache=True, nogil=True)
def _read(buffer: Array, position: int, code: int, width: int) -> Coder:
    while width < 1 << 24:
        code = (code << 8) | (np.int64(buffer[position]) if position < buffer.shape[0] else 0)
        position += 1
        width <<= 8
    return position, code, width


@njit(cache=True, nogil=True)
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
    states[place] = _adapted(state, bit)
    if width < 1 << 24:
        return _read(buffer, position, code, width), bit
    return (position, code, width), bit


@njit(cache=True, nogil=True)
def decode_raw(buffer: Array, coder: Coder, bits: int) -> tuple[Coder, int]:
    """Read `bits` (0 to 32) bits of even odds."""
    position, code, width = coder
    value = 0
    while bits > 0:
        part = min(bits, 8)
        bits -= part
        width >>= part
        digit = min(code // width, (1 << part) - 1)
        code -= digit * width
        value = (value << part) | digit
        position, code, width = _read(buffer, position, code, width)
    return (position, code, width), value
