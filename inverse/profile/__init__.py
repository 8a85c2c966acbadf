"""The lens as a shape."""
