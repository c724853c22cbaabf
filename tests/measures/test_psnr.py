import numpy as np
import pytest
from skimage.metrics import peak_signal_noise_ratio

from safecheck.measures.planes import Plane
from safecheck.measures.pointwise import measure_errors
from safecheck.measures.psnr import measure_psnr_db


# Computed from the stated definition: an error of 1 everywhere, and of uniform rounding noise (MSE 1/12).
@pytest.mark.parametrize(
    ("peak", "of_one", "of_rounding"),
    [(255, 48.130804, 58.9226), (1023, 60.197513, 70.9893), (4095, 72.245078, 83.0369), (65535, 96.329466, 107.1213)],
    ids=str,
)
def test_psnr_of_known_errors(peak: float, of_one: float, of_rounding: float) -> None:
    assert measure_psnr_db(1.0, peak) == pytest.approx(of_one, abs=5e-7)
    assert measure_psnr_db((1 / 12) ** 0.5, peak) == pytest.approx(of_rounding, abs=5e-5)


# Computed from the stated definition: JPEG-LS with NEAR = n and uniform errors, MSE = n (n + 1) / 3.
@pytest.mark.parametrize(("near", "psnr"), [(1, 49.8917), (2, 45.1205), (3, 42.1102), (5, 38.1308)], ids=str)
def test_psnr_of_a_bounded_uniform_error(near: int, psnr: float) -> None:
    assert measure_psnr_db((near * (near + 1) / 3) ** 0.5, 255) == pytest.approx(psnr, abs=5e-5)


def test_psnr_of_real_pairs_is_that_of_scikit_image(real_pair: tuple[str, Plane, Plane]) -> None:
    _, before, after = real_pair
    frame, _ = measure_errors(before, after, np.ones(before.shape, np.bool_))
    expected = peak_signal_noise_ratio(before, after, data_range=4095)
    assert measure_psnr_db(frame.rmse, 4095) == pytest.approx(expected, rel=1e-9)


@pytest.mark.parametrize(
    ("rmse", "peak"),
    [
        pytest.param(0.0, 255, id="nothing changed"),
        pytest.param(None, 255, id="no error known"),
        pytest.param(1.0, None, id="no peak known"),
        pytest.param(1.0, 0.0, id="constant original"),
    ],
)
def test_psnr_is_null_where_it_does_not_exist(rmse: float | None, peak: float | None) -> None:
    assert measure_psnr_db(rmse, peak) is None
