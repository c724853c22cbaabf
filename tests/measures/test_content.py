import numpy as np
import pytest

from safecheck.measures.content import Content, find_content
from safecheck.measures.planes import Mask, Plane


def _disc(radius: float, row: float = 64, column: float = 64, side: int = 128) -> Mask:
    y, x = np.mgrid[0:side, 0:side]
    return np.asarray((y - row) ** 2 + (x - column) ** 2 <= radius**2)


def _ct() -> tuple[Plane, Mask]:
    """Air, a body of soft tissue with a lung inside, noise of 20 HU; the body."""
    body = _disc(45)
    values = np.where(body, 40.0, -1000.0)
    values[_disc(15, 60, 50)] = -850
    return values + np.random.default_rng(1).normal(0, 20, values.shape), body


def _mr(sigma: float = 10) -> tuple[Plane, Mask]:
    """A magnitude image: signal 300 in a disc, Rayleigh noise around it."""
    rng = np.random.default_rng(2)
    body = _disc(40)
    real, imaginary = rng.normal(0, sigma, (2, *body.shape))
    return np.round(np.hypot(body * 300 + real, imaginary)), body


def test_ct_content_is_the_body_with_the_air_inside() -> None:
    values, body = _ct()
    content = find_content(values, modality="CT", unit="HU")
    assert (content.rule, content.reason) == ("ct-air-1", "")
    assert (content.mask == body).all()
    assert content.pixels == body.sum()
    assert not content.mask.flags.writeable


def test_ct_padding_and_the_air_that_touches_it_are_not_content() -> None:
    values, body = _ct()
    padding = ~_disc(60)
    values[padding] = -2000
    content = find_content(values, modality="CT", unit="HU", padding=padding)
    assert (content.mask == body).all()


def test_ct_lung_cut_by_the_field_of_view_stays_content() -> None:
    values = np.full((64, 64), 40.0)
    values[:, :20] = -850 + np.random.default_rng(3).normal(0, 40, (64, 20))
    content = find_content(values, modality="CT", unit="HU")
    assert content.mask.all()
    assert content.rule == "ct-air-1"


def test_mr_content_is_what_stands_out_of_the_noise_of_the_border() -> None:
    values, body = _mr()
    content = find_content(values, modality="MR", unit="stored value")
    assert (content.rule, content.reason) == ("mr-background-1", "")
    assert content.mask[body].all()
    assert np.count_nonzero(content.mask & ~_disc(43)) < 0.01 * content.mask.size


def test_mr_content_does_not_depend_on_what_the_scanner_filled_around_the_image() -> None:
    values, body = _mr()
    filled = np.zeros((160, 160))
    filled[16:144, 16:144] = values
    content = find_content(filled, modality="MR", unit="stored value")
    assert content.rule == "mr-background-1"
    assert content.mask[16:144, 16:144][body].all()
    assert np.count_nonzero(content.mask) < 1.2 * body.sum()


def test_mr_of_a_masked_image_leaves_out_the_fill_alone() -> None:
    values = np.where(_disc(40), np.random.default_rng(4).integers(150, 400, (128, 128)), 0).astype(np.float64)
    content = find_content(values, modality="MR", unit="stored value")
    assert content.rule == "mr-background-1"
    assert (content.mask == _disc(40)).all()


def test_mr_of_monochrome1_is_turned_first() -> None:
    values, _ = _mr()
    turned = values.max() + values.min() - values
    plain = find_content(values, modality="MR", unit="stored value")
    content = find_content(turned, modality="MR", unit="stored value", inverted=True)
    assert content.rule == "mr-background-1"
    assert (content.mask == plain.mask).all()


def _filled(value: float) -> Plane:
    return np.full((64, 64), value)


@pytest.mark.parametrize(
    ("values", "modality", "unit", "reason"),
    [
        pytest.param(_filled(0), "CT", "stored value", "values are not in HU", id="CT without HU"),
        pytest.param(_filled(-1000), "CT", "HU", "ct-air-1 leaves under 5 % of the frame", id="CT of air"),
        pytest.param(_mr()[0] - 50, "MR", "x", "values below zero: not a magnitude image", id="MR with a sign"),
        pytest.param(_mr()[0][50:80, 50:80], "MR", "x", "the border is not background", id="MR filled by the body"),
        pytest.param(_filled(7), "MR", "x", "nothing but padding and filled surroundings", id="MR without an image"),
        pytest.param(_filled(7), "CR", "x", "", id="another modality"),
        pytest.param(_filled(7), "", "x", "", id="no modality"),
    ],
)
def test_a_rule_that_cannot_stand_gives_way_with_its_reason(
    values: Plane, modality: str, unit: str, reason: str
) -> None:
    content = find_content(values, modality=modality, unit=unit)
    assert (content.rule, content.reason) == ("padding-only-1", reason)
    assert content.mask.all()


def test_elsewhere_content_is_the_frame_less_its_padding() -> None:
    padding = _disc(20)
    content = find_content(np.zeros((128, 128)), modality="CR", unit="x", padding=padding)
    assert (content.mask == ~padding).all()


@pytest.mark.parametrize("modality", ["CT", "MR", "CR"])
def test_a_frame_of_padding_only_has_no_content(modality: str) -> None:
    padding = np.ones((32, 32), np.bool_)
    content = find_content(np.zeros((32, 32)), modality=modality, unit="HU", padding=padding)
    assert content.pixels == 0


@pytest.mark.parametrize("shape", [(1, 1), (1, 64), (3, 5), (7, 2)], ids=str)
@pytest.mark.parametrize("modality", ["CT", "MR", "CR"])
def test_frames_of_any_size_have_content(shape: tuple[int, int], modality: str) -> None:
    content = find_content(np.full(shape, 20.0), modality=modality, unit="HU")
    assert isinstance(content, Content)
    assert content.mask.shape == shape


def test_the_head_of_a_real_ct_is_told_from_padding_and_air(ct_pair: tuple[Plane, Plane]) -> None:
    values, _ = ct_pair
    padding = values == -3024
    content = find_content(values, modality="CT", unit="HU", padding=padding)
    assert content.rule == "ct-air-1"
    assert not content.mask[padding].any()
    assert content.mask[(values > -300) & _disc(90, 256, 256, 512)].all()
    # By eye: the head fills a good quarter of the frame.
    assert 0.25 < content.mask.mean() < 0.4
