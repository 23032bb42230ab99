"""What of a decoder file takes more than one key to see."""

from __future__ import annotations

from collections.abc import Callable

from tbkit.contract import Contract, Count, Port, Slice
from tbkit.yamltree import Section

Note = Callable[..., None]


def check_together(contract: Contract, top: Section) -> None:
    """Note what does not fit together; a section that is not sound in itself is left out of it."""

    def note(text: str, key: str, *others: str) -> None:
        """Note a problem at ``key``, or at the whole file where that is not given."""
        entries = [entry for each in (key, *others) if (entry := top.get(each))]
        if top.entry.is_map and all(entry.sound for entry in entries):
            (top.get(key) or top.entry).problem(text)

    if contract.count is None and contract.step is None:
        note("a decoder needs a `count` or a `step` output: without one there is nothing to check", "direction")
    if contract.count is not None and not _in_range(contract.count, contract.start.count):
        note(f"the start count {contract.start.count} {_outside(contract.count)}", "start", "count")
    if contract.clock.tick and contract.reset and contract.reset.clocks < 2:
        note("with a tick, write how many ticks the reset lasts, 2 at least", "reset")
    _check_index(contract, note)
    _check_inputs(contract, note)
    _check_language(contract, note)
    _check_ports(contract, note)


def _check_index(contract: Contract, note: Note) -> None:
    if contract.index is None:
        return
    if contract.index_line is None:
        note("an index action needs the index line; add it as `lines: {index: enc_z}`", "index", "lines")
    if contract.index.action != "pulse" and contract.count is None:
        note("an index action other than `pulse` needs a `count` output", "index")
    if contract.count is not None and not _in_range(contract.count, contract.index.value):
        note(f"the value {contract.index.value} {_outside(contract.count)}", "index", "count")


def _check_inputs(contract: Contract, note: Note) -> None:
    if contract.input("clear-error") and (contract.error is None or not contract.error.sticky):
        note("a clear-error input needs `error: {kind: sticky}`", "inputs", "error")
    for role in ("clear-count", "preload"):
        one = contract.input(role)
        if one and contract.count is None:
            note(f"a {role} input needs a `count` output", "inputs")
        elif one and contract.count and not _in_range(contract.count, one.value):
            note(f"the value {one.value} of the {role} input {_outside(contract.count)}", "inputs", "count")
    latency, index = contract.latency, contract.index
    for role in ("arm", "arm-once"):
        if contract.input(role) and index is None:
            note(f"an {role} input needs an `index` action", "inputs")
    if contract.input("arm-once") and index and index.action == "set" and not index.edge:
        note("with an arm-once input the index acts once each time; write `sense: edge` for the index", "index", "inputs")
    if contract.input("arm-once") and not (latency.inputs.exact and latency.index.exact):
        note("with an arm-once input the latencies `inputs` and `index` must be one number each", "latency", "inputs")
    if contract.input("latch"):
        _check_latch(contract, note)


def _check_latch(contract: Contract, note: Note) -> None:
    latency, index, direction = contract.latency, contract.index, contract.direction
    if contract.count is None:
        note("a latch input needs a `count` output, which it makes readable", "inputs")
    if not contract.clock.port or contract.clock.tick:
        note("a latch input needs a clock, without a tick", "inputs", "clock")
    if direction and direction.with_count:
        note(
            "on a count that is read through a latch nobody sees when it moves; write `valid: always`, or leave it out", "direction"
        )
    if not (latency.count.exact and latency.inputs.exact):
        note("with a latch input the latencies `count` and `inputs` must be one number each", "latency", "inputs")
    if index and index.action == "latch":
        note("the index cannot be checked to latch a count that is itself read through a latch", "index", "inputs")
    if index and index.action == "set" and latency.index != latency.count:
        note("with a latch input the latency `index` must be that of `count`", "latency", "inputs")


def _check_language(contract: Contract, note: Note) -> None:
    vhdl = contract.design.language == "vhdl"
    for key, one in uses_of_ports(contract):
        if "." in one.port and not vhdl:
            note(f"{one.port!r} is part of a record, which only VHDL ports have", key, "decoder")
    if vhdl and contract.start.zeroed:
        note("`power_up: zero` is for Verilog; give the VHDL signals initial values", "start")


def _in_range(count: Count, value: int) -> bool:
    return count.lowest <= value <= count.highest


def _outside(count: Count) -> str:
    return f"is outside the count's range {count.lowest} to {count.highest}"


def uses_of_ports(contract: Contract) -> list[tuple[str, Slice]]:
    """Every use of a port, with the key of the decoder file that it stands under."""
    ports: list[tuple[str, Port | None]] = [
        ("clock", Port(contract.clock.port)),
        ("clock", contract.clock.tick),
        ("reset", contract.reset.port if contract.reset else None),
        ("lines", contract.a),
        ("lines", contract.b),
        ("lines", contract.index_line),
        *(("inputs", one.port) for one in contract.inputs),
        *(("inputs", Port(constant.port)) for constant in contract.constants),
    ]
    keys = {"up": "step", "down": "step"}
    used = [(key, Slice(port.name, port.bit, port.bit)) for key, port in ports if port is not None]
    used += [(keys.get(output.name, output.name), one) for output in contract.outputs for one in output.slices]
    return [(key, one) for key, one in used if one.port]


def _check_ports(contract: Contract, note: Note) -> None:
    """Every bit of a port is used once; a port that is used whole is used once."""
    seen: dict[str, list[tuple[Slice, str]]] = {}
    for key, one in uses_of_ports(contract):
        uses = seen.setdefault(one.port, [])
        clash = next((other for before, other in uses if _overlap(before, one)), None)
        if clash:
            bits = "" if one.high is None else f"[{one.high}]" if one.high == one.low else f"[{one.high}:{one.low}]"
            note(f"the port {one.port + bits!r} is used twice" + (f"; `{clash}` uses it already" if clash != key else ""), key)
        uses.append((one, key))


def _overlap(one: Slice, other: Slice) -> bool:
    if one.high is None or one.low is None or other.high is None or other.low is None:
        return True
    return one.low <= other.high and other.low <= one.high
