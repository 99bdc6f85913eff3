"""Which voltages and currents of a record belong together."""

from analyzer.terminals.assign import Terminal, assign_terminal

__all__ = ["Terminal", "assign_terminal"]
