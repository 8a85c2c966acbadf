"""From a seed to the best mouldable lens."""
