"""Open photometric file formats."""
