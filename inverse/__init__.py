"""From a target beam to a TIR lens that can be moulded. Open ``pipeline.py`` first."""

__version__ = "0.1.0"
