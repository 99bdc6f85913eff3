"""Large ASCII files are parsed in parts; where the cuts fall changes nothing. Runs with the default suite."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_array_equal

from analyzer.records.comtrade import ascii as ascii_module
from tests.records.comtrade.makers import ascii_rows, cfg, codes, record_of

# Whole numbers, then real ones, an empty field, the missing code of 1999, an exponent, whole ones again.
CELLS = ["-7", "30000", "0", "12.5", "-0.25", "", "99999", "1e3", "4", "5", "-6", "2147483648"]
VALUES = np.array([-7, 30000, 0, 12.5, -0.25, np.nan, np.nan, 1000, 4, 5, -6, 2147483648.0])
STATES = [0, 1, 1, 0, 0, 1, 0, 1, 1, 1, 0, 0]


@pytest.mark.parametrize("newline", ["\r\n", "\n", "\r"])
@pytest.mark.parametrize("part_bytes", [1, 17, 40, 1 << 20])
def test_where_a_file_is_cut_changes_nothing(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, part_bytes: int, newline: str
) -> None:
    monkeypatch.setattr(ascii_module, "_PART_BYTES", part_bytes)
    monkeypatch.setattr(ascii_module, "_LINE_BYTES", 3)
    data = ascii_rows([CELLS], [STATES], newline=newline)
    record = record_of(tmp_path, cfg(rates=["1000,12"]), data)
    assert_array_equal(record.stored()[0], VALUES)
    assert_array_equal(record.states("TRIP"), STATES)
    assert not codes(record) & {"numbers-jump", "lines-short", "fields-not-numbers"}


def test_later_lines_may_be_far_shorter_than_the_first(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(ascii_module, "_PART_BYTES", 200)
    cells = ["0" * 150 + str(k) for k in range(5)] + [str(k % 10) for k in range(995)]
    data = ascii_rows([cells], [[k % 2 for k in range(1000)]], stamps=[""] * 1000)
    record = record_of(tmp_path, cfg(rates=["1000,1000"]), data)
    assert_array_equal(record.stored()[0], [*range(5), *(k % 10 for k in range(995))])
    assert_array_equal(record.states("TRIP"), np.arange(1000) % 2)


def test_hexadecimal_digits_are_no_number(tmp_path: Path) -> None:
    data = ascii_rows([["16", "0x1F", "18", "19"]], [[0, 0, 0, 0]])
    record = record_of(tmp_path, cfg(), data)
    assert_array_equal(record.stored()[0], [16, np.nan, 18, 19])
    assert "fields-not-numbers" in codes(record)
