"""The bench stage: builds the rendered bench once per digest, and plays stimuli on it.

The only stage that starts processes. It writes in one folder: ``build/<digest>`` for what is built, ``run/...`` for jobs.
"""

from __future__ import annotations

import contextlib
import hashlib
import json
import os
import re
import shutil
import signal
import subprocess
import sys
import tempfile
import time
import xml.etree.ElementTree as ET  # reads only what cocotb wrote a moment ago
from collections.abc import Callable, Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from importlib import metadata
from pathlib import Path

from tbkit import __version__
from tbkit.contract import BENCH, Contract, Design
from tbkit.errors import SimulatorError
from tbkit.render import Rendered, render_bench
from tbkit.render_vhdl import render_vhdl
from tbkit.simulators import Simulator
from tbkit.stimulus import Stimulus
from tbkit.vhdlports import read_ports

BUILD_SECONDS = 600
#: A run gets this long, and a second for this many clock periods: far slower than any simulator that is alive.
RUN_SECONDS = 60
SLOWEST_CLOCKS_PER_SECOND = 10_000
#: Below this many clock periods a second process costs more than it saves.
WORTH_A_PROCESS = 100_000
LOG_LINES_SHOWN = 30

#: Warnings about the decoder's instance in the bench: Icarus's two, then Verilator's.
_MISFIT = re.compile(
    r"warning: (Port \d+ \(\w+\) of \S+ expects \d+ bits, got \d+|parameter \S+ not found in \S+)"
    r"|%Warning-WIDTH(?:EXPAND|TRUNC): \S+ ((?:In|Out)put port connection .*)"
)
_INCLUDE = re.compile(r'`include\s+"([^"\n]+)"')


@dataclass(frozen=True, slots=True)
class Build:
    """A bench that is ready to run."""

    simulator: Simulator
    folder: Path


@dataclass(frozen=True, slots=True)
class Played:
    """The trace files of the stimuli that were played to their end, by place in the list; and why others are missing."""

    traces: dict[int, Path]
    failure: SimulatorError | None


def _environment(simulator: Simulator) -> dict[str, str]:
    """The parent's environment without what would override the runner's arguments, or make it think it is in pytest."""
    unwanted = ("COCOTB_", "GPI_", "PYGPI_")
    kept = {
        name: value
        for name, value in os.environ.items()
        if not name.startswith(unwanted) and name not in ("WAVES", "GUI", "PYTEST_CURRENT_TEST", "TOPLEVEL", "MODULE")
    }
    return {**kept, **dict(simulator.environment), "PYTHONUNBUFFERED": "1"}


def _launch(request: dict[str, object], folder: Path, simulator: Simulator, seconds: float) -> tuple[int | None, str]:
    """Run :mod:`tbkit.launch`; returns its exit code (None: killed because it ran longer than ``seconds``) and its log."""
    request_file, log_file = folder / "request.json", folder / "log.txt"
    request_file.write_text(json.dumps(request, indent=1), "utf-8")
    with log_file.open("wb") as log:
        process = subprocess.Popen(  # noqa: S603  # our own module, no shell
            [sys.executable, "-m", "tbkit.launch", str(request_file)],
            stdin=subprocess.DEVNULL,
            stdout=log,
            stderr=subprocess.STDOUT,
            env=_environment(simulator),
            start_new_session=True,
        )
        try:
            code: int | None = process.wait(timeout=seconds)
        except subprocess.TimeoutExpired:
            code = None
        finally:
            # Whatever it started dies with it, also when the tool is interrupted.
            with contextlib.suppress(ProcessLookupError):
                os.killpg(process.pid, signal.SIGKILL)
            process.wait()
    return code, log_file.read_text("utf-8", "replace")


def _shown(log: str) -> str:
    """The part of a log that says what is wrong."""
    lines = [line for line in log.splitlines() if line.strip()]
    cut = next((n for n, line in enumerate(lines) if line.startswith("Traceback (most recent call last)")), len(lines))
    lines = lines[:cut] or lines
    if len(lines) > LOG_LINES_SHOWN:
        # A compiler's first message matters, a simulator's last.
        half = LOG_LINES_SHOWN // 2
        lines = [*lines[:half], f"... {len(lines) - 2 * half} lines left out ...", *lines[-half:]]
    return "\n".join(f"  {line}" for line in lines)


def _traced(log: str, bench: Rendered) -> str:
    """A log in which messages about lines of the bench tell the line of the template too."""

    def led_back(match: re.Match[str]) -> str:
        origin = bench.origin(int(match.group(1)))
        return f"{match.group(0)} ({origin})" if origin else match.group(0)

    return re.sub(rf"\b{BENCH}\.\w+:(\d+)(?=[:,])", led_back, log)


def _misfits(log: str) -> list[str]:
    """What a compiler only warns of, and what would make a test of another decoder than was described."""
    about_bench = [line for line in log.splitlines() if f"{BENCH}.sv:" in line]
    return [match.group(1) or match.group(2) for line in about_bench if (match := _MISFIT.search(line))]


def _included(sources: Sequence[Path], include_dirs: Sequence[Path]) -> list[Path]:
    """Files that the sources include, however deep, where they can be found."""
    found: list[Path] = []
    queue = list(sources)
    while queue:
        path = queue.pop()
        for name in _INCLUDE.findall(path.read_text("utf-8", "replace")):
            for folder in (*include_dirs, path.parent):
                candidate = folder / name
                if candidate.is_file() and candidate not in found:
                    found.append(candidate)
                    queue.append(candidate)
    return sorted(found)


def digest(design: Design, bench: str, simulator: Simulator) -> str:
    """What a build depends on, as one word."""
    parts = [__version__, metadata.version("cocotb"), sys.version, str(simulator), bench]
    parts += [str(path) for path in design.include_dirs]
    state = hashlib.blake2b("\0".join(parts).encode(), digest_size=12)
    for path in (*design.sources, *_included(design.sources, design.include_dirs)):
        state.update(f"\0{path}\0".encode())
        state.update(path.read_bytes())
    return state.hexdigest()


def build(contract: Contract, simulator: Simulator, out: Path) -> Build:
    """Build the bench for a decoder, or take the one that is there.

    Raises:
        SimulatorError: it would not compile; the text holds the compiler's own message.
    """
    design = contract.design
    bench = render_vhdl(contract, read_ports(design)) if design.language == "vhdl" else render_bench(contract)
    bench_file = f"{BENCH}.{'vhd' if design.language == 'vhdl' else 'sv'}"
    folder = out / "build" / f"{simulator.name}-{digest(design, bench.text, simulator)}"
    if folder.is_dir():
        return Build(simulator, folder)
    folder.parent.mkdir(parents=True, exist_ok=True)
    runtime = hashlib.blake2b(f"{simulator} {metadata.version('cocotb')} {sys.executable}".encode(), digest_size=6)
    # Built aside and put in place when whole, so that an interrupted build is never taken for a good one.
    work = Path(tempfile.mkdtemp(prefix="unfinished-", dir=folder.parent))
    (work / bench_file).write_text(bench.text, "utf-8")
    request: dict[str, object] = {
        "task": "build",
        "simulator": simulator.name,
        "top": BENCH,
        "sources": [str(path) for path in (*design.sources, work / bench_file)],
        "standard": design.standard,
        "include_dirs": [str(path) for path in design.include_dirs],
        "build_folder": str(work),
        "runtime_folder": str(folder.parent / f"runtime-{runtime.hexdigest()}"),
    }
    code, log = _launch(request, work, simulator, BUILD_SECONDS)
    if code != 0:
        shutil.rmtree(work)
        what = f"took longer than {BUILD_SECONDS} s to build" if code is None else "could not build"
        msg = f"{simulator} {what} the decoder {design.top!r} of {contract.file}:\n{_shown(_traced(log, bench))}"
        raise SimulatorError(msg)
    if misfits := _misfits(log):
        shutil.rmtree(work)
        listed = "\n".join(f"  {line}" for line in misfits)
        msg = f"the decoder {design.top!r} is not as {contract.file} says; {simulator} found:\n{listed}"
        raise SimulatorError(msg)
    try:
        work.rename(folder)
    except OSError:
        shutil.rmtree(work)  # another run built the same meanwhile
    return Build(simulator, folder)


def _groups(contract: Contract, stimuli: Sequence[Stimulus]) -> list[list[int]]:
    """Which stimuli share a simulator process: some fresh ones stand alone, the rest are spread over the processors."""
    alone = [n for n, stimulus in enumerate(stimuli) if stimulus.power_up and contract.reset is None]
    shared = sorted(set(range(len(stimuli))) - set(alone), key=lambda n: -stimuli[n].periods)
    total = sum(stimuli[n].periods for n in shared)
    many = max(1, min(os.cpu_count() or 1, total // WORTH_A_PROCESS))
    groups: list[list[int]] = [[] for _ in range(many)]
    loads = [0] * many
    for n in shared:
        lightest = loads.index(min(loads))
        groups[lightest].append(n)
        loads[lightest] += stimuli[n].periods
    return [sorted(group) for group in groups if group] + [[n] for n in alone]


def play(ready: Build, contract: Contract, stimuli: Sequence[Stimulus], folder: Path, progress: Callable[[int], None]) -> Played:
    """Play the stimuli, several in one simulator process; ``progress`` is told how many have ended.

    What was played to its end is kept even if the simulator dies later.
    """
    folder.mkdir(parents=True, exist_ok=True)
    groups = _groups(contract, stimuli)
    traces: dict[int, Path] = {}
    failure: SimulatorError | None = None
    with ThreadPoolExecutor(os.cpu_count() or 1) as pool:
        running = [
            pool.submit(_play_group, ready, contract, stimuli, group, folder / str(place)) for place, group in enumerate(groups)
        ]
        while not all(future.done() for future in running):
            progress(sum(1 for _ in folder.glob("*/*.done")))
            time.sleep(0.05)
        progress(sum(1 for _ in folder.glob("*/*.done")))
        for future in running:
            part, failed = future.result()
            traces.update(part)
            failure = failure or failed
    return Played(traces, failure)


def _play_group(
    ready: Build, contract: Contract, stimuli: Sequence[Stimulus], group: list[int], folder: Path
) -> tuple[dict[int, Path], SimulatorError | None]:
    folder.mkdir()
    period_ps = contract.clock.period_ps
    jobs = []
    for n in group:
        stimuli[n].words().astype(">u8").tofile(folder / f"{n}.stimulus")
        jobs.append((n, (stimuli[n].periods + 10) * period_ps))
    (folder / "jobs.json").write_text(json.dumps(jobs), "utf-8")
    request: dict[str, object] = {
        "task": "play",
        "simulator": ready.simulator.name,
        "top": BENCH,
        "build_folder": str(ready.folder),
        "job_folder": str(folder),
        "sources": [str(path) for path in (*contract.design.sources, ready.folder / f"{BENCH}.vhd")],
        "standard": contract.design.standard,
        "zeroed": contract.start.zeroed and ready.simulator.four_state,
    }
    seconds = RUN_SECONDS + sum(stimuli[n].periods for n in group) / SLOWEST_CLOCKS_PER_SECOND
    code, log = _launch(request, folder, ready.simulator, seconds)
    ended = {n: folder / f"{n}.trace" for n in group if (folder / f"{n}.done").exists()}
    complaint = _complaint(code, seconds, folder, len(group) - len(ended))
    if complaint is None:
        return ended, None
    msg = f"{ready.simulator} {complaint}; its log ends:\n{_shown(log)}"
    return ended, SimulatorError(msg)


def _complaint(code: int | None, seconds: float, folder: Path, unfinished: int) -> str | None:
    """Why a run is not to be trusted, or None. An exit code of 0 alone proves nothing."""
    if code is None:
        return f"was still running after {seconds:.0f} s and was stopped"
    if code != 0:
        return f"ended with exit code {code}"
    try:
        cases = list(ET.parse(folder / "results.xml").iter("testcase"))  # noqa: S314  # see the import
    except (OSError, ET.ParseError) as error:
        return f"left no readable results ({error})"
    if len(cases) != 1 or any(len(case.findall(tag)) for case in cases for tag in ("failure", "error", "skipped")):
        return "did not play the stimulus to its end"
    return f"left {unfinished} profiles unfinished" if unfinished else None
