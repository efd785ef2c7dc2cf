"""How much memory there is, and the finest spacing that fits into it."""

from __future__ import annotations

import math
import os
import time
from collections.abc import Callable
from functools import lru_cache
from pathlib import Path

#: Share of the available memory that a run may plan to use; the rest is for what is not counted.
USABLE_SHARE = 0.85
_CONTROL_GROUP = Path("/sys/fs/cgroup")


def available_memory() -> int:
    """Return the memory that a new process can still take, bytes; looked up once a second.

    On Linux the kernel's own estimate, or what the control group has left when that is less;
    elsewhere the physical memory.
    """
    return _available(int(time.monotonic()))


@lru_cache(maxsize=1)
def _available(_: int) -> int:
    amounts = [_meminfo("MemAvailable"), _group_left()]
    known = [amount for amount in amounts if amount is not None]
    if known:
        return min(known)
    return os.sysconf("SC_PAGE_SIZE") * os.sysconf("SC_PHYS_PAGES")


def finest_spacing(
    need: Callable[[float], int], available: int, spacing: float, digits: int = 3
) -> float:
    """Return the smallest spacing whose memory need fits, rounded up.

    Parameters
    ----------
    need : callable
        Spacing (nm) -> bytes, falling with the spacing.
    available : int
        Bytes.
    spacing : float
        A spacing (nm) that does not fit.
    digits : int
        Significant digits of the answer.

    Examples
    --------
    >>> finest_spacing(lambda d: int(1e9 / d**3), available=10**7, spacing=1.0)
    4.65
    """
    low, high = spacing, 2 * spacing
    while need(high) > available:
        low, high = high, 2 * high
    while high / low > 1 + 10 ** -(digits + 1):
        middle = (low * high) ** 0.5
        low, high = (low, middle) if need(middle) <= available else (middle, high)
    step = 10.0 ** (math.floor(math.log10(high)) - digits + 1)
    return round(math.ceil(high / step - 1e-9) * step, 12)


def bytes_text(amount: float) -> str:
    """Return an amount of memory in words.

    >>> bytes_text(3.2e9)
    '2.98 GiB'
    """
    if amount >= 2**40:
        return f"{amount / 2**40:.3g} TiB"
    if amount >= 2**30:
        return f"{amount / 2**30:.3g} GiB"
    return f"{amount / 2**20:.3g} MiB"


def _meminfo(key: str) -> int | None:
    try:
        lines = Path("/proc/meminfo").read_text().splitlines()
    except OSError:
        return None
    for line in lines:
        name, _, value = line.partition(":")
        if name == key:
            return int(value.split()[0]) * 1024
    return None


def _group_left() -> int | None:
    """Return what the control group of this process may still take; None without a limit.

    The file cache counts as used there, but gives way to a program that needs memory.
    """
    for limit, used in (
        ("memory.max", "memory.current"),
        ("memory/memory.limit_in_bytes", "memory/memory.usage_in_bytes"),
    ):
        try:
            most = (_CONTROL_GROUP / limit).read_text().strip()
            now = (_CONTROL_GROUP / used).read_text().strip()
        except OSError:
            continue
        if most != "max":
            return max(0, int(most) - int(now) + _file_cache(_CONTROL_GROUP / limit))
    return None


def _file_cache(limit: Path) -> int:
    try:
        lines = (limit.parent / "memory.stat").read_text().splitlines()
    except OSError:
        return 0
    amounts = dict(line.split() for line in lines)
    return int(amounts.get("inactive_file", 0))
