"""Where and with what figures were measured: a number without its machine says little."""

from __future__ import annotations

import datetime
import os
import platform
from importlib import metadata
from pathlib import Path

LIBRARIES = ("numpy", "scipy", "finufft", "mpmath")


def describe() -> str:
    """Date, processor, memory and versions, one line each."""
    versions = ", ".join(f"{name} {metadata.version(name)}" for name in LIBRARIES)
    return "\n".join(
        [
            f"date       {datetime.datetime.now(datetime.UTC).date().isoformat()}",
            f"processor  {_processor()}, {_cores()} cores available, {_gibibytes()} memory",
            f"system     {platform.system()} {platform.machine()}, Python {platform.python_version()}",
            f"libraries  {versions}",
        ]
    )


def _processor() -> str:
    """Model as the kernel reports it, with family and model number where the name alone is vague."""
    fields = _table(Path("/proc/cpuinfo"))
    name = fields.get("model name") or platform.processor() or "unknown processor"
    if "cpu family" in fields and "model" in fields:
        name += f" (family {fields['cpu family']}, model {fields['model']})"
    return name


def _cores() -> int:
    if hasattr(os, "sched_getaffinity"):
        return len(os.sched_getaffinity(0))
    return os.cpu_count() or 1


def _gibibytes() -> str:
    total = _table(Path("/proc/meminfo")).get("MemTotal", "")
    kibibytes = total.removesuffix(" kB")
    return f"{int(kibibytes) / 2**20:.1f} GiB" if kibibytes.isdecimal() else "unknown"


def _table(file: Path) -> dict[str, str]:
    """First value of each "name: value" line; empty where the system has no such file."""
    try:
        lines = file.read_text(encoding="utf-8").splitlines()
    except OSError:
        return {}
    found: dict[str, str] = {}
    for line in lines:
        name, _, value = line.partition(":")
        found.setdefault(name.strip(), value.strip())
    return found


if __name__ == "__main__":
    print(describe())
