"""How JAX is set up for a run: double precision, and compiled code kept between runs.

Compiling takes longer than tracing a small lens, so what was compiled stays in the user's cache folder.
"""

import os
import sys
from pathlib import Path


def cache_folder():
    """The user's cache folder for this package, by the custom of the system."""
    if sys.platform == "win32":
        root = os.environ.get("LOCALAPPDATA") or Path.home() / "AppData" / "Local"
    elif sys.platform == "darwin":
        root = Path.home() / "Library" / "Caches"
    else:  # XDG Base Directory Specification: a relative path there is to be ignored
        root = os.environ.get("XDG_CACHE_HOME", "")
        root = root if os.path.isabs(root) else Path.home() / ".cache"
    return Path(root) / "inverse" / "compiled"


def prepare():
    """Set JAX up. A cache folder that cannot be made is done without: the run is only slower."""
    import jax

    jax.config.update("jax_enable_x64", True)
    try:
        folder = cache_folder()
        folder.mkdir(parents=True, exist_ok=True)
        usable = os.access(folder, os.W_OK)
    except (OSError, RuntimeError):  # RuntimeError: a user without a home folder
        usable = False
    if usable:
        jax.config.update("jax_compilation_cache_dir", str(folder))
        jax.config.update("jax_persistent_cache_min_compile_time_secs", 0.0)


def prepare_if_loaded():
    """The same for commands that need no JAX, in case a room they use brought it."""
    if "jax" in sys.modules:
        prepare()
