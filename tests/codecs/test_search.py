"""The shared search, on dials whose answer is known by construction."""

from __future__ import annotations

import math
import statistics
from collections.abc import Callable

import imagecodecs
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from safecheck.codecs import search
from safecheck.codecs.base import RATE_TOLERANCE, Reached
from tests.codecs.images import real


def code_of(size: float) -> bytes:
    return bytes(round(size))


def power(exponent: float, scale: float = 20000) -> Callable[[float], bytes]:
    """A codec whose size is a power of its dial."""
    return lambda dial: code_of(max(scale * dial**exponent, 1))


@given(
    exponent=st.floats(0.5, 2),
    falling=st.booleans(),
    mistaken=st.floats(0.5, 2),
    target=st.floats(5000, 500000),
    start=st.floats(0.1, 10),
)
@settings(deadline=None, max_examples=100)
def test_a_power_law_is_met_in_few_codes_from_any_start(
    exponent: float, falling: bool, mistaken: float, target: float, start: float
) -> None:
    exponent = -exponent if falling else exponent
    found = search.turn(power(exponent), target, search.Dial(1e-3, 1e3, exponent * mistaken), start)
    assert found.end == "met"
    assert abs(len(found.code) / target - 1) <= RATE_TOLERANCE
    assert found.encodes <= 6


def test_a_bent_size_is_met_by_secant_and_halving() -> None:
    # Size falls as 1/x up to 3, then three times as steeply: no single exponent fits.
    def encode(dial: float) -> bytes:
        return code_of(30000 / dial if dial < 3 else 10000 * (3 / dial) ** 3)

    counts = []
    for target in (25000, 12000, 9000, 6000, 4200):
        found = search.turn(encode, target, search.Dial(0.1, 50, -1), 30000 / target)
        assert found.end == "met"
        counts.append(found.encodes)
    assert statistics.median(counts) <= 6


@pytest.mark.parametrize("exponent", [-1.0, 1.0], ids=["falling", "rising"])
def test_the_ends_of_the_dial_tell_floor_and_ceiling(exponent: float) -> None:
    dial = search.Dial(1, 10, exponent)
    encode = power(exponent)
    sizes = [len(encode(1)), len(encode(10))]
    floor = search.turn(encode, min(sizes) / 2, dial, 5)
    assert (floor.end, len(floor.code)) == ("floor", min(sizes))
    assert floor.dial in (dial.lowest, dial.highest)
    ceiling = search.turn(encode, max(sizes) * 2, dial, 5)
    assert (ceiling.end, len(ceiling.code)) == ("ceiling", max(sizes))


def test_a_size_that_no_longer_moves_ends_at_the_ceiling_quickly() -> None:
    found = search.turn(lambda dial: code_of(min(20000 / dial, 5000)), 9000, search.Dial(1.001, 1e6, -1), 20 / 9)
    assert found.end == "ceiling"
    assert found.encodes <= 3


def test_a_staircase_gives_its_nearest_step() -> None:
    found = search.turn(lambda dial: code_of(6000 if dial < 2.6 else 4000), 5300, search.Dial(1, 100, -1), 2)
    assert found.end == "between"
    assert len(found.code) == 6000
    assert found.encodes <= search.MOST_ENCODES


@given(seed=st.integers(0, 2**32 - 1), target=st.floats(100, 100000))
@settings(deadline=None, max_examples=60)
def test_a_search_ends_whatever_the_sizes(seed: int, target: float) -> None:
    def encode(dial: float) -> bytes:
        rng = np.random.default_rng([seed, round(dial * 1e6)])
        return code_of(int(rng.integers(1, 200000)))

    dial = search.Dial(0.5, 1000, -1)
    found = search.turn(encode, target, dial, 10)
    assert found.encodes <= search.MOST_ENCODES
    assert dial.lowest <= found.dial <= dial.highest
    assert encode(found.dial) == found.code
    assert found == search.turn(encode, target, dial, 10)


@pytest.mark.parametrize(
    ("lowest", "highest", "exponent", "message"),
    [(0, 1, 1, "0 < lowest"), (2, 1, 1, "0 < lowest"), (1, math.inf, 1, "0 < lowest"), (1, 2, 0, "exponent")],
    ids=["zero", "reversed", "endless", "flat"],
)
def test_a_dial_without_range_or_slope_is_refused(lowest: float, highest: float, exponent: float, message: str) -> None:
    with pytest.raises(ValueError, match=message):
        search.Dial(lowest, highest, exponent)


@pytest.mark.parametrize(("target", "start"), [(0, 1), (-5, 1), (math.nan, 1), (math.inf, 1), (10, 0)])
def test_only_positive_sizes_can_be_asked_for(target: float, start: float) -> None:
    with pytest.raises(ValueError, match="expected positive numbers"):
        search.turn(power(-1), target, search.Dial(1, 10, -1), start)


@given(target=st.floats(1, 3000), start=st.integers(1, 100), rising=st.booleans())
@settings(deadline=None, max_examples=80)
def test_an_integer_dial_gives_the_two_settings_around_the_size(target: float, start: int, rising: bool) -> None:
    def size(dial: int) -> int:
        return 7 + 11 * (dial if rising else 101 - dial)

    tried: list[int] = []

    def encode(dial: int) -> bytes:
        tried.append(dial)
        return code_of(size(dial))

    steps = search.bracket(encode, target, 1, 100, start, rising=rising)
    sizes = [len(step.code) for step in steps]
    if len(steps) == 2:
        assert sizes[0] <= target < sizes[1]
        assert abs(steps[0].dial - steps[1].dial) == 1
    else:
        end = steps[0].dial
        assert end in (1, 100)
        assert (sizes[0] > target) == (sizes[0] == size(1 if rising else 100))
    assert [size(step.dial) for step in steps] == sizes
    assert len(tried) == len(set(tried)) <= 14


def test_the_quality_of_jpeg_is_bracketed_on_a_real_frame() -> None:
    # imagecodecs' libjpeg-turbo: an integer quality that grows the code.
    samples = real("US1_UNCR").samples
    steps = search.bracket(lambda q: bytes(imagecodecs.jpeg8_encode(samples, level=q)), 60000, 1, 100, 75, rising=True)
    assert len(steps) == 2
    assert len(steps[0].code) <= 60000 < len(steps[1].code)
    assert steps[1].dial == steps[0].dial + 1


def test_an_end_whose_code_is_smaller_than_the_one_beside_it_does_not_stall_the_search() -> None:
    # Flat at the start, so that the fine end is tried; there the code is slightly smaller than a little further in.
    def encode(dial: float) -> bytes:
        if dial > 5:
            return code_of(3000 - dial)
        return code_of(45000 if dial < 0.01 else min(47000, 3000 * (5 / dial) ** 2))

    for target in (6000, 12000, 30000):
        found = search.turn(encode, target, search.Dial(1e-3, 1e3, -0.7), 30)
        assert found.end == "met"


def test_an_end_far_away_is_not_tried_while_the_secant_gains() -> None:
    # A bent curve: size falls ever faster, so that a straight line in logarithms falls short on the same side.
    tried: list[float] = []

    def encode(dial: float) -> bytes:
        tried.append(dial)
        return code_of(1e6 * math.exp(-0.05 * math.log(dial / 1e-6) ** 2))

    found = search.turn(encode, 300000, search.Dial(1e-6, 1, -1.4), 0.9)
    assert found.end == "met"
    assert min(tried) > 1e-6
    assert found.encodes <= 7


def test_a_start_outside_the_range_is_refused() -> None:
    with pytest.raises(ValueError, match="from 0 in 1 to 100"):
        search.bracket(code_of, 10, 1, 100, 0, rising=True)


@pytest.mark.parametrize(
    ("end", "target", "reversible", "reached"),
    [
        ("met", 9000, 1, Reached.ASKED),
        ("met", 90, 1, Reached.ASKED),
        ("floor", 9000, 1, Reached.CODEC_FLOOR),
        ("ceiling", 9000, 9001, Reached.CODEC_CEILING),
        ("ceiling", 9000, 9000, Reached.REVERSIBLE_SMALLER),
        ("floor", 900, 1, Reached.CODEC_FLOOR),
        ("ceiling", 900, 901, Reached.CODEC_CEILING),
        ("between", 9000, 1, Reached.COARSE_STEPS),
        ("between", 4095, 1, Reached.SMALL_FRAME),
    ],
)
def test_the_end_of_a_search_has_one_word(end: search.End, target: float, reversible: int, reached: Reached) -> None:
    assert search.tell(end, target, lambda: reversible) is reached


@pytest.mark.parametrize("guessed", [1.0, 40.0, 57.0, 100.0, 1e9, -1e9])
def test_a_first_guess_however_wrong_changes_no_pair(guessed: float) -> None:
    alone = search.bracket(code_of, 57.5, 1, 100, 3, rising=True)
    assert search.bracket(code_of, 57.5, 1, 100, 3, rising=True, guess=lambda _: guessed) == alone
