"""A first lens without optimisation."""
