"""How long reading takes beside other readers of the same bytes; run with -m bench on an idle machine.

Files are in the page cache for both sides. The sides take turns, the best time of each counts.
"""

from __future__ import annotations

import time
from contextlib import AbstractContextManager, nullcontext
from pathlib import Path
from typing import Literal

import numpy as np
import pandas as pd
import pyarrow as pa
import pytest
from numpy.testing import assert_allclose, assert_array_equal

from analyzer.examine import examine
from analyzer.records import Record, read
from analyzer.records.comtrade.writer import write_comtrade
from analyzer.theory.rl import RLFault
from tests.bench.files import ADDENDS, MULTIPLIERS, ROW, ascii_file, binary_file
from tests.bench.measuring import best_times_s, note

pytestmark = pytest.mark.bench


def test_binary_beside_numpy(tmp_path: Path) -> None:
    file = binary_file(tmp_path, n_bytes=200_000_000)

    def numpy_alone() -> np.ndarray:
        return np.fromfile(file.data, dtype=ROW)["analog"] * MULTIPLIERS + ADDENDS

    def here() -> np.ndarray:
        return read(file.configuration).signals()

    assert_array_equal(here(), numpy_alone().T)
    here_s, numpy_s = best_times_s(here, numpy_alone)
    note(
        what="BINARY, 200 MB, 24 analog channels: read and scale all",
        here=f"{here_s:.3f} s",
        beside=f"numpy fromfile and scaling {numpy_s:.3f} s",
        ratio=here_s / numpy_s,
        limit="1.5",
    )
    assert here_s <= 1.5 * numpy_s


@pytest.mark.parametrize("numbers", ["whole", "real"])
def test_ascii_beside_pandas(tmp_path: Path, numbers: Literal["whole", "real"]) -> None:
    """The limit is for whole numbers, as the standard had them in ASCII until 2013."""
    file = ascii_file(tmp_path, n_bytes=100_000_000, numbers=numbers)

    def pandas_alone() -> pd.DataFrame:
        return pd.read_csv(file.data, header=None, engine="c")

    def here() -> np.ndarray:
        return read(file.configuration).signals()

    frame, record = pandas_alone(), read(file.configuration)
    assert_allclose(record.stored(), frame.iloc[:, 2:26].to_numpy().T, rtol=1e-15)
    assert_array_equal(record.states("D3"), frame[28])
    del frame, record
    here_s, pandas_s = best_times_s(here, pandas_alone)
    note(
        what=f"ASCII, 100 MB, {numbers} numbers: read and scale all",
        here=f"{here_s:.3f} s",
        beside=f"pandas.read_csv, engine c {pandas_s:.3f} s",
        ratio=here_s / pandas_s,
        limit="1" if numbers == "whole" else "",
    )
    if numbers == "whole":
        assert here_s <= pandas_s


def test_ascii_beside_pandas_on_one_thread(tmp_path: Path) -> None:
    """Without a limit; in processor time, which other programs lengthen less than time on the clock."""
    file = ascii_file(tmp_path, n_bytes=100_000_000, numbers="whole")
    n_threads = pa.cpu_count()
    pa.set_cpu_count(1)
    try:
        with _one_thread_in_pandas():
            here_s, pandas_s = best_times_s(
                lambda: read(file.configuration).signals(),
                lambda: pd.read_csv(file.data, header=None, engine="c"),
                clock=time.process_time,
            )
    finally:
        pa.set_cpu_count(n_threads)
    note(
        what="ASCII, 100 MB, whole numbers, one thread, processor time",
        here=f"{here_s:.3f} s",
        beside=f"pandas.read_csv, engine c {pandas_s:.3f} s",
        ratio=here_s / pandas_s,
    )


def _one_thread_in_pandas() -> AbstractContextManager[object]:
    try:
        pd.get_option("mode.max_threads")
    except KeyError:  # versions before 3.1 only ever use one
        return nullcontext()
    return pd.option_context("mode.max_threads", 1)


def test_ascii_beside_an_independent_reader(tmp_path: Path) -> None:
    comtrade = pytest.importorskip("comtrade")
    file = ascii_file(tmp_path, n_bytes=100_000_000, numbers="whole")
    small = ascii_file(tmp_path, n_bytes=5_000_000, numbers="whole", stem="small")

    def independent(use_numpy_arrays: bool) -> object:
        other = comtrade.Comtrade(ignore_warnings=True, use_numpy_arrays=use_numpy_arrays)
        other.load(str(small.configuration), str(small.data))
        return other

    here_s, lists_s, arrays_s = best_times_s(
        lambda: read(file.configuration).signals(),
        lambda: independent(False),
        lambda: independent(True),
    )
    other_s = min(lists_s, arrays_s) * file.n_bytes / small.n_bytes
    note(
        what="ASCII, 100 MB, beside the package comtrade 0.2.0 (per byte; that one on 5 MB)",
        here=f"{here_s:.3f} s",
        beside=f"comtrade {other_s:.1f} s",
        ratio=here_s / other_s,
        limit="0.1",
    )
    assert here_s <= 0.1 * other_s


def test_examine_half_a_second(tmp_path: Path) -> None:
    (path, *_) = write_comtrade(_earth_fault(), tmp_path / "trip.cfg", revision=1999, encoding="binary")
    path = path.with_suffix(".cfg")
    took_s = []
    for _ in range(31):
        begin = time.perf_counter()
        findings = examine(read(path))
        took_s.append(time.perf_counter() - begin)
        assert len(findings.events) == 1
        assert findings.events[0].fault_type == "AG"
    median_s = float(np.median(took_s[1:]))
    note(
        what="Half a second of 8 channels, 96 samples per cycle: read and examine, median",
        here=f"{median_s * 1e3:.0f} ms",
        limit="150 ms",
    )
    assert median_s < 0.15


def _earth_fault() -> Record:
    """Phase A to ground at 0.2 s, in closed form, with load; 0.5 s at 96 samples per cycle of 50 Hz."""
    times_s = np.arange(2400) / 4800.0
    shift_rad = {"A": 0.0, "B": -2 * np.pi / 3, "C": 2 * np.pi / 3}
    angle_rad = {phase: 2 * np.pi * 50.0 * times_s + shift for phase, shift in shift_rad.items()}
    volts = {phase: np.sqrt(2) * 11.5e3 * np.sin(angle) for phase, angle in angle_rad.items()}
    amperes = {phase: np.sqrt(2) * 300.0 * np.sin(angle - 0.35) for phase, angle in angle_rad.items()}
    is_after = times_s >= 0.2
    fault = RLFault.from_x_over_r(
        x_over_r=12.0,
        symmetrical_rms_a=8000.0,
        voltage_rms_v=11.5e3,
        frequency_hz=50.0,
        inception_angle_deg=0.0,
        prefault_current_a=float(amperes["A"][is_after][0]),
    )
    amperes["A"][is_after] = fault.current(times_s[is_after] - 0.2)
    volts["A"][is_after] *= 0.4
    return Record.from_arrays(
        {
            **{f"I{phase}": (values, "A") for phase, values in amperes.items()},
            "IN": (sum(amperes.values()), "A"),
            **{f"V{phase}": (values, "V") for phase, values in volts.items()},
            "VN": (sum(volts.values()), "V"),
        },
        sample_rate_hz=4800.0,
        nominal_frequency_hz=50.0,
    )
