"""What the benchmarks share: taking turns, ratios with their spread, and the book they are written to."""

import json
import os
import platform
import time
from datetime import date
from pathlib import Path

import jax
import numpy as np

BOOK = Path(__file__).parents[1] / "outputs" / "benchmark.json"


def note(name, **figures):
    """Print the figures and add them to the book, with the day and what it ran on."""
    BOOK.parent.mkdir(exist_ok=True)
    book = json.loads(BOOK.read_text()) if BOOK.exists() else {}
    book[name] = figures
    book["ran"] = {
        "date": str(date.today()),
        "cores": os.cpu_count(),
        "machine": platform.machine(),
        "jax": jax.__version__,
    }
    BOOK.write_text(json.dumps(book, indent=1, sort_keys=True))
    print(f"\n{name}: " + ", ".join(f"{k} {v:.4g}" if isinstance(v, float) else f"{k} {v}" for k, v in figures.items()))


def side_by_side(*calls, turns=40):
    """Seconds of each call, (turns, calls), in turn about, after two warm rounds."""
    found = []
    for _ in range(turns + 2):
        row = []
        for call in calls:
            begun = time.perf_counter()
            jax.block_until_ready(call())
            row.append(time.perf_counter() - begun)
        found.append(row)
    return np.array(found[2:])


def ratio(seconds, over, under):
    """Median of the ratios of neighbours, and their quartiles."""
    low, middle, high = np.quantile(seconds[:, over] / seconds[:, under], [0.25, 0.5, 0.75])
    return {"ratio": float(middle), "quartiles": [float(low), float(high)]}
