"""The second road: an independent Monte Carlo from the exported section."""
