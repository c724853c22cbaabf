import dataclasses
import subprocess
import sys

import pytest

from safecheck.measures.catalogue import IMAGE_UNIT, MEASURES, Measure
from safecheck.record import rows
from safecheck.wording import lint


@pytest.mark.parametrize("measure", MEASURES.values(), ids=MEASURES)
def test_a_measure_stands_in_its_table_in_its_unit(measure: Measure) -> None:
    columns = {column.name: column for column in rows.columns_of(rows.TABLES[measure.table])}
    assert measure.column in columns
    unit = {"levels": "display levels of 255", "%": "%"}.get(measure.unit, measure.unit)
    assert columns[measure.column].unit.startswith(unit)
    assert IMAGE_UNIT == rows.IMAGE_UNIT


@pytest.mark.parametrize("measure", MEASURES.values(), ids=MEASURES)
def test_a_measure_is_worded_as_outputs_must_be(measure: Measure) -> None:
    assert not list(lint(f"{measure.text} {measure.why_not}"))
    assert measure.text.endswith(".")
    assert measure.limitable == (measure.why_not == "")


def test_every_name_is_its_key_and_every_column_is_named_once() -> None:
    assert all(name == measure.name for name, measure in MEASURES.items())
    assert len({(measure.table, measure.column) for measure in MEASURES.values()}) == len(MEASURES)


@pytest.mark.parametrize("name", ["rmse_over_noise", "region_cnr_after"])
def test_what_rewards_smoothing_takes_no_limit(name: str) -> None:
    assert not MEASURES[name].limitable


def test_similarity_and_signal_are_worse_when_lower_and_errors_when_higher() -> None:
    lower = {name for name, measure in MEASURES.items() if measure.worse == "lower" and measure.limitable}
    assert lower == {
        *(f"psnr_peak_{peak}{where}_db" for peak in ("bits", "range") for where in ("", "_content")),
        *(f"region_psnr_peak_{peak}_db" for peak in ("bits", "range")),
        "ssim",
        "ssim_p05",
        "ssim_lowest",
        "region_ssim",
        "noise_sd_kept_percent",
    }


def test_a_measure_is_frozen() -> None:
    with pytest.raises(dataclasses.FrozenInstanceError, match="cannot assign"):
        MEASURES["ssim"].unit = "%"  # type: ignore[misc]


def test_reading_the_catalogue_loads_no_numerics() -> None:
    code = (
        "import sys, safecheck.measures.catalogue as c\n"
        "print(*[m for m in ('numpy', 'numba', 'scipy', 'skimage') if m in sys.modules])"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == ""
