"""The output trace: what the recorder wrote, as values over clock periods."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import numpy as np
import numpy.typing as npt

from tbkit.contract import Contract
from tbkit.errors import SimulatorError

Int64s = npt.NDArray[np.int64]


@dataclass(frozen=True, slots=True)
class Series:
    """One output: from ``period[i]`` on (as it stands at the end of a period) it is ``value[i]``.

    ``unknown[i]``: some bit was X or Z, and the value means nothing.
    """

    period: Int64s
    value: Int64s
    unknown: npt.NDArray[np.bool_]

    def at(self, periods: Int64s | int) -> Int64s:
        """Which entry is in force in each of ``periods``."""
        return np.asarray(np.searchsorted(self.period, periods, side="right") - 1)


@dataclass(frozen=True, slots=True)
class Trace:
    """The outputs a contract names, each as a series; levels are logical (1 = active)."""

    count: Series | None
    direction: Series | None
    step: Series | None
    error: Series | None


@dataclass(frozen=True, slots=True)
class Field:
    """Where an output stands in a record: ``width`` bits from bit ``low`` on."""

    name: str
    low: int
    width: int


def fields(contract: Contract) -> tuple[Field, ...]:
    """The layout of a record's outputs; the bench template uses the same."""
    widths = [
        ("count", contract.count.width if contract.count else 0),
        ("direction", 1 if contract.direction else 0),
        ("step", 1 if contract.step else 0),
        ("error", 1 if contract.error else 0),
    ]
    found: list[Field] = []
    low = 0
    for name, width in widths:
        if width:
            found.append(Field(name, low, width))
            low += width
    return tuple(found)


def record_words(contract: Contract) -> int:
    """32-bit words that hold the outputs of one record."""
    last = fields(contract)[-1]
    return -(-(last.low + last.width) // 32)


def read_trace(path: Path, contract: Contract, period_ps: int, periods: int) -> Trace:
    """Read a recorder's file: records of a 64-bit time in ps and the outputs in 4-state words.

    Raises:
        SimulatorError: the file is missing, cut short, or does not reach the end of the run.
    """
    words = record_words(contract)
    try:
        raw = np.fromfile(path, dtype="<u4")
    except OSError as error:
        msg = f"the simulator wrote no trace: {error.strerror}: {path}"
        raise SimulatorError(msg) from error
    size = 2 + 2 * words
    if len(raw) == 0 or len(raw) % size:
        msg = f"the simulator's trace {path} is cut short ({raw.nbytes} bytes; a record has {4 * size})"
        raise SimulatorError(msg)
    rows = raw.reshape(-1, size).astype(np.uint64)
    time_ps = (rows[:, 0] | rows[:, 1] << np.uint64(32)).astype(np.int64)
    if (np.diff(time_ps) < 0).any() or int(time_ps[-1]) != periods * period_ps:
        msg = f"the simulator's trace {path} ends at {int(time_ps[-1])} ps instead of {periods * period_ps} ps"
        raise SimulatorError(msg)
    period = time_ps // period_ps
    # The last record of a period tells how it ended; the very last one only marks the end of the run.
    last = np.flatnonzero(np.append(period[1:] != period[:-1], True))[:-1]
    rows, period = rows[last], period[last]
    values, unknowns = rows[:, 2::2], rows[:, 3::2]
    series: dict[str, Series] = {}
    for field in fields(contract):
        raw_value, raw_unknown = _slice(values, field), _slice(unknowns, field)
        value = raw_value.astype(np.int64)
        if field.name == "count" and contract.count is not None:
            if contract.count.signed and field.width < 64:
                value = np.where(value >> (field.width - 1) & 1, value - (1 << field.width), value)
        elif (field.name == "step" and contract.step and contract.step.active_low) or (
            field.name == "error" and contract.error and contract.error.port.active_low
        ):
            value = 1 - value
        series[field.name] = _compressed(period, value, raw_unknown != 0)
    return Trace(*(series.get(name) for name in ("count", "direction", "step", "error")))


def _slice(words: npt.NDArray[np.uint64], field: Field) -> npt.NDArray[np.uint64]:
    """The bits of one field in each record, as uint64."""
    result = np.zeros(len(words), dtype=np.uint64)
    for n in range(words.shape[1]):
        shift = 32 * n - field.low
        if -32 < shift < field.width:
            word = words[:, n]
            result |= word << np.uint64(shift) if shift >= 0 else word >> np.uint64(-shift)
    mask = (1 << field.width) - 1
    return result & np.uint64(mask)


def _compressed(period: Int64s, value: Int64s, unknown: npt.NDArray[np.bool_]) -> Series:
    keep = np.ones(len(period), dtype=bool)
    keep[1:] = (value[1:] != value[:-1]) | (unknown[1:] != unknown[:-1])
    return Series(period[keep], value[keep], unknown[keep])
