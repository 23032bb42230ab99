"""The command line."""

from __future__ import annotations

import argparse
import json
import sys
from collections.abc import Sequence
from pathlib import Path
from typing import Self

from rich.console import Console
from rich.markup import escape

from tbkit import __version__, report, standalone
from tbkit.contract_file import read_contract
from tbkit.describe import describe
from tbkit.errors import InputError, Problem, SimulatorError, UnfitError
from tbkit.facts import fact_lines, facts
from tbkit.profile import Profile
from tbkit.profile_file import read_profile
from tbkit.regression import builtin_profiles
from tbkit.rtl import check_against_rtl
from tbkit.simulators import CHOICES, find
from tbkit.stimulus import lay_out
from tbkit.units import Scale
from tbkit.verify import Results, plan, verify
from tbkit.yamltree import nearest

EXIT_PASS, EXIT_FAIL, EXIT_INPUT, EXIT_SIMULATOR = 0, 1, 2, 3

_EPILOG = """\
exit codes:
  0  every profile passed
  1  the decoder was found wrong
  2  an input file or an option is wrong, or nothing was compared
  3  the simulator failed, is missing, or would not compile the decoder
"""


def _parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(prog="tbkit", description="Proves that a quadrature decoder in RTL counts right.")
    parser.add_argument("--version", action="version", version=f"tbkit {__version__}")
    commands = parser.add_subparsers(dest="command", required=True, metavar="COMMAND")
    check = commands.add_parser(
        "verify",
        help="run motion profiles on a decoder and check every output",
        description="Runs the built-in regression, and your own profiles, on the decoder that DECODER describes.",
        epilog=_EPILOG,
        formatter_class=argparse.RawDescriptionHelpFormatter,
    )
    check.add_argument("decoder", metavar="DECODER", type=Path, help="decoder file (YAML)")
    check.add_argument("profiles", metavar="PROFILE", type=Path, nargs="*", help="your own profiles, run after the built-in ones")
    check.add_argument(
        "--simulator",
        choices=CHOICES,
        default="auto",
        help="auto: Icarus if it is there, else Verilator, else the embedded one; GHDL for VHDL",
    )
    check.add_argument("--seed", type=_seed, default=1, metavar="N", help="for everything that is random (default: 1)")
    check.add_argument("--out", type=Path, default=Path("tbkit-out"), metavar="DIR", help="build folder (default: tbkit-out)")
    check.add_argument("--json", type=Path, metavar="FILE", help="write the results as JSON")
    check.add_argument("--junit", type=Path, metavar="FILE", help="write the results as JUnit XML")
    check.add_argument(
        "--only", action="append", default=[], metavar="NAME", help="run only this profile; may be given several times"
    )
    plot = commands.add_parser(
        "plot",
        help="draw a motion profile, and tell what it asks of a decoder",
        description="Tells what a profile asks of a decoder, and draws the shaft, and the lines from the whole run to one edge.",
    )
    plot.add_argument("profile", metavar="PROFILE", help="profile file (YAML), or the name of a built-in profile")
    plot.add_argument("decoder", metavar="DECODER", type=Path, nargs="?", help="the decoder it is for: its units and its limits")
    plot.add_argument(
        "-o", "--output", type=_picture, metavar="FILE", help="where to draw it: .png or .svg; or .vcd for a wave viewer"
    )
    plot.add_argument("--seed", type=_seed, default=1, metavar="N", help="for everything that is random (default: 1)")
    render = commands.add_parser(
        "render",
        help="write a bench that checks the decoder in any simulator, without Python",
        description="Writes a folder with a self-checking bench, and the stimulus and expectation of every profile.",
    )
    render.add_argument("decoder", metavar="DECODER", type=Path, nargs="?", help="decoder file (YAML)")
    render.add_argument("profiles", metavar="PROFILE", type=Path, nargs="*", help="your own profiles, beside the built-in ones")
    render.add_argument("-o", "--output", metavar="DIR", type=Path, help="the folder to write")
    render.add_argument("--seed", type=_seed, default=1, metavar="N", help="for everything that is random (default: 1)")
    render.add_argument(
        "--only", action="append", default=[], metavar="NAME", help="take only this profile; may be given several times"
    )
    render.add_argument("--templates", metavar="DIR", type=Path, help="a folder with templates of your own, which win over tbkit's")
    render.add_argument("--check", metavar="DIR", type=Path, help="write nothing; say whether this folder is up to date")
    found = commands.add_parser(
        "describe",
        help="find out what a decoder does, and write its decoder file",
        description="Reads the ports of a decoder, runs it on slow clean motion, and writes what it found out as a decoder file.",
    )
    found.add_argument("sources", metavar="RTL", type=Path, nargs="+", help="source files")
    found.add_argument("--top", metavar="NAME", help="the top module, if it cannot be told")
    found.add_argument(
        "--role", type=_role, action="append", default=[], metavar="ROLE=PORT", help="a port whose name does not tell its role"
    )
    found.add_argument("-o", "--output", type=Path, metavar="FILE", help="the decoder file to write (default: print it)")
    return parser


def _role(text: str) -> tuple[str, str]:
    role, _, port = text.partition("=")
    if port:
        return role, port
    msg = f"{text!r} is not of the form ROLE=PORT, such as clock=strobe"
    raise argparse.ArgumentTypeError(msg)


def _picture(text: str) -> Path:
    path = Path(text)
    if path.suffix in (".png", ".svg", ".vcd"):
        return path
    msg = f"{text!r} does not end in .png, .svg or .vcd"
    raise argparse.ArgumentTypeError(msg)


def _seed(text: str) -> int:
    if text.isdecimal() and int(text) < 1 << 63:
        return int(text)
    msg = f"{text!r} is not a whole number from 0 to 2^63-1"
    raise argparse.ArgumentTypeError(msg)


def _profiles(own: Sequence[Path], only: Sequence[str]) -> list[Profile]:
    """The built-in regression and the user's own profiles, or those named by ``only``.

    Raises:
        InputError: with the problems of every file at once, or a name that no profile has.
    """
    problems: list[Problem] = []
    profiles = builtin_profiles()
    for path in own:
        try:
            profiles.append(read_profile(path))
        except InputError as error:
            problems += error.problems
    seen: dict[str, Path] = {}
    for profile in profiles:
        if profile.name in seen and not problems:
            problems.append(Problem(str(profile.file), 1, f"profile: the name {profile.name!r} is taken already; choose another"))
        seen[profile.name] = profile.file
    unknown = [name for name in only if name not in seen]
    problems += [
        Problem("--only", 0, f"there is no profile {name!r}; there are {', '.join(seen)}{nearest(name, seen)}") for name in unknown
    ]
    if problems:
        raise InputError(problems)
    return [profile for profile in profiles if not only or profile.name in only]


def _verify(options: argparse.Namespace, console: Console, complain: Console) -> int:
    problems: list[Problem] = []
    contract, profiles = None, []
    # Both kinds of file are read before anything is said, so that all their problems are told at once.
    try:
        contract = read_contract(options.decoder)
    except InputError as error:
        problems += error.problems
    try:
        profiles = _profiles(options.profiles, options.only)
    except InputError as error:
        problems += error.problems
    if contract is not None and not problems:
        problems = check_against_rtl(contract)
    if problems or contract is None:
        raise InputError(problems)
    planned = plan(contract, profiles, options.seed)
    if not planned.stimuli:
        problems = [Problem(str(profile.name), 0, f"left out: {profile.reason}") for profile in planned.left_out]
        raise InputError([*problems, Problem(str(options.decoder), 1, "no profile is left to run on this decoder")])
    results: list[Results] = []
    failure: SimulatorError | None = None
    options.out.mkdir(parents=True, exist_ok=True)
    (options.out / ".gitignore").write_text("*\n", "utf-8")
    for simulator in find(options.simulator, contract.design.language):
        try:
            with _Progress(complain) as progress:
                results.append(verify(contract, planned, simulator, options.out.resolve(), progress))
        except SimulatorError as error:
            failure = failure or error
            complain.print(f"tbkit: {error}", markup=False)
            continue
        report.print_results(console, contract, results[-1], options.profiles)
    if options.json and results:
        options.json.write_text(report.as_json(contract, options.seed, results), "utf-8")
    if options.junit and results:
        options.junit.write_text(report.as_junit(contract, results), "utf-8")
    verdicts = {one.verdict for one in results}
    if "fail" in verdicts:
        return EXIT_FAIL
    if failure or any(one.failure for one in results):
        return EXIT_SIMULATOR
    return EXIT_INPUT if "error" in verdicts else EXIT_PASS


def _render(options: argparse.Namespace, console: Console) -> int:
    if options.check:
        return _check_folder(options.check, console)
    if options.decoder is None or options.output is None:
        text = "name the decoder file and the folder to write: tbkit render DECODER -o DIR; or a folder to check: --check DIR"
        raise InputError([Problem("render", 0, text)])
    files, left_out = _rendered(options.decoder, options.profiles, options.only, options.seed, options.output, options.templates)
    for name, text in files.items():
        path = options.output / name
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_text(text, "utf-8")
    for name, reason in left_out:
        console.print(f"  left out, {reason}: {name}", markup=False)
    console.print(f"wrote {len(files)} files to {options.output}; its README.txt says how to run them", markup=False)
    return EXIT_PASS


def _rendered(
    decoder: Path, own: Sequence[Path], only: Sequence[str], seed: int, home: Path, overrides: Path | None
) -> tuple[dict[str, str], list[tuple[str, str]]]:
    """The files of a rendered folder, and the profiles that are left out with the reason.

    Raises:
        InputError: with the problems of the files.
    """
    contract, profiles = read_contract(decoder), _profiles(own, only)
    problems = check_against_rtl(contract)
    if overrides is not None and not overrides.is_dir():
        problems.append(Problem(str(overrides), 0, "there is no such folder"))
    planned = plan(contract, profiles, seed)
    left_out = [(one.name, one.reason) for one in planned.left_out]
    if not planned.stimuli:
        problems.append(Problem(str(decoder), 1, "no profile is left to render for this decoder"))
    if problems:
        raise InputError(problems)
    try:
        files = standalone.render_folder(contract, profiles, planned.stimuli, home, overrides)
    except UnfitError as error:
        raise InputError([Problem(str(decoder), 1, str(error))]) from error
    request = {
        "decoder": standalone.relative(decoder, home),
        "profiles": [standalone.relative(path, home) for path in own],
        "only": list(only),
        "templates": standalone.relative(overrides, home) if overrides else None,
        "seed": seed,
    }
    files[standalone.MANIFEST] = standalone.manifest(files, request)
    return files, left_out


def _check_folder(home: Path, console: Console) -> int:
    """Whether a folder is what would be rendered now.

    Raises:
        InputError: it is not, with every file that differs, or it was not rendered by tbkit.
    """
    place = home / standalone.MANIFEST
    try:
        request = json.loads(place.read_text("utf-8"))["request"]
        own, only, seed = [home / path for path in request["profiles"]], request["only"], request["seed"]
        decoder, overrides = home / request["decoder"], request["templates"] and home / request["templates"]
    except (OSError, ValueError, KeyError, TypeError) as error:
        raise InputError([Problem(str(place), 0, "this is no folder that tbkit has rendered")]) from error
    files, _ = _rendered(decoder, own, only, seed, home, overrides)
    there = {path.relative_to(home).as_posix() for path in home.glob(f"{standalone.VECTORS}/*")} | set(files)
    problems = []
    again = f"; render it again: tbkit render {decoder} -o {home}"
    for name in sorted(there):
        path = home / name
        if name not in files:
            problems.append(Problem(str(path), 0, f"would not be rendered any more{again}"))
        elif not path.is_file():
            problems.append(Problem(str(path), 0, f"is missing{again}"))
        elif path.read_bytes() != files[name].encode():
            problems.append(Problem(str(path), 0, f"is not what would be rendered now{again}"))
    if problems:
        raise InputError(problems)
    console.print(f"{home} is up to date: {len(files)} files", markup=False)
    return EXIT_PASS


def _describe(options: argparse.Namespace, console: Console) -> int:
    problems = [Problem(str(path), 0, "there is no such file") for path in options.sources if not path.is_file()]
    if problems:
        raise InputError(problems)
    home = options.output.parent if options.output else Path()
    text = describe(options.sources, options.top, home, dict(options.role))
    if options.output is None:
        console.print(text, end="", markup=False)
        return EXIT_PASS
    options.output.write_text(text, "utf-8")
    console.print(f"wrote {options.output}; read it, then run: tbkit verify {options.output}", markup=False)
    return EXIT_PASS


def _plot(options: argparse.Namespace, console: Console) -> int:
    problems: list[Problem] = []
    contract, profile = None, None
    try:
        contract = read_contract(options.decoder) if options.decoder else None
    except InputError as error:
        problems += error.problems
    try:
        profile = _one_profile(options.profile)
    except InputError as error:
        problems += error.problems
    if problems or profile is None:
        raise InputError(problems)
    scale = Scale.of(contract, profile.encoder.lines, profile.encoder.pitch)
    try:
        scenario = lay_out(profile, scale, options.seed if profile.seed is None else profile.seed, 0)
    except UnfitError as error:
        raise InputError([Problem(str(profile.file), 0, str(error))]) from error
    rows = fact_lines(facts(scenario, contract), profile.encoder, contract)
    console.print(f"[bold]{escape(profile.name)}[/]  {escape(profile.about)}")
    width = max(len(name) for name, _ in rows)
    for name, text in rows:
        console.print(f"  {name:{width}}  {text}", markup=False)
    if options.output:
        # Drawing needs a large library, which nothing else does.
        from tbkit import plot  # noqa: PLC0415

        plot.write(profile, scenario, options.output)
    return EXIT_PASS


def _one_profile(name: str) -> Profile:
    """A profile by its file, or a built-in one by its name.

    Raises:
        InputError: there is none, or the file has problems.
    """
    builtin = {profile.name: profile for profile in builtin_profiles()}
    if Path(name).exists():
        return read_profile(Path(name))
    if name in builtin:
        return builtin[name]
    text = f"there is no such file and no built-in profile of that name; there are {', '.join(builtin)}{nearest(name, builtin)}"
    raise InputError([Problem(name, 0, text)])


class _Progress:
    """What is going on: one line that changes, on a terminal; a plain line for each stage where the output is piped."""

    def __init__(self, console: Console) -> None:
        self._console = console
        self._status = console.status("starting") if console.is_terminal else None
        self._stage = ""

    def __enter__(self) -> Self:
        if self._status:
            self._status.start()
        return self

    def __exit__(self, *_: object) -> None:
        if self._status:
            self._status.stop()

    def __call__(self, stage: str, done: int | None = None) -> None:
        if self._status:
            self._status.update(stage if done is None else f"{stage}: {done}")
        elif stage != self._stage:
            self._console.print(stage, markup=False)
        self._stage = stage


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the command line; returns the exit code."""
    options = _parser().parse_args(arguments)
    console = Console(highlight=False, soft_wrap=True)
    complain = Console(stderr=True, highlight=False, soft_wrap=True)
    try:
        match options.command:
            case "plot":
                return _plot(options, console)
            case "render":
                return _render(options, console)
            case "describe":
                return _describe(options, console)
            case _:
                return _verify(options, console, complain)
    except InputError as error:
        for problem in error.problems:
            complain.print(f"{problem}" if problem.line else f"{problem.file}: {problem.text}", markup=False)
        return EXIT_INPUT
    except SimulatorError as error:
        complain.print(f"tbkit: {error}", markup=False)
        return EXIT_SIMULATOR
    except OSError as error:
        complain.print(f"tbkit: cannot write {error.filename}: {error.strerror}", markup=False)
        return EXIT_INPUT
    except KeyboardInterrupt:
        complain.print("tbkit: interrupted")
        return EXIT_SIMULATOR


if __name__ == "__main__":
    sys.exit(main())
