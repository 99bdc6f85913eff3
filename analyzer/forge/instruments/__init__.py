"""What stands between a primary quantity and a recorded sample, each a frozen specification and a pure function."""
