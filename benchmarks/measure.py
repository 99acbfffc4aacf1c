"""What the benchmarks share: interleaved timing, the table, and the record of what ran."""

from __future__ import annotations

import datetime
import gc
import json
import os
import platform
import statistics
import time
from collections.abc import Callable, Iterable, Mapping, Sequence
from importlib.metadata import version
from pathlib import Path
from typing import Any

ROOT = Path(__file__).resolve().parent.parent
RESULTS = Path(__file__).resolve().parent / "results"

Timings = dict[str, list[float]]


def interleaved(
    calls: Mapping[str, Callable[[], object]], *, rounds: int, shortest: float = 0.01
) -> Timings:
    """Return processor seconds per call, round by round; in each round every call has its turn.

    All of it runs on one thread. The time of the processor leaves out what other programs take,
    which would fall on long calls more than on short ones and so bend their ratio.

    Parameters
    ----------
    calls : dict
        Name -> what to call.
    rounds : int
        How many seconds per call to return for each name.
    shortest : float
        Seconds that a turn takes at least; short calls are repeated to fill it.
    """
    repeats = {}
    for name, call in calls.items():
        call()  # the first call loads modules
        began = time.process_time()
        call()
        took = time.process_time() - began
        repeats[name] = max(1, round(shortest / max(took, 1e-9)))
    seconds: Timings = {name: [] for name in calls}
    collecting = gc.isenabled()
    gc.disable()
    try:
        for _ in range(rounds):
            for name, call in calls.items():
                count = repeats[name]
                began = time.process_time()
                for _ in range(count):
                    call()
                seconds[name].append((time.process_time() - began) / count)
            gc.collect()
    finally:
        if collecting:
            gc.enable()
    return seconds


def ratio(seconds: Timings, above: str, below: str, *, times: float = 1.0) -> float:
    """Return the median of one name over the median of another (taken `times` times)."""
    return statistics.median(seconds[above]) / (times * statistics.median(seconds[below]))


def table(header: Sequence[str], rows: Iterable[Sequence[str]]) -> str:
    """Return a table: the first column to the left, the others to the right."""
    lines = [list(header), *map(list, rows)]
    widths = [max(len(line[k]) for line in lines) for k in range(len(header))]
    return "\n".join(
        "  ".join(
            cell.ljust(width) if k == 0 else cell.rjust(width)
            for k, (cell, width) in enumerate(zip(line, widths, strict=True))
        ).rstrip()
        for line in lines
    )


def save(name: str, content: dict[str, Any]) -> Path:
    """Write a dated record with what it ran on; a second run on one day replaces the first."""
    import realize

    today = datetime.datetime.now(datetime.UTC).date().isoformat()
    record = {"date": today, "realize": realize.__version__, "environment": environment()}
    RESULTS.mkdir(exist_ok=True)
    target = RESULTS / f"{today}-{name}.json"
    target.write_text(json.dumps(record | content, indent=2, allow_nan=False) + "\n", "ascii")
    return target


def environment() -> dict[str, Any]:
    """Return versions, machine and threads: each of them can move a number."""
    import numpy as np

    config: dict[str, Any] = np.show_config(mode="dicts")  # type: ignore[assignment]
    blas = config.get("Build Dependencies", {}).get("blas", {})
    return {
        "python": platform.python_version(),
        **{name: version(name) for name in ("numpy", "scipy", "python-flint")},
        "blas": f"{blas.get('name', 'unknown')} {blas.get('version', '')}".strip(),
        "blas_threads": int(os.environ["OPENBLAS_NUM_THREADS"]),
        "system": platform.system(),
        "machine": platform.machine(),
        "processor": _processor(),
        "cores": os.cpu_count(),
    }


def _processor() -> str:
    """Return the name of the processor, which `platform` does not know on Linux."""
    information = Path("/proc/cpuinfo")
    if information.exists():
        for line in information.read_text("utf-8").splitlines():
            if line.startswith("model name"):
                return line.split(":", 1)[1].strip()
    return platform.processor() or "unknown"
