"""The brief: what is wanted, from a TOML file to frozen, checked objects. Start with ``build.py``."""

from inverse.brief.build import Brief, parse, read

__all__ = ["Brief", "parse", "read"]
