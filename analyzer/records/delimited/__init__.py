"""Delimited text: tables of numbers with one row for each sample."""

from analyzer.records.delimited.reading import read_delimited, sniff_delimited
from analyzer.records.delimited.writing import write_delimited

__all__ = ["read_delimited", "sniff_delimited", "write_delimited"]
