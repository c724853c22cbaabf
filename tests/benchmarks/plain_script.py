"""What a physicist would write without this project: the same candidates and figures, one process, no controls.

Usage: python plain_script.py FOLDER RATIO [RATIO ...]
"""

from __future__ import annotations

import sys
from pathlib import Path

import numpy as np
import pydicom
from openjpeg.utils import decode_pixel_data, encode_array
from skimage.metrics import structural_similarity

WINDOWS = ((40.0, 400.0), (-600.0, 1500.0))


def display(values: np.ndarray, centre: float, width: float) -> np.ndarray:
    """LINEAR window of PS3.3 C.11.2 on 0 to 255."""
    return np.clip(((values - (centre - 0.5)) / (width - 1) + 0.5) * 255, 0, 255)


def main() -> None:
    """Recompress every file of a folder and measure."""
    folder, ratios = Path(sys.argv[1]), [float(part) for part in sys.argv[2:]]
    lines = 0
    for path in sorted(folder.rglob("*.dcm")):
        dataset = pydicom.dcmread(path)
        stored = dataset.pixel_array
        slope, intercept = float(dataset.RescaleSlope), float(dataset.RescaleIntercept)
        before = stored * slope + intercept
        for ratio in ratios:
            code = encode_array(stored, bits_stored=dataset.BitsStored, compression_ratios=[ratio])
            after = np.frombuffer(decode_pixel_data(code, version=2), stored.dtype).reshape(stored.shape)
            after = after * slope + intercept
            error = after - before
            rmse = float(np.sqrt(np.mean(error**2)))
            largest = float(np.abs(error).max())
            psnr = 20 * np.log10((2**dataset.BitsStored - 1) * slope / rmse)
            scores = [
                structural_similarity(
                    display(before, *window),
                    display(after, *window),
                    gaussian_weights=True,
                    sigma=1.5,
                    use_sample_covariance=False,
                    data_range=255,
                )
                for window in WINDOWS
            ]
            lines += bool(len(code) and largest >= 0 and psnr and scores)
    print(f"{lines} lines")  # noqa: T201


if __name__ == "__main__":
    main()
