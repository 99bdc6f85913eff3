"""What RL theory does not explain: one module for each family, each a function of an event's estimate."""

from analyzer.departures.residual import residual_structure
from analyzer.departures.ties import ties_broken
from analyzer.departures.window import short_window

__all__ = ["residual_structure", "short_window", "ties_broken"]
