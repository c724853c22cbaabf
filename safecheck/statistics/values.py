"""Values of a measure from its table, and the damage that they stand for."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from safecheck.measures.catalogue import Measure
from safecheck.record.tables import TableReader

__all__ = ["damage_of", "values_of"]


def values_of(reader: TableReader, measure: Measure) -> npt.NDArray[np.float64]:
    """Return the measure's column, (rows,), NaN where there is no value.

    Where nothing changed, a ratio that is infinite stands in the table as null, and here as infinity.
    """
    values = reader.numbers(measure.column)
    if measure.null_when_equal:
        over_frame = "rmse_frame" if reader.table == "measures" else "rmse"
        error = reader.numbers("rmse_content" if "content" in measure.column else over_frame)
        values = np.where(np.isnan(values) & (error == 0), np.inf, values)
    return values


def damage_of(measure: Measure, values: npt.NDArray[np.float64]) -> npt.NDArray[np.float64]:
    """Turn values into sizes that grow with the change and are 0 where nothing changed.

    The size of an error is its absolute value; that of a PSNR the error as a share of its peak, 10^(-value / 20); that
    of an index that falls from 1 or a percentage that falls from 100 what is missing to them (below 0 where more is
    there than before).
    """
    if measure.worse == "higher":
        return np.abs(values)
    if measure.unit == "dB":
        return np.asarray(10.0 ** (-values / 20), dtype=np.float64)
    return (100.0 if measure.unit == "%" else 1.0) - values
