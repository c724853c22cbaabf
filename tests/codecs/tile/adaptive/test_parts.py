from __future__ import annotations

import dataclasses
import math

import numpy as np
import pytest

from safecheck.codecs.tile import stream
from safecheck.codecs.tile.adaptive import coding, contexts, drawing, mixing, partition, sizing, tree
from safecheck.codecs.tile.codec import Tiled
from safecheck.codecs.tile.entropy import finish_encoding, new_states, start_decoding
from safecheck.errors import CorruptCode
from safecheck.frames import PixelFormat, Raster
from tests.codecs.tile import real_frames
from tests.codecs.tile.test_stream import FORM, HEADER, SHAPE

GREY = PixelFormat(16, 12, False, "MONOCHROME2")


def test_no_logit_or_odds_lies_near_a_rounding_tie() -> None:
    # So tables are the same whatever mathematical library computed exp and log.
    logits = np.array([256 * math.log((2 * k + 1) / (8191 - 2 * k)) for k in range(4096)])
    odds = np.array([65536 / (1 + math.exp(-x / 256)) for x in range(-2047, 2048)])
    for values, table in ((logits, mixing.logit_table()), (odds, mixing.odds_table())):
        inside = slice(None) if values is logits else (table > 32) & (table < 65504)
        assert np.abs(values - np.floor(values) - 0.5)[inside].min() > 1e-9
        np.testing.assert_array_equal(np.rint(values)[inside], table[inside])


def test_logits_and_odds_undo_each_other() -> None:
    # Computed from the stated definition, p = 1 / (1 + exp(-logit)).
    back = mixing.odds_table()[np.clip(mixing.logit_table(), -2047, 2047) + 2047]
    expected = (np.arange(4096) + 0.5) * 16
    assert np.abs(back - expected).max() <= 33


@pytest.mark.parametrize("share", [0.0, 0.3, 1.0])
def test_a_partition_comes_back(share: float) -> None:
    rng = np.random.default_rng(1)
    cells = np.full((48, 32), tree.EMPTY, np.uint8)

    def fill(kind: int, row: int, column: int) -> None:
        side = 1 << kind
        if kind and rng.random() < 0.6:
            for k in range(4):
                fill(kind - 1, row + side // 2 * (k // 2), column + side // 2 * (k % 2))
        else:
            cells[row : row + side, column : column + side] = kind

    for row in range(0, 48, 16):
        for column in range(0, 32, 16):
            fill(4, row, column)
    cells[rng.random(cells.shape) < share] = tree.EMPTY
    buffer = np.empty(4096, np.uint8)
    coder = tree.encode_tree(cells, new_states(contexts.CONTEXTS), buffer, (0, 0, (1 << 48) - 1))
    code = buffer[: finish_encoding(buffer, coder)]
    found = np.where(cells == tree.EMPTY, tree.EMPTY, 0).astype(np.uint8)
    tree.decode_tree(found, new_states(contexts.CONTEXTS), code, start_decoding(code))
    assert np.array_equal(found, cells)
    tiles = tree.tiles_of(cells)
    covered = np.full(cells.shape, tree.EMPTY)
    for kind, row, column, _ in tiles:
        assert (covered[row : row + (1 << kind), column : column + (1 << kind)] == tree.EMPTY).all()
        covered[row : row + (1 << kind), column : column + (1 << kind)] = kind
    assert np.array_equal(np.where(cells == tree.EMPTY, tree.EMPTY, covered), cells)
    assert tiles[:, 3].tolist() == [0, *np.cumsum(16 << (2 * tiles[:-1, 0])).tolist()][: len(tiles)]


def test_the_partition_of_least_cost_is_chosen() -> None:
    costs = [np.full((16 >> k, 16 >> k), 4**k * 10) for k in range(5)]
    coded = np.ones((16, 16), np.uint8)
    cells = np.empty((16, 16), np.uint8)
    costs[1][3, 2] = 39
    partition.choose(*costs, coded, cells)
    assert (cells[:8, :8] < 4).all()
    assert cells[6, 4] == 1
    costs[4][0, 0] = 1
    partition.choose(*[each.copy() for each in costs], coded, cells)
    assert (cells == 4).all()


@pytest.mark.parametrize("name", ["ct", "mr-abdomen", "cr-chest"])
def test_sizes_are_taken_large_where_little_is_told_and_small_at_edges(name: str) -> None:
    chosen = coding.partition_at(coding.analyse(real_frames.grey(name), "cosine", "flat"), 900)
    assert set(chosen.tiles[:, 0]) >= {1, 2, 3, 4}


def lettering(low: int, high: int, shape: tuple[int, int] = (200, 240)) -> Raster:
    """A smooth field with noise, and letters of two values on a ground of their own."""
    rng = np.random.default_rng(3)
    samples = 1500 + np.add.outer(np.arange(shape[0]), np.arange(shape[1])) + rng.integers(0, 60, shape)
    letters = np.kron(rng.integers(0, 2, (8, 20)), np.ones((3, 4), int))
    samples[40:64, 32:112] = np.where(letters, high, low)
    return Raster(samples.astype(np.uint16), GREY)


def test_lettering_is_found_and_comes_back_exactly_at_any_step() -> None:
    raster = lettering(0, 4000)
    drawn = drawing.find(raster)
    assert drawn is not None
    assert drawn.values.tolist() == [[0], [4000]]
    assert drawn.covered[42:60, 36:108].mean() > 0.5
    back = Tiled("adaptive").decode(Tiled("adaptive", step=4000.0).encode(raster), GREY, raster.shape)
    assert np.array_equal(back[drawn.covered], raster.samples[drawn.covered])


@pytest.mark.parametrize("name", real_frames.GREY_FILES)
def test_frames_without_lettering_have_no_drawing(name: str) -> None:
    assert not coding.analyse(real_frames.grey(name), "cosine", "flat").drawn


def test_low_contrast_and_few_cells_are_left_to_the_transform() -> None:
    assert drawing.find(lettering(1500, 1501)) is None
    assert drawing.find(Raster(lettering(0, 4000).samples[:44, :48], GREY)) is None


def test_a_drawing_may_not_fill_the_frame() -> None:
    samples = np.random.default_rng(6).integers(0, 2, (256, 256)).astype(np.uint16)
    assert not coding.analyse(Raster(samples, PixelFormat(16, 1, False, "MONOCHROME2")), "cosine", "flat").drawn


@pytest.mark.parametrize("step", [0.125, 0.4, 0.7, 3.0])
def test_exactness_is_told_without_the_code(step: float) -> None:
    raster = real_frames.grey("ct-small")
    codec = Tiled("adaptive", step=step)
    code = codec.encode(raster)
    same = np.array_equal(codec.decode(code, raster.format, raster.shape), raster.samples)
    assert coding.exact(coding.analyse(raster, "cosine", "flat"), code) is same


@pytest.mark.parametrize("name", ["ct", "mr-abdomen", "mr-shoulder", "cr-leg"])
def test_a_sample_of_the_tiles_judges_the_size_within_some_per_cent(name: str) -> None:
    raster = real_frames.grey(name)
    for ratio in (5, 20):
        target = raster.pixels * raster.format.bits_stored / 8 / ratio
        analysis = coding.analyse(raster, "cosine", "flat")
        index, code, tries = sizing.search(analysis, target)
        assert tries <= 3
        assert len(code) == len(coding.write(analysis, index)) == pytest.approx(target, rel=0.01)


@pytest.mark.parametrize("change", [{"size": 8}, {"drawn": 2}], ids=["a-size", "drawn"])
def test_a_field_out_of_range_is_told(change: dict[str, int]) -> None:
    header = dataclasses.replace(HEADER, size=0, version=2)
    assert stream.read(stream.write(header, b""), FORM, SHAPE)[0] == header
    with pytest.raises(CorruptCode, match="out of range"):
        stream.read(stream.write(dataclasses.replace(header, **change), b""), FORM, SHAPE)  # type: ignore[arg-type]
    with pytest.raises(CorruptCode, match="out of range"):
        stream.read(stream.write(dataclasses.replace(HEADER, drawn=1), b""), FORM, SHAPE)
