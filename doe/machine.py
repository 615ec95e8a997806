"""What this machine offers: cores, memory within its limits, and the instruction set."""

import os
import platform
from pathlib import Path

BASE_BYTES = 350_000_000  # libraries loaded and programs compiled
BYTES_PER_PIXEL = (
    60  # one start of a descent in float32 takes 50 with its optimiser; the rest, scores
)


def cores() -> int:
    """Processor cores this process may use."""
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1


def memory_budget() -> int:
    """Bytes a job may take: half of what the machine and its control group leave available."""
    free = [line for line in read("/proc/meminfo").splitlines() if line.startswith("MemAvailable")]
    known = [int(free[0].split()[1]) * 1024] if free else []
    limit = read("/sys/fs/cgroup/memory.max").strip()
    if limit.isdigit():
        used = read("/sys/fs/cgroup/memory.current").strip()
        known.append(int(limit) - int(used or 0))
    return min(known, default=4_000_000_000) // 2


def memory_needed(pixels: int) -> int:
    """Estimated peak bytes of a design with `pixels` pixels, one start at a time."""
    return BASE_BYTES + BYTES_PER_PIXEL * pixels


def pixels_that_fit(budget: int) -> int:
    """The most pixels a memory budget [bytes] allows."""
    return max(0, (budget - BASE_BYTES) // BYTES_PER_PIXEL)


def instruction_set() -> str:
    """The vector instructions that decide the last bits of a result."""
    flags = read("/proc/cpuinfo").split()
    known = [name for name in ("avx512f", "avx2", "avx", "sse4_2") if name in flags]
    return known[0] if known else platform.machine()


def read(path: str) -> str:
    """Text of a system file, empty where there is none."""
    try:
        return Path(path).read_text()
    except OSError:
        return ""
