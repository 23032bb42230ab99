"""The output trace: what the recorder wrote, as values over clock periods."""

from __future__ import annotations

from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np
import numpy.typing as npt

from tbkit.contract import Contract, Output
from tbkit.errors import SimulatorError
from tbkit.ordered import merged

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
    """The outputs a contract names, each as a series; levels are logical (1 = active).

    ``up``, ``down`` and ``step`` tell each step, and ``error`` each error of a contract that counts errors, by one clock of 1,
    whatever the output itself does. ``index`` is the output of the index.
    """

    count: Series | None = None
    direction: Series | None = None
    step: Series | None = None
    up: Series | None = None
    down: Series | None = None
    error: Series | None = None
    index: Series | None = None


@dataclass(frozen=True, slots=True)
class Field:
    """Where an output stands in a record: ``output.width`` bits from bit ``low`` on."""

    output: Output
    low: int


def fields(contract: Contract) -> tuple[Field, ...]:
    """The layout of a record's outputs; the bench template uses the same."""
    found: list[Field] = []
    low = 0
    for output in contract.outputs:
        found.append(Field(output, low))
        low += output.width
    return tuple(found)


def record_words(contract: Contract) -> int:
    """32-bit words that hold the outputs of one record."""
    last = fields(contract)[-1]
    return -(-(last.low + last.output.width) // 32)


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
        value, unknown = _slice(values, field).astype(np.int64), _slice(unknowns, field) != 0
        if field.output.active_low:
            value = 1 - value
        series[field.output.name] = compressed(period, value, unknown)
    return as_trace(contract, series)


def as_trace(contract: Contract, series: dict[str, Series]) -> Trace:
    """The trace of outputs as they were seen: bits as unsigned numbers, levels logical, by the names of the contract's outputs."""
    counting = [output for output in contract.outputs if contract.count and output.width == contract.count.width]
    meaning = dict(series)
    for output in counting:
        if output.name in ("count", "index"):
            meaning[output.name] = _signed(contract, series[output.name])
    if contract.step and contract.step.kind != "pulse":
        for output in contract.step.outputs:
            one = series[output.name]
            changed = np.flatnonzero(~one.unknown[1:] & ~one.unknown[:-1]) + 1
            if contract.step.kind == "level":
                changed = changed[one.value[changed] == 1]
            meaning[output.name] = _as_pulses(one, one.period[changed])
    if contract.error and contract.error.kind == "counter":
        one, size = series["error"], 1 << contract.error.output.width
        more = np.flatnonzero(~one.unknown[1:] & ~one.unknown[:-1] & (np.diff(one.value) % size > 0) & (one.value[1:] != 0)) + 1
        wraps = np.flatnonzero((one.value[1:] == 0) & (one.value[:-1] == size - 1)) + 1
        # A counter that makes more than a step at once has told an error in the clock after too, where there was none.
        jumps = more[(one.value[more] - one.value[more - 1]) % size > 1]
        meaning["error"] = _as_pulses(one, merged(one.period[more], one.period[wraps], one.period[jumps] + 1))
    return Trace(**meaning)


def _signed(contract: Contract, series: Series) -> Series:
    assert contract.count is not None
    width = contract.count.width
    if not contract.count.signed or width == 64:
        return series
    return replace(series, value=np.where(series.value >> (width - 1) & 1, series.value - (1 << width), series.value))


def _as_pulses(series: Series, ups: Int64s) -> Series:
    """One clock of 1 at each of ``ups``; unknown where ``series`` is."""
    unknown = np.diff(series.unknown.astype(np.int8), prepend=0, append=0)
    period = merged(series.period[:1], ups, ups + 1, series.period[np.flatnonzero(unknown[:-1])])
    return Series(period, np.isin(period, ups).astype(np.int64), series.unknown[series.at(period)])


def _slice(words: npt.NDArray[np.uint64], field: Field) -> npt.NDArray[np.uint64]:
    """The bits of one field in each record, as uint64."""
    width = field.output.width
    result = np.zeros(len(words), dtype=np.uint64)
    for n in range(words.shape[1]):
        shift = 32 * n - field.low
        if -32 < shift < width:
            word = words[:, n]
            result |= word << np.uint64(shift) if shift >= 0 else word >> np.uint64(-shift)
    mask = (1 << width) - 1
    return result & np.uint64(mask)


def compressed(period: Int64s, value: Int64s, unknown: npt.NDArray[np.bool_]) -> Series:
    keep = np.ones(len(period), dtype=bool)
    keep[1:] = (value[1:] != value[:-1]) | (unknown[1:] != unknown[:-1])
    return Series(period[keep], value[keep], unknown[keep])
