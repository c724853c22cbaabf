import numpy as np

from safecheck.measures.padding import count_became_padding, count_padding_changed


def test_padding_is_counted_both_ways() -> None:
    before = np.array([[-2000, -2000, -1999, 5, 6]], np.int16)
    after = np.array([[-2000, -1990, -1999, -2000, 7]], np.int16)
    padding = before <= -1999
    assert count_padding_changed(before, after, padding) == 1
    assert count_became_padding(after, padding, -2000, -1999) == 1


def test_a_frame_without_padding_counts_none() -> None:
    samples = np.zeros((2, 2), np.int16)
    assert count_padding_changed(samples, samples + np.int16(1), None) == 0
    assert count_became_padding(samples, None, 0, 0) == 0
