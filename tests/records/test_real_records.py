"""Every real record beside the project is read, and says what its list says of it."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from analyzer.records import Record, read
from tests.records.real_records import IDS, Listed, listed


@pytest.fixture(scope="module")
def records(shared_folder: Path) -> dict[str, Listed]:
    return listed(shared_folder / "records")


def opened(records: dict[str, Listed], key: str, folder: Path) -> Record:
    return read(records[key].path(folder))


def test_every_record_of_the_list_is_tested(records: dict[str, Listed]) -> None:
    assert sorted(records) == sorted(IDS)


@pytest.mark.parametrize("key", IDS)
def test_record_is_what_the_list_says(records: dict[str, Listed], key: str, tmp_path: Path) -> None:
    row = records[key].row
    record = opened(records, key, tmp_path)
    years = {"(none)": 1991, "1997": 1999, "2000": 1999, "2001": 1999}
    assert record.origin.revision == years.get(row["revision"]) or int(row["revision"])
    assert record.origin.encoding == row["encoding"].lower()
    assert len(record.analog) == int(row["n_analog"])
    assert len(record.digital) == int(row["n_digital"])
    assert (record.nominal_frequency_hz or 0.0) == float(row["nominal_hz"])
    assert record.duration_s == pytest.approx(float(row["duration_s"]), abs=6e-5)  # four decimals there
    sides = {c.side for c in record.analog}
    if row["side"] in ("P", "S"):
        assert ("primary" if row["side"] == "P" else "secondary") in sides
    else:
        assert sides == {"unstated"}
    quantities = {c.quantity for c in record.analog}
    if key not in UNITLESS:
        assert ("voltage" in quantities) == (row["has_v"] == "Y")
        assert ("current" in quantities) == (row["has_i"] == "Y")


# Quantities of these are told by names alone: no unit is given, or "none".
UNITLESS = {"pct02", "hvdc01", "hvdc04", "pnnl01", "pnnl02", "pnnl03"}


@pytest.mark.parametrize("key", IDS)
def test_every_sample_is_read(records: dict[str, Listed], key: str, tmp_path: Path) -> None:
    record = opened(records, key, tmp_path).survey()
    times = record.times()
    assert times[0] == 0.0
    assert np.all(np.diff(times) > 0)
    usable = [c.id for c in record.analog if c.refusal is None]
    values = record.signals(usable)
    assert values.shape == (len(usable), record.n_samples)
    assert not np.isinf(values).any()
    refused = [c for c in record.analog if c.refusal is not None]
    assert {c.refusal.code for c in refused if c.refusal} <= {"unknown-unit"}
    assert bool(refused) == any(p.code == "unknown-unit" for p in record.problems)
    missing = np.isnan(record.as_written()).any(axis=1).sum()
    assert bool(missing) == any(p.code == "missing-samples" for p in record.problems)
    for channel in record.digital[:20]:
        assert set(np.unique(record.states(channel.id))) <= {0, 1}
    assert all(p.message.isprintable() and p.where.isprintable() for p in record.problems)


@pytest.mark.parametrize("key", [k for k in IDS if k not in ("pnnl01", "pnnl02", "pnnl03", "tshort03")])
def test_to_frame(records: dict[str, Listed], key: str, tmp_path: Path) -> None:
    record = opened(records, key, tmp_path).between(0.0, 0.1)
    frame = record.to_frame()
    assert frame.shape == (record.n_samples, len(record.analog) + len(record.digital))
    assert frame.columns.is_unique
    assert frame.index.name == "time_s"


# The codes that the list's column of what is unusual makes one expect.
@pytest.mark.parametrize(
    ("key", "expected"),
    [
        ("pct02", {"frequency-unstated", "stamps-disagree"}),
        ("pct04", {"missing-samples", "foreign-missing-code"}),
        ("pct06", {"stamps-constant"}),
        ("pct07", {"missing-samples", "stamps-constant"}),
        ("pct08", {"text-encoding"}),
        ("pct10", set()),
        ("drews01", {"times-from-stamps"}),
        ("wisp01", {"odd-revision", "text-encoding"}),
        ("wisp02", {"counts-from-zero", "text-encoding"}),
        ("wisp03", {"times-from-stamps"}),
        ("wisp04", {"odd-revision"}),
        ("wisp05", {"counts-from-zero", "trigger-outside"}),
        ("gocom01", {"odd-revision"}),
        ("gocom02", {"empty-rate", "stamps-wrap", "text-encoding", "unknown-unit"}),
        ("ctio01", {"side-unstated", "odd-date", "stamps-jump", "text-encoding"}),
        ("ctio02", {"odd-section", "sample-count"}),
        ("ctpy03", {"stamps-jump", "unknown-unit"}),
        ("pycom01", {"stamps-wrap"}),
        ("qcom01", {"sample-count"}),
        ("qcom02", {"sample-count"}),
        ("nazir01", {"side-unstated", "counts-from-zero", "text-encoding"}),
        ("hvdc01", {"unknown-unit"}),
        ("tshort01", {"side-unstated", "zero-multiplier"}),
        ("tshort03", {"times-from-stamps", "data-cut-short"}),
        ("gdlp01", {"stamps-wrap"}),
    ],
)
def test_what_is_unusual_is_listed(
    records: dict[str, Listed], key: str, expected: set[str], tmp_path: Path
) -> None:
    record = opened(records, key, tmp_path).survey()
    assert expected <= {p.code for p in record.problems}


@pytest.mark.parametrize(
    ("key", "name"),
    [("ctpy01", "1号主变_高压侧_Ia"), ("nazir01", "Iв"), ("wisp02", "Ua_1СШ-110_ТН_110кВ")],
)
def test_names_in_other_alphabets(records: dict[str, Listed], key: str, name: str, tmp_path: Path) -> None:
    assert name in {c.id for c in opened(records, key, tmp_path).analog}


def test_rates_that_alias_the_power_frequency(records: dict[str, Listed], tmp_path: Path) -> None:
    record = opened(records, "ctpy01", tmp_path)
    assert [segment.rate_hz for segment in record.segments] == [3200.0, 50.0, 3200.0, 50.0]
    stamps_s = record.source.rows["stamp"] * 1e-6  # type: ignore[attr-defined]
    # The recorder's clock runs up to 0.06 % apart from its stated rates.
    np.testing.assert_allclose(record.times(), stamps_s, rtol=6e-4, atol=2e-6)
