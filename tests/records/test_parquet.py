import json
from dataclasses import replace
from datetime import datetime, timedelta
from pathlib import Path

import numpy as np
import pandas as pd
import pyarrow.parquet as pq
import pytest

from analyzer.records.channels import AnalogChannel
from analyzer.records.model import Record
from analyzer.records.moment import Moment
from analyzer.records.parquet import write_parquet
from analyzer.records.problems import RecordError


def some_record() -> Record:
    start = Moment(
        second=datetime(2024, 5, 1, 12, 0, 0), nanosecond=250_000_000, utc_offset=timedelta(hours=1), digits=9
    )
    return Record.from_arrays(
        {"IA": ([1.5, np.nan, -2.5, 4.0], "kA"), "time_s": ([1.0, 2.0, 3.0, 4.0], "V")},
        sample_rate_hz=4000.0,
        digital={"trip": [0, 1, 1, 0]},
        station="Upper Bay",
        nominal_frequency_hz=50.0,
        start=start,
        trigger=start.later(0.0005),
    )


def test_values_times_and_states(tmp_path: Path) -> None:
    path = write_parquet(some_record(), tmp_path / "out.parquet")
    table = pq.read_table(path)
    assert table.column_names == ["time_s", "IA", "time_s #3", "trip"]
    assert table["time_s"].to_pylist() == [0.0, 0.00025, 0.0005, 0.00075]
    assert table["IA"].to_pylist() == [1500.0, None, -2500.0, 4000.0]
    assert table["trip"].to_pylist() == [False, True, True, False]
    assert pd.read_parquet(path)["IA"].isna().sum() == 1


def test_units_and_facts(tmp_path: Path) -> None:
    schema = pq.read_schema(write_parquet(some_record(), tmp_path / "out.parquet"))
    assert schema.field("IA").metadata[b"unit"] == b"A"
    assert schema.field("IA").metadata[b"quantity"] == b"current"
    assert schema.field("time_s").metadata[b"unit"] == b"s"
    assert schema.field("time_s #3").metadata[b"name"] == b"time_s"
    facts = schema.metadata
    assert facts[b"station"] == b"Upper Bay"
    assert facts[b"start"] == b"2024-05-01T12:00:00.250000000+01:00"
    assert float(facts[b"trigger_s"]) == 0.0005
    assert float(facts[b"nominal_frequency_hz"]) == 50.0
    assert json.loads(facts[b"sample_rates_hz"]) == [4000.0]
    assert b"device" not in facts


def test_unknown_unit_is_said_to_be_as_written(tmp_path: Path) -> None:
    record = some_record()
    strange = AnalogChannel(number=0, id="IA", name="IA", unit="furlong")
    path = write_parquet(replace(record, analog=(strange,)), tmp_path / "out.parquet")
    metadata = pq.read_schema(path).field("IA").metadata
    assert (metadata[b"unit"], metadata[b"as_written"]) == (b"furlong", b"yes")
    assert pq.read_table(path)["IA"].to_pylist() == [1.5, None, -2.5, 4.0]


def test_record_longer_than_a_block(tmp_path: Path) -> None:
    values = np.random.default_rng(3).normal(size=600_000)
    record = Record.from_arrays({"IA": (values, "A")}, sample_rate_hz=4000.0)
    table = pq.read_table(write_parquet(record, tmp_path / "out.parquet"))
    np.testing.assert_array_equal(table["IA"].to_numpy(), values)
    np.testing.assert_array_equal(table["time_s"].to_numpy(), record.times())


def test_existing_file_is_replaced_only_on_request(tmp_path: Path) -> None:
    path = write_parquet(some_record(), tmp_path / "out.parquet")
    with pytest.raises(RecordError) as caught:
        write_parquet(some_record(), path)
    assert caught.value.code == "exists"
    write_parquet(some_record(), path, existing="replace")
    assert list(tmp_path.iterdir()) == [path]
