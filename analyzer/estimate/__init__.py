"""From an event's samples to the quantities of RL-circuit theory, with their uncertainty."""
