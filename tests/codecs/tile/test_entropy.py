from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from safecheck.codecs.tile import context, entropy, levels


def write(bits: list[tuple[int, int]], raw: list[tuple[int, int]]) -> tuple[np.ndarray, int]:
    buffer = np.zeros(4 * (len(bits) + len(raw)) + 64, np.uint8)
    states = entropy.new_states(4)
    coder = (0, 0, entropy.WIDE)
    for which, bit in bits:
        coder = entropy.encode_bit(buffer, coder, states, which, bit)
    for value, count in raw:
        coder = entropy.encode_raw(buffer, coder, value, count)
    return buffer, entropy.finish_encoding(buffer, coder)


@settings(deadline=None, max_examples=100)
@given(
    st.lists(st.tuples(st.integers(0, 3), st.integers(0, 1)), max_size=400),
    st.lists(st.integers(1, 16).flatmap(lambda n: st.tuples(st.integers(0, 2**n - 1), st.just(n))), max_size=50),
)
def test_bits_come_back(bits: list[tuple[int, int]], raw: list[tuple[int, int]]) -> None:
    buffer, size = write(bits, raw)
    code = buffer[:size].copy()
    states = entropy.new_states(4)
    coder = entropy.start_decoding(code)
    for which, bit in bits:
        coder, found = entropy.decode_bit(code, coder, states, which)
        assert found == bit
    for value, count in raw:
        coder, found = entropy.decode_raw(code, coder, count)
        assert found == value
    assert coder[0] == size + 4


@pytest.mark.parametrize(("ones", "above"), [(0.5, 0.03), (0.1, 0.05), (0.01, 0.15)])
def test_the_size_is_near_the_entropy(ones: float, above: float) -> None:
    # Shannon's bound; estimates that adapt quickly cost some percent, more where ones are rare.
    drawn = (np.random.default_rng(2).random(40_000) < ones).astype(int)
    _, size = write([(0, int(bit)) for bit in drawn], [])
    share = drawn.mean()
    bound = -len(drawn) * (share * np.log2(share) + (1 - share) * np.log2(1 - share)) / 8
    assert bound * 0.99 < size < bound * (1 + above) + 16


def test_long_carries_are_written_right() -> None:
    # All zeros push the interval to its upper end, where carries run through many bytes of 255.
    rng = np.random.default_rng(7)
    for _ in range(50):
        raw = [(0xFFFF, 16)] * int(rng.integers(1, 20)) + [(int(rng.integers(2**16)), 16)] * 3
        bits = [(0, 0)] * int(rng.integers(1, 60))
        buffer, size = write(bits, raw)
        code = buffer[:size].copy()
        states = entropy.new_states(4)
        coder = entropy.start_decoding(code)
        for _, bit in bits:
            coder, found = entropy.decode_bit(code, coder, states, 0)
            assert found == bit
        for value, count in raw:
            coder, found = entropy.decode_raw(code, coder, count)
            assert found == value


def tables(size: int) -> tuple[np.ndarray, ...]:
    return (
        context.place_table(size),
        context.zone_table(size),
        context.class_table(),
        context.higher_table(size),
    )


@pytest.mark.parametrize("size", [4, 8, 64])
@pytest.mark.parametrize("largest", [0, 1, 40, 2**26], ids=["zero", "one", "small", "huge"])
def test_levels_come_back(size: int, largest: int) -> None:
    rng = np.random.default_rng(size + largest)
    count = size * size
    before = rng.integers(-largest, largest + 1, (6, count)).astype(np.int32)
    before[1, 3:] = 0
    used = np.array([1, 1, 0, 1, 1, 1], np.uint8)
    before[2] = 0
    ends = np.array([max(np.flatnonzero(tile[1:]), default=-1) + 1 for tile in before], np.int32)
    buffer = np.empty(levels.WORST_BYTES * (count + 2) + 8 * before.size + 64, np.uint8)
    coder, fits = levels.encode_levels(
        before, ends, used, 3, tables(size), entropy.new_states(context.CONTEXTS),
        levels.new_scratch(6, count), buffer, (0, 0, entropy.WIDE), 0,
    )  # fmt: skip
    assert fits
    code = buffer[: entropy.finish_encoding(buffer, coder)].copy()
    after, found_ends = np.zeros_like(before), np.zeros_like(ends)
    coder, readable = levels.decode_levels(
        after, found_ends, used, 3, tables(size), entropy.new_states(context.CONTEXTS),
        levels.new_scratch(6, count), code, entropy.start_decoding(code),
    )  # fmt: skip
    assert readable
    assert np.array_equal(after, before)
    assert np.array_equal(found_ends, ends)


def test_a_buffer_too_short_is_told() -> None:
    before = np.full((4, 16), 1000, np.int32)
    ends = np.full(4, 15, np.int32)
    buffer = np.empty(100, np.uint8)
    _, fits = levels.encode_levels(
        before, ends, np.ones(4, np.uint8), 2, tables(4), entropy.new_states(context.CONTEXTS),
        levels.new_scratch(4, 16), buffer, (0, 0, entropy.WIDE), 0,
    )  # fmt: skip
    assert not fits
