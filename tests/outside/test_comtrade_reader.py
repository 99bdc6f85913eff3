"""Values and times against an independent COMTRADE reader, the package ``comtrade`` 0.2.0 from PyPI.

Where it is known to depart from the standard its values are left out, with the reason beside; those places
are held against the standard itself in ``tests/records/comtrade``.
"""

from __future__ import annotations

import os
from pathlib import Path

import comtrade
import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal

from analyzer.records import Record, read
from tests.records.real_records import IDS, Listed, listed

# Its reader of rate lines steps into a stretch by the new rate's period; these recorders' stamps show the
# earlier rate's. Times are compared within the first stretch only.
STEPS_OTHERWISE = {"ctpy01", "ctpy02", "ctpy03", "wisp01"}


def independent(
    configuration: Path, data: Path | None = None, *, encoding: str = "utf-8"
) -> comtrade.Comtrade:
    """What the independent reader makes of a record, in double precision."""
    other = comtrade.Comtrade(ignore_warnings=True, use_double_precision=True, use_numpy_arrays=True)
    if data is None:
        other.load(str(configuration))
    else:
        other.load(str(configuration), str(data), encoding=encoding)
    return other


def assert_same(record: Record, other: comtrade.Comtrade, *, tell_missing: bool = True) -> None:
    """Equal values to the last bit of the encoding, equal states; `other` may promise more samples."""
    n = min(record.n_samples, other.total_samples)
    assert n > 0
    assert len(record.analog) == other.analog_count
    assert len(record.digital) == other.status_count
    values = record.as_written()
    for k, channel in enumerate(record.analog):
        theirs = np.asarray(other.analog[k])[:n]
        ours = values[k, :n]
        if not tell_missing:
            present = np.isfinite(ours)
            ours, theirs = ours[present], theirs[present]
        # a*x+b in two roundings each; a step of the encoding is far larger.
        step = abs(channel.multiplier) if record.origin.encoding != "float32" else 0.0
        assert_allclose(ours, theirs, rtol=4e-16, atol=1e-9 * step + 1e-300)
    for k, digital in enumerate(record.digital):
        assert_array_equal(record.states(digital.id)[:n], np.asarray(other.status[k])[:n])


@pytest.fixture(scope="module")
def samples(shared_folder: Path) -> Path:
    return shared_folder / "reference" / "comtrade_samples"


@pytest.mark.parametrize(
    "name",
    ["t1991_ascii", "t1991_binary", "t1999_ascii", "t1999_binary", "t1999_binary32", "t1999_float32",
     "t2013_ascii", "t2013_binary", "t2013_binary32", "t2013_float32", "e_missing_ascii99", "e_missing_bin",
     "e_skew", "e_timemult_nrates0", "m_b32", "m_ctrlz", "m_emptytime", "m_f32nan", "m_multirate", "m_ns"],
)  # fmt: skip
def test_reference_samples(samples: Path, name: str) -> None:
    record = read(samples / f"{name}.cfg")
    other = independent(samples / f"{name}.cfg", samples / f"{name}.dat")
    # In BINARY of 1991 it takes every -1 for a missing sample.
    assert_same(record, other, tell_missing=name != "t1991_binary")
    assert_allclose(record.times(), other.time, rtol=0, atol=1e-15)
    for k, channel in enumerate(record.analog):
        assert_allclose(record.channel_times(channel.id), other.analog_time[k], rtol=0, atol=1e-15)
    assert record.trigger_s == pytest.approx(other.trigger_time, abs=1e-12)


@pytest.mark.parametrize("name", ["cff_ascii", "cff_binary", "cff_float32"])
def test_reference_samples_in_one_file(samples: Path, name: str) -> None:
    record = read(samples / f"{name}.cff")
    other = independent(samples / f"{name}.cff")
    assert_same(record, other)
    assert_allclose(record.times(), other.time, rtol=0, atol=1e-15)


@pytest.fixture(scope="module")
def records(shared_folder: Path) -> dict[str, Listed]:
    return listed(shared_folder / "records")


# Section marks without a colon are no marks to it.
UNREAD = {"ctio02"}
ENCODINGS = {
    "pct08": "latin-1", "pct09": "latin-1", "wisp01": "cp1251", "wisp02": "cp1251", "gocom02": "gb18030",
    "ctio01": "gb18030", "ctpy01": "gb18030", "ctpy02": "gb18030", "ctpy03": "gb18030", "nazir01": "cp866",
    "hvdc01": "gb18030", "hvdc04": "gb18030", "pct05": "utf-8-sig", "drews01": "utf-8-sig",
}  # fmt: skip
# It does not know these codes of missing samples: 999999 in 1991, and of another revision than the file's.
MISSING_UNKNOWN = {"pct04", "gocom02", "tshort01"}


@pytest.mark.parametrize("key", [key for key in IDS if key not in UNREAD])
def test_real_records(records: dict[str, Listed], key: str, tmp_path: Path) -> None:
    configuration, *data = records[key].files
    record = read(records[key].path(tmp_path))
    if data:
        # Alone, since it reads the header by the encoding of the rest; blank lines are samples to it.
        content = data[0].read_bytes()
        alone = tmp_path / "alone.dat"
        if record.origin.encoding == "ascii":
            content = b"\n".join(line for line in content.splitlines() if line.strip())
        alone.write_bytes(content)
        alone.with_suffix(".cfg").write_bytes(configuration.read_bytes())
        encoding = ENCODINGS.get(key, "utf-8")
        other = independent(alone.with_suffix(".cfg"), alone, encoding=encoding)
    else:
        other = independent(configuration)
    assert_same(record, other, tell_missing=key not in MISSING_UNKNOWN)
    n = min(record.n_samples, other.total_samples)
    if key in STEPS_OTHERWISE:
        n = record.segments[0].stop
    from_zero = any(p.code == "counts-from-zero" for p in record.problems)
    theirs = np.asarray(other.time)[:n]
    if from_zero:  # it begins such a record one interval before its first sample
        theirs = theirs - theirs[0]
    if record.timebase.stamps_s is not None:
        theirs = theirs - theirs[0]
    assert_allclose(record.times()[:n], theirs, rtol=1e-12, atol=1e-12)


def _sample_files(folder: Path) -> list[tuple[Path, Path | None]]:
    pairs: list[tuple[Path, Path | None]] = [(path, None) for path in folder.glob("*.cff")]
    for path in folder.glob("*.cfg"):
        own = path.with_suffix(".dat")
        pairs.append((path, own if own.exists() else folder / "sample_ascii.dat"))
    return sorted(pairs)


def test_samples_of_the_readers_own_source_distribution(tmp_path: Path) -> None:
    place = os.environ.get("FAULTASSAY_COMTRADE_SDIST")
    if not place:
        pytest.skip("FAULTASSAY_COMTRADE_SDIST does not name the unpacked source distribution")
    pairs = _sample_files(Path(place) / "tests" / "sample_files")
    assert len(pairs) == 8
    for number, (configuration, data) in enumerate(pairs):
        folder = tmp_path / str(number)
        folder.mkdir()
        copy = folder / f"rec{configuration.suffix}"
        copy.write_bytes(configuration.read_bytes())
        if data is not None:
            (folder / "rec.dat").write_bytes(data.read_bytes())
        record = read(copy)
        assert record.n_samples in (5, 40, 301)
        encoding = "latin-1" if "iso8859" in configuration.stem else "utf-8-sig"
        other = independent(configuration, data, encoding=encoding)
        assert_same(record, other)
        assert_allclose(record.times(), other.time, rtol=1e-12, atol=1e-12)
