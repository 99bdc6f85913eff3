"""Records with known truth: a simulated circuit, the instruments in front of the recorder, and the file."""
