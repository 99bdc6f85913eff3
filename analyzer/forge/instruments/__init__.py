"""Instruments between the primary and the record, each a frozen specification and a pure function."""
