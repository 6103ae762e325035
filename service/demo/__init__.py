"""The invented depot; it calls `application` with its own clock and seed, and writes no table."""
