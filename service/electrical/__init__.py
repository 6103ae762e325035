"""How a track circuit behaves: published linear models over plain SI numbers, no records and no HTTP."""
