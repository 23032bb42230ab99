"""What a contract's count becomes through steps, zeroing and the ends of its range."""

from __future__ import annotations

import numpy as np

from tbkit.contract import Count
from tbkit.expectation import Bools, Int64s


def into_range(count: Count, value: int) -> int:
    """``value`` as the count shows it; traces hold int64, so an unsigned 64-bit count is negative in its upper half."""
    if count.overflow == "hold":
        return min(max(value, count.lowest), count.highest)
    value = (value - count.lowest) % count.size + count.lowest
    return value - (1 << 64) if value >= 1 << 63 else value


def counted(count: Count, step: Int64s, sets: Bools, to: Int64s, base: int) -> Int64s:
    """int64[n]: the count after each step from ``base`` on; where ``sets`` it is ``to``, whatever the step."""
    if len(step) == 0:
        return step
    total = np.cumsum(step)
    last = np.maximum.accumulate(np.where(sets, np.arange(len(step)), -1))
    is_set = last >= 0
    at = np.maximum(last, 0)
    # Sums of steps stay far below 2^63 even where the base does not, so they are brought into range apart.
    exact = np.where(is_set, total - total[at] + to[at], total + base)
    if count.overflow == "hold":
        # Near the ends of int64 the sum itself could wrap.
        if abs(base) < 1 << 62 and exact.min() >= count.lowest and exact.max() <= count.highest:
            return exact
        values, now = [], base
        for by, is_set_here, value in zip(step.tolist(), sets.tolist(), to.tolist(), strict=True):
            now = min(max(value if is_set_here else now + by, count.lowest), count.highest)
            values.append(now)
        return np.array(values, dtype=np.int64)
    if count.overflow == "modulo":
        return np.asarray(exact % count.size)
    # Two's complement does the rest, up to 64 bits.
    if count.width == 64:
        return exact
    return np.asarray(((exact - count.lowest) & ((1 << count.width) - 1)) + count.lowest)
