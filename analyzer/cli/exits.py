"""Exit codes."""

DONE = 0
DEPARTS = 1
WRONG_USE = 2
UNREADABLE = 3
INTERNAL_ERROR = 4
INTERRUPTED = 130  # as shells report a program stopped from the keyboard
