"""What the figures were taken on."""

from __future__ import annotations

import os
import platform
import time
from importlib.metadata import version
from pathlib import Path

from semitau.core.engine import available_cores

LIBRARIES = ("numpy", "numba", "scipy", "uproot", "boost-histogram", "iminuit")


def machine() -> dict[str, str]:
    """Processor, cores, memory, system, versions; and the load by other programs when the run began."""
    return {
        "processor": _processor(),
        "cores": str(available_cores()),
        "memory": f"{os.sysconf('SC_PAGE_SIZE') * os.sysconf('SC_PHYS_PAGES') / 2**30:.0f} GiB",
        "system": f"{platform.system()} {platform.machine()}",
        "python": platform.python_version(),
        **{name: version(name) for name in LIBRARIES},
        "load before": f"{os.getloadavg()[0]:.2f}",
    }


def share_of_a_core(seconds: float = 0.5) -> float:
    """How much of one core this process gets; well below 1 on a busy machine, and then figures by the clock mislead."""
    cpu, wall = time.process_time(), time.perf_counter()
    while time.perf_counter() - wall < seconds:
        pass
    return (time.process_time() - cpu) / (time.perf_counter() - wall)


def _processor() -> str:
    try:
        lines = Path("/proc/cpuinfo").read_text().splitlines()
    except OSError:
        return platform.processor() or "unknown"
    found = {key.strip(): value.strip() for key, _, value in (line.partition(":") for line in lines)}
    name = found.get("model name", "unknown")
    if name == "unknown":
        name = " ".join(f"{key} {found[key]}" for key in ("vendor_id", "cpu family", "model") if key in found)
    wide = [feature for feature in ("avx512f", "avx2") if feature in found.get("flags", "")]
    return f"{name} ({', '.join(wide[:1]) or 'no AVX'})"
