"""Files for the CAD colleague."""
