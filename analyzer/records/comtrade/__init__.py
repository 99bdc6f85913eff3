"""COMTRADE: IEEE C37.111-1991, -1999 and IEC 60255-24:2013 (IEEE C37.111-2013)."""

from analyzer.records.comtrade.reader import read_comtrade
from analyzer.records.comtrade.writer import write_comtrade

__all__ = ["read_comtrade", "write_comtrade"]
