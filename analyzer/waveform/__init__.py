"""From the samples of a terminal to its events: what was before, when it began, when it ended."""
