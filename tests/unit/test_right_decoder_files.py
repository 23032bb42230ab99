"""Between them the right decoders of the tests use every word of the decoder file."""

from __future__ import annotations

from pathlib import Path

import yaml

TESTS = Path(__file__).parents[1]
FILES = [
    *(TESTS / "decoders").glob("*.yaml"),
    *(TESTS.parent / "example_dut" / f"{n}.yaml" for n in ("spindle", "traverse", "knob")),
]

#: Keys, and after = one of their words.
WORDS = """
clock=none clock.port clock.rate clock.edge=rising clock.edge=falling clock.tick.port clock.tick.every
reset=none reset.port reset.active=low reset.active=high reset.kind=sync reset.kind=async reset.clocks
start.count start.rest_states=any start.settle start.power_up=zero
lines.a lines.b lines.index lines.a.port lines.a.active=low lines.index.active=low
inputs.*.role=clear-error inputs.*.role=clear-count inputs.*.role=preload inputs.*.role=enable inputs.*.role=arm
inputs.*.role=arm-once inputs.*.role=latch inputs.*.value inputs.*.width inputs.*.active=low inputs.*.sense=edge
inputs.*.step_together=counted inputs.*.resumes=anyhow
count.port count.width count.signed=True count.signed=False count.resolution=x1 count.resolution=x2 count.resolution=x4
count.at=10 count.at=01 count.at=11 count.forward=a-leads-b count.forward=b-leads-a
count.overflow=wrap count.overflow=hold count.overflow=modulo count.modulo count.lowest count.highest
direction.port direction.forward=0 direction.forward=1 direction.forward=UP
direction.valid=always direction.valid=with-count direction.valid=with-step
step.port step.up step.down step.kind=pulse step.kind=toggle step.kind=level step.active=low
error.port error.kind=pulse error.kind=sticky error.kind=counter error.active=low error.wins=set error.wins=clear
error.width error.overflow=hold
illegal.count=hold illegal.count=any illegal.count.00
index.action=zero index.action=load index.action=latch index.action=pulse index.value index.port index.active=low
index.when.a=0 index.when.a=1 index.when.b=0 index.when.b=1 index.sense=edge index.step_together=counted
latency.count latency.direction latency.step latency.error latency.index latency.clear latency.inputs
filter.rejects filter.passes filter.bursts=open shortest_state
decoder.top decoder.sources decoder.include_dirs decoder.parameters.* decoder.standard
""".split()


def words(path: str, value: object) -> set[str]:
    """Every key of a file with its value, and without; names that are the user's own as *."""
    if isinstance(value, dict):
        own = path in ("inputs", "decoder.parameters")
        return {word for key, inner in value.items() for word in words(f"{path}.{'*' if own else key}".lstrip("."), inner)} | {path}
    return {path, f"{path}={value}"}


def test_every_word_is_used() -> None:
    used = set().union(*(words("", yaml.safe_load(file.read_text("utf-8"))) for file in FILES))
    assert [word for word in WORDS if word not in used] == []


def test_every_shape_of_a_port_is_used() -> None:
    text = "".join(file.read_text("utf-8") for file in FILES)
    for shape in ('["', ":8]", 'a: "ab[', 'a: "ba[', "result.count", "latency: {count: ["):
        assert shape in text, shape
