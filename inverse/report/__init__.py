"""Pictures and the page a person reads."""
