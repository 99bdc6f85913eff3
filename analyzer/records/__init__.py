"""Reading and writing of disturbance records; knows nothing of faults."""

from analyzer.records.channels import AnalogChannel, DigitalChannel
from analyzer.records.model import Edges, Origin, Record
from analyzer.records.moment import Clock, Moment
from analyzer.records.options import ReadOptions
from analyzer.records.problems import Problem, RecordError
from analyzer.records.registry import Format, Found, find_records, read

__all__ = [
    "AnalogChannel",
    "Clock",
    "DigitalChannel",
    "Edges",
    "Format",
    "Found",
    "Moment",
    "Origin",
    "Problem",
    "ReadOptions",
    "Record",
    "RecordError",
    "find_records",
    "read",
]
