"""What a person, a program and a CI server are told."""

from __future__ import annotations

import json
import shlex
import xml.etree.ElementTree as ET  # only written here
from collections import Counter
from collections.abc import Sequence
from dataclasses import asdict
from pathlib import Path

from rich.console import Console
from rich.markup import escape
from rich.text import Text

from tbkit import __version__
from tbkit.contract import Contract
from tbkit.findings import KINDS
from tbkit.verify import ProfileResult, Results

#: Kinds of finding shown in full on a terminal; the JSON holds more.
SHOWN = 5

CAUTION = (
    "Simulation at digital level of the RTL, parameters and simulator named above; "
    "no safety rating, no proof of timing, metastability or wiring."
)


def time_text(time_ps: int) -> str:
    """A time a person can read, without losing a digit."""
    for unit, size in (("s", 10**12), ("ms", 10**9), ("us", 10**6), ("ns", 10**3)):
        if time_ps >= size:
            whole, rest = divmod(time_ps, size)
            digits = f"{rest:0{len(str(size)) - 1}d}".rstrip("0")
            return f"{whole}.{digits} {unit}" if digits else f"{whole} {unit}"
    return f"{time_ps} ps"


def repeat_command(contract: Contract, results: Results, profile: ProfileResult, own_profiles: Sequence[Path]) -> str:
    """The command that shows one profile's findings again."""
    words = ["tbkit", "verify", str(contract.file), *(str(path) for path in own_profiles), "--only", profile.name]
    return shlex.join([*words, "--simulator", results.simulator.name, "--seed", str(profile.seed)])


def print_results(console: Console, contract: Contract, results: Results, own_profiles: Sequence[Path]) -> None:
    """The result a person reads in ten seconds."""
    console.print(f"[bold]{escape(str(contract.file))}[/] on {results.simulator}, tbkit {__version__}")
    width = max(len(profile.name) for profile in results.profiles)
    head = f"  {'profile':{width}} {'edges':>8} {'compared':>9} {'latency':>8}  result"
    console.print(head, style="dim")
    for profile in results.profiles:
        if profile.verdict != "left-out":
            console.print(_row(profile, width))
    reasons: dict[str, list[str]] = {}
    for profile in results.profiles:
        if profile.verdict == "left-out":
            reasons.setdefault(profile.reason, []).append(profile.name)
    for reason, names in reasons.items():
        console.print(f"  left out, {reason}: {', '.join(names)}", style="dim")
    for profile in results.profiles:
        for text in profile.undetectable:
            console.print(f"  no decoder can detect, in {profile.name}: {text}", style="dim", markup=False)
    failed = [profile for profile in results.profiles if profile.verdict == "fail"]
    # What was seen most comes first.
    kinds = [kind for kind, _ in sum((Counter(one.score.totals) for one in failed if one.score), Counter()).most_common()]
    for kind in kinds[:SHOWN]:
        _print_kind(console, contract, results, kind, own_profiles)
    if len(kinds) > SHOWN:
        console.print(f"\n  also found: {', '.join(kinds[SHOWN:])}; --json FILE writes every finding")
    _print_verdict(console, contract, results, failed)


def _row(profile: ProfileResult, width: int) -> Text:
    style, word = {
        "pass": ("green", "pass"),
        "fail": ("bold red", "FAIL"),
        "empty": ("bold red", "EMPTY"),
        "not-run": ("bold red", "NOT RUN"),
    }[profile.verdict]
    row = Text(f"  {profile.name:{width}} ")
    if profile.score is None:
        row.append(f"{'':>8} {'':>9} {'':>8}  ")
    else:
        latency = "" if profile.score.worst_latency is None else f"{profile.score.worst_latency} clk"
        row.append(f"{profile.edges:>8} {profile.comparisons:>9} {latency:>8}  ")
    row.append(word, style)
    if profile.score and profile.score.totals:
        row.append("  " + ", ".join(f"{kind} ×{many}" for kind, many in profile.score.totals.items()))
    if profile.reason:
        row.append(f"  {profile.reason}", "dim")
    return row


def _print_kind(console: Console, contract: Contract, results: Results, kind: str, own_profiles: Sequence[Path]) -> None:
    """One kind of finding, by its first in the shortest profile that shows it."""
    showing = [profile for profile in results.profiles if profile.score and kind in profile.score.totals]
    profile = min(showing, key=lambda one: one.edges)
    finding = next(one for one in profile.findings if one.kind == kind)
    total = sum(one.score.totals[kind] for one in showing if one.score)
    console.print()
    console.print(Text.assemble((f"  {kind}", "bold red"), f"  {KINDS[kind]}"))
    console.print(f"    seen      {_times(total)} in {', '.join(one.name for one in showing)}")
    console.print(f"    first     in {profile.name} at {time_text(finding.time_ps)}")
    console.print(f"    lines AB  {finding.states}", markup=False)
    console.print(f"    {finding.output:9} expected {finding.expected}, found {finding.found}", markup=False)
    console.print(f"    again     {repeat_command(contract, results, profile, own_profiles)}", style="cyan")


def _profiles(many: int) -> str:
    return f"{many} profile{'s' * (many != 1)}"


def _times(many: int) -> str:
    return "once" if many == 1 else f"{many} times"


def _print_verdict(console: Console, contract: Contract, results: Results, failed: Sequence[ProfileResult]) -> None:
    ran = [profile for profile in results.profiles if profile.verdict in ("pass", "fail", "empty")]
    edges, compared = sum(profile.edges for profile in ran), sum(profile.comparisons for profile in ran)
    console.print()
    if results.failure:
        console.print(Text(str(results.failure), "red"))
        console.print()
    match results.verdict:
        case "pass":
            text = Text.assemble(
                ("PASS", "bold green"), f"  {_profiles(len(ran))}, {edges} edges, {compared} comparisons, no finding"
            )
        case "fail":
            text = Text.assemble(("FAIL", "bold red"), f"  {len(failed)} of {_profiles(len(ran))} found the decoder wrong")
        case _:
            text = Text.assemble(("ERROR", "bold red"), "  no verdict: nothing was compared, or the simulator failed")
    console.print(text)
    open_clocks = sum(profile.score.open_clocks for profile in ran if profile.score)
    clocks = sum(profile.clocks for profile in ran)
    if clocks:
        share = f"{100 * (1 - open_clocks / clocks):.1f} % of {clocks} clocks compared"
        console.print(f"{share}; the rest is reset, or left open by the contract", style="dim")
    seen = results.exercised(contract)
    never = [behaviour for behaviour, many in seen.items() if not many]
    console.print(f"{len(seen) - len(never)} of {len(seen)} declared behaviours exercised", style="dim")
    if never:
        console.print(Text.assemble(("never exercised: ", "yellow"), ", ".join(never)))
    if contract.start.zeroed:
        console.print("registers without an initial value started at 0, as the decoder file says (power_up: zero)", style="dim")
    if not results.simulator.four_state:
        console.print(
            f"{results.simulator.name} has two-state logic: an output that would be X for ever cannot be seen here", style="dim"
        )
    console.print(CAUTION, style="dim")


def as_json(contract: Contract, seed: int, results: Sequence[Results]) -> str:
    """The results as JSON: one object, or a list of them for several simulators."""
    objects = [
        {
            "tbkit": __version__,
            "verdict": one.verdict,
            "decoder": str(contract.file),
            "simulator": str(one.simulator),
            "seed": seed,
            "failure": str(one.failure) if one.failure else None,
            "exercised": one.exercised(contract),
            "profiles": [
                {
                    "name": profile.name,
                    "verdict": profile.verdict,
                    "reason": profile.reason,
                    "seed": profile.seed,
                    "edges": profile.edges,
                    "clocks": profile.clocks,
                    "comparisons": profile.comparisons,
                    "worst_latency": profile.score.worst_latency if profile.score else None,
                    "open_clocks": profile.score.open_clocks if profile.score else None,
                    "undetectable": list(profile.undetectable),
                    "totals": profile.score.totals if profile.score else {},
                    "findings": [asdict(finding) for finding in profile.findings],
                }
                for profile in one.profiles
            ],
        }
        for one in results
    ]
    return json.dumps(objects[0] if len(objects) == 1 else objects, indent=2) + "\n"


def as_junit(contract: Contract, results: Sequence[Results]) -> str:
    """The results as JUnit XML: a suite for each simulator, a case for each profile."""
    root = ET.Element("testsuites", name="tbkit")
    for one in results:
        verdicts = [profile.verdict for profile in one.profiles]
        suite = ET.SubElement(
            root,
            "testsuite",
            name=f"{contract.file} on {one.simulator}",
            tests=str(len(verdicts)),
            failures=str(verdicts.count("fail")),
            errors=str(verdicts.count("empty") + verdicts.count("not-run")),
            skipped=str(verdicts.count("left-out")),
        )
        for profile in one.profiles:
            case = ET.SubElement(suite, "testcase", classname=f"{contract.file.stem}.{one.simulator.name}", name=profile.name)
            if profile.verdict == "fail":
                assert profile.score is not None
                totals = ", ".join(f"{kind} x{many}" for kind, many in profile.score.totals.items())
                node = ET.SubElement(case, "failure", type=profile.findings[0].kind, message=totals)
                node.text = "\n".join(
                    f"{f.kind} at {time_text(f.time_ps)}: {f.output}: expected {f.expected}, found {f.found} ({f.states})"
                    for f in profile.findings
                )
            elif profile.verdict in ("empty", "not-run"):
                ET.SubElement(case, "error", type=profile.verdict, message=profile.reason).text = str(one.failure or "")
            elif profile.verdict == "left-out":
                ET.SubElement(case, "skipped", message=profile.reason)
    ET.indent(root)
    return ET.tostring(root, "unicode", xml_declaration=True) + "\n"
