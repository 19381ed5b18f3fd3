"""What this machine has to give: processors and memory, limits of containers and jobs included."""

from __future__ import annotations

import contextlib
import os
from pathlib import Path

_CGROUP = Path("/sys/fs/cgroup")
_MIB = 1 << 20


def processors() -> int:
    """Processors that this process may use."""
    own = len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1
    given = _number(os.environ.get("SLURM_CPUS_PER_TASK", ""))
    return max(1, own if given is None else min(own, given))


def available_memory() -> int | None:
    """Bytes that may be taken now: the least of what the system, the container and the job leave.

    None where nothing can be found out.
    """
    bounds = [_from_meminfo(), _from_cgroup(), _from_job()]
    known = [bound for bound in bounds if bound is not None]
    return min(known) if known else None


def _from_meminfo() -> int | None:
    with contextlib.suppress(OSError, ValueError, IndexError):
        for line in Path("/proc/meminfo").read_text().splitlines():
            if line.startswith("MemAvailable:"):
                return int(line.split()[1]) * 1024
    with contextlib.suppress(AttributeError, ValueError, OSError):
        return os.sysconf("SC_PAGE_SIZE") * os.sysconf("SC_PHYS_PAGES")
    return None


def _from_cgroup() -> int | None:
    """Room below the memory limit of the control group of this process (version 2) or container."""
    folders = [_CGROUP]
    with contextlib.suppress(OSError):
        for line in Path("/proc/self/cgroup").read_text().splitlines():
            if line.startswith("0::/"):
                inner = Path(line[4:])
                folders += [_CGROUP / inner, *(_CGROUP / p for p in inner.parents)]
    rooms = [_room(folder / "memory.max", folder / "memory.current") for folder in folders]
    rooms.append(
        _room(
            _CGROUP / "memory" / "memory.limit_in_bytes",
            _CGROUP / "memory" / "memory.usage_in_bytes",
        )
    )
    known = [room for room in rooms if room is not None]
    return min(known) if known else None


def _room(limit: Path, usage: Path) -> int | None:
    with contextlib.suppress(OSError, ValueError):
        return max(0, int(limit.read_text()) - int(usage.read_text()))
    return None


def _from_job() -> int | None:
    per_node = _number(os.environ.get("SLURM_MEM_PER_NODE", ""))
    per_cpu = _number(os.environ.get("SLURM_MEM_PER_CPU", ""))
    if per_node:
        return per_node * _MIB
    return per_cpu * _MIB * processors() if per_cpu else None


def _number(text: str) -> int | None:
    return int(text) if text.isdecimal() else None
