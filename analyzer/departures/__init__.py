"""What RL theory does not explain: one module for each family, each a function of an event's estimate."""

from analyzer.departures.evolving import evolving_fault
from analyzer.departures.residual import residual_structure
from analyzer.departures.ties import ties_broken
from analyzer.departures.window import no_window, short_window

__all__ = ["evolving_fault", "no_window", "residual_structure", "short_window", "ties_broken"]
