"""The signals of one replay beside the record, as a table and as Parquet."""

from __future__ import annotations

import io

import numpy as np
import pandas as pd
import pyarrow as pa
import pyarrow.parquet as pq

from auditor.errors import OutputError, Problem
from auditor.logs.record import Record
from auditor.replay import Series


def series_frame(record: Record, series: Series) -> pd.DataFrame:
    """Return record and replay sample by sample.

    Returns
    -------
    DataFrame
        `time` (UTC), `setpoint`, `measurement`, `actuator` as recorded, `replayed_measurement`,
        `replayed_actuator`, and `updated`, true at the samples that were sent.
    """
    times = record.time_ns(np.arange(len(record)))
    return pd.DataFrame(
        {
            "time": pd.DatetimeIndex(times.view("datetime64[ns]")).tz_localize("UTC"),
            "setpoint": record.r,
            "measurement": record.y,
            "actuator": record.u,
            "replayed_measurement": series.y,
            "replayed_actuator": series.u,
            "updated": series.updated,
        }
    )


def series_parquet(record: Record, series: Series) -> bytes:
    """Write `series_frame` as Parquet."""
    sink = io.BytesIO()
    table = pa.Table.from_pandas(series_frame(record, series), preserve_index=False)
    pq.write_table(table.replace_schema_metadata(None), sink, compression="zstd")
    return sink.getvalue()


def series_bytes(record: Record, series: Series, suffix: str) -> bytes:
    """Write `series_frame` as `.csv` or `.parquet`.

    Raises
    ------
    OutputError
        Another suffix is asked for.
    """
    check_suffix(suffix)
    if suffix == ".parquet":
        return series_parquet(record, series)
    text: str = series_frame(record, series).to_csv(index=False, date_format="%Y-%m-%dT%H:%M:%S.%fZ")
    return text.encode("utf-8")


def check_suffix(suffix: str) -> None:
    """Say whether signals can be written with this suffix before anything is computed for them.

    Raises
    ------
    OutputError
        It is neither `.csv` nor `.parquet`.
    """
    if suffix not in (".csv", ".parquet"):
        what = "the series cannot be written in that format"
        raise OutputError(Problem(what=what, found=suffix or "no suffix", expected=".csv or .parquet"))
