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


def counted(count: Count, step: Int64s, zero: Bools, base: int) -> Int64s:
    """int64[n]: the count after each step from ``base`` on; where ``zero`` it is 0 whatever the step."""
    if len(step) == 0:
        return step
    total = np.cumsum(step)
    last_zero = np.maximum.accumulate(np.where(zero, np.arange(len(step)), -1))
    zeroed = last_zero >= 0
    # Sums of steps stay far below 2^63 even where the base does not, so they are brought into range apart.
    moved = np.where(zeroed, total - total[np.maximum(last_zero, 0)], total)
    exact = moved + np.where(zeroed, 0, base)
    if count.overflow == "hold":
        # Near the ends of int64 the sum itself could wrap.
        if abs(base) < 1 << 62 and exact.min() >= count.lowest and exact.max() <= count.highest:
            return exact
        values, value = [], base
        for by, to_zero in zip(step.tolist(), zero.tolist(), strict=True):
            value = 0 if to_zero else min(max(value + by, count.lowest), count.highest)
            values.append(value)
        return np.array(values, dtype=np.int64)
    if count.overflow == "modulo":
        return np.asarray(exact % count.size)
    # Two's complement does the rest, up to 64 bits.
    if count.width == 64:
        return exact
    return np.asarray(((exact - count.lowest) & ((1 << count.width) - 1)) + count.lowest)
