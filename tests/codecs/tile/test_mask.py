from __future__ import annotations

import numpy as np
import numpy.typing as npt
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra import numpy as hnp

from safecheck.codecs.tile import entropy, mask
from tests.codecs.tile import real_frames


def code_of(found: npt.NDArray[np.uint8]) -> npt.NDArray[np.uint8]:
    buffer = np.empty(4 * found.size + 64, np.uint8)
    coder = mask.encode_mask(found, entropy.new_states(mask.MASK_CONTEXTS), buffer, (0, 0, entropy.WIDE))
    return buffer[: entropy.finish_encoding(buffer, coder)].copy()


@settings(deadline=None, max_examples=100)
@given(hnp.arrays(np.uint8, hnp.array_shapes(min_dims=2, max_dims=2, max_side=40), elements=st.integers(0, 1)))
def test_any_mask_comes_back(before: npt.NDArray[np.uint8]) -> None:
    code = code_of(before)
    after = np.zeros_like(before)
    mask.decode_mask(after, entropy.new_states(mask.MASK_CONTEXTS), code, entropy.start_decoding(code))
    assert np.array_equal(after, before)


def test_the_round_field_of_a_ct_costs_next_to_nothing() -> None:
    padding = real_frames.grey("ct").padding
    assert padding is not None
    assert len(code_of(padding.view(np.uint8))) < 0.01 * (512 * 512 * 14 / 8 / 10)


@pytest.mark.parametrize("channels", [1, 3])
def test_padding_values_come_back(channels: int) -> None:
    rng = np.random.default_rng(4)
    values = np.repeat(rng.integers(0, 4096, (40, channels)), rng.integers(1, 30, 40), axis=0).astype(np.int32)
    buffer = np.empty(4 * values.size + 64, np.uint8)
    states = entropy.new_states(mask.MASK_CONTEXTS)
    coder = mask.encode_padding_values(values, 12, states, buffer, (0, 0, entropy.WIDE))
    code = buffer[: entropy.finish_encoding(buffer, coder)].copy()
    after = np.zeros_like(values)
    states = entropy.new_states(mask.MASK_CONTEXTS)
    mask.decode_padding_values(after, 12, states, code, entropy.start_decoding(code))
    assert np.array_equal(after, values)
