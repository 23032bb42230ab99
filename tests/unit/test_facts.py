"""What a profile asks of a decoder, in numbers, and what it draws."""

from __future__ import annotations

import itertools
import xml.etree.ElementTree as ET
from pathlib import Path

import numpy as np
import pytest
import vcd.reader
from contractgrid import contract
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.transforms import Bbox

from tbkit import plot
from tbkit.cli import main
from tbkit.contract import Filter
from tbkit.facts import Facts, fact_lines, facts
from tbkit.profile import Action, Disturbance, Encoder, Glitch, Illegal, IndexMark, Move, Profile, Rest, Stuck, Where
from tbkit.profile_file import read_profile
from tbkit.regression import builtin_profiles
from tbkit.stimulus import Scenario, lay_out
from tbkit.units import Scale, parse

US, NS = 10**6, 10**3
X4 = contract(2)


def move(by: str, speed: str, **more: str) -> Move:
    kinds = {"accel": "acceleration", "jerk": "jerk"}
    return Move(parse(by, "distance"), parse(speed, "speed"), **{key: parse(text, kinds[key]) for key, text in more.items()})  # type: ignore[arg-type]


def laid(*motion: Action, encoder: Encoder | None = None, disturb: tuple[Disturbance, ...] = ()) -> tuple[Profile, Scenario]:
    profile = Profile(Path("x.yaml"), "x", "", (), None, motion, encoder or Encoder(), disturb)
    return profile, lay_out(profile, Scale.of(X4, profile.encoder.lines, profile.encoder.pitch), 1, 0)


def found(*motion: Action, encoder: Encoder | None = None) -> Facts:
    return facts(laid(*motion, encoder=encoder)[1], X4)


@pytest.mark.parametrize(
    ("lines", "rpm", "states_per_s", "state_ns"),
    [
        # Count rate = n·N·4/60: 2500 lines at 6000 rpm are 1 Mcount/s and ideal states of 1 us (arithmetic).
        (2500, 6000, 1.000e6, 1000),
        # CUI AMT10 data sheet, 2021-08-04, pages 1-2: 2048 PPR up to 7500 rpm: 1.024 Mcount/s, 976.5625 ns.
        (2048, 7500, 1.024e6, 976.5625),
        # engineering.stackexchange answer on a counter in a PSoC: 10000 counts a turn at 15000 rpm are 2.5 Mcount/s.
        (2500, 15000, 2.5e6, 400),
        # automation-talk.info, 2011-02: 2000 rpm and 360 PPR are 12 kHz, of each line.
        (360, 2000, 4 * 12e3, 1e9 / 48e3),
    ],
)
def test_published_rates(lines: int, rpm: int, states_per_s: float, state_ns: float) -> None:
    asked = found(move("40 states", f"{rpm} rpm"), encoder=Encoder(lines))
    assert asked.top_speed == pytest.approx(states_per_s)
    assert asked.shortest_state_ps == pytest.approx(state_ns * NS, abs=2)
    assert asked.shortest_level_ps == pytest.approx(2 * state_ns * NS, abs=2)
    assert (asked.states, asked.edges) == (40, 40)
    assert asked.length_ps == pytest.approx(40 * state_ns * NS, abs=2)


def test_top_speed_inside_a_piece() -> None:
    """Seven phases without a plateau are fastest in the middle of the bend, where the acceleration passes zero."""
    motion = laid(move("1000 states", "100 states/us", accel="1 states/us2", jerk="0.01 states/us3"))[1]
    # Jerk-limited triangle of a long way: half of it is covered by the time of the top speed, 2·Tj at mean half speed.
    tj = (1000 / (2 * 0.01)) ** (1 / 3)
    assert facts(motion, None).top_speed == pytest.approx(0.01 * tj**2 * 1e6, rel=1e-6)


def test_jumps_have_no_speed() -> None:
    asked = found(Illegal(parse("2 us", "time"), 3))
    assert (asked.top_speed, asked.shortest_state_ps, asked.states) == (0.0, 2 * US, 6)


def test_as_text() -> None:
    encoder = Encoder(2500)
    asked = found(Rest(parse("1 ms", "time")), move("400 states", "6000 rpm"), encoder=encoder)
    assert fact_lines(asked, encoder, None) == [
        ("length", "1.4 ms"),
        ("edges", "400 on A, B and index; 400 states passed"),
        ("top speed", "1e+06 states/s, 6,000 rpm"),
        ("shortest state", "1 us"),
        ("shortest level", "2 us"),
    ]
    # A clock period of the grid's contracts is 20 ns.
    slow = contract(2, every=4, shortest=51, filtering=Filter(90, 100))
    assert fact_lines(asked, encoder, slow)[3:] == [
        ("count rate", "250,000 counts/s at x1"),
        ("shortest state", "1 us, 50 clocks; the decoder's limit (shortest_state: 51) is NOT KEPT, the check is open there"),
        ("shortest level", "2 us, 100 clocks; the decoder's limit (filter passes: 100) is kept"),
    ]


def test_linear_speed() -> None:
    # Numerik Jena KIT L, section 6.5: v = f·TP/4 for a pitch of 20 um: 1 MHz of states are 5 m/s.
    encoder = Encoder(pitch=parse("20 um", "length"))
    asked = found(move("1 mm", "5 m/s"), encoder=encoder)
    assert dict(fact_lines(asked, encoder, None))["top speed"] == "1e+06 states/s, 5 m/s"


def test_undetectable() -> None:
    stuck = Stuck("a", "0", parse("4 us", "time"), Where("times", 1))
    scenario = laid(move("100 states", "1 states/us"), disturb=(stuck,))[1]
    asked = facts(scenario, X4)
    assert fact_lines(asked, Encoder(), X4)[-1] == (
        "no decoder detects",
        "the a line that is stuck: A and B alone cannot tell it from a motion",
    )
    fast = found(move("100 states", "4 states/clocks"))
    # Four in each whole clock.
    assert fast.undetectable == (
        "25 clocks in which three states or more go by: every sampled decoder takes them for another motion",
    )


# ---- pictures

GLITCH = Glitch(("a", "index"), parse("100 ns", "time"), parse("300 ns", "time"), Where("times", 5))
INDEX = IndexMark(parse("90 deg", "angle"), parse("0 deg", "angle"))


def named(name: str) -> tuple[Profile, Scenario]:
    profile = next(one for one in builtin_profiles() if one.name == name)
    return profile, lay_out(profile, Scale.of(X4, profile.encoder.lines, profile.encoder.pitch), 1, 0)


SHOWN = {
    "turns": laid(
        Rest(parse("1 ms", "time")),
        move("3 rev", "3000 rpm", accel="4000 rev/s2"),
        encoder=Encoder(1024, index=INDEX),
        disturb=(GLITCH,),
    ),
    "linear": laid(move("3 mm", "0.1 m/s"), encoder=Encoder(pitch=parse("20 um", "length"))),
    "nothing": laid(Rest(parse("1 ms", "time"))),
    "one-edge": laid(move("1 states", "1 states/us")),
    "late": laid(Rest(parse("3 s", "time")), move("30 states", "30 states/us")),
    **{name: named(name) for name in ("illegal", "knob", "reset-in-motion", "homing", "overspeed", "worst-encoder")},
}


def boxes(axes: Axes, figure_canvas: FigureCanvasAgg) -> dict[str, list[Bbox]]:
    renderer = figure_canvas.get_renderer()
    ticks = [label for label in axes.get_xticklabels() if label.get_visible() and label.get_text()]
    view = axes.get_window_extent(renderer)
    shown = [label.get_window_extent(renderer) for label in ticks]
    # Ticks outside the view are not drawn.
    x = [box for box in shown if view.x0 - 1 <= (box.x0 + box.x1) / 2 <= view.x1 + 1 and box.width > 0]
    y = [label.get_window_extent(renderer) for label in axes.get_yticklabels() if label.get_text()]
    y = [box for box in y if view.y0 - 1 <= (box.y0 + box.y1) / 2 <= view.y1 + 1 and box.width > 0]
    names = [label.get_window_extent(renderer) for label in (axes.xaxis.label, axes.yaxis.label) if label.get_text()]
    return {"x": x, "y": y, "names": names}


@pytest.mark.parametrize("name", SHOWN)
def test_nothing_overlaps(name: str) -> None:
    """Labels of every axis of a picture touch neither each other nor those of the axes beside it, and lie inside."""
    figure = plot.draw(*SHOWN[name])
    canvas = FigureCanvasAgg(figure)
    canvas.draw()
    all_boxes: list[Bbox] = []
    for axes in figure.axes:
        all_boxes += itertools.chain.from_iterable(boxes(axes, canvas).values())
    assert len(all_boxes) >= 16
    for one, other in itertools.combinations(all_boxes, 2):
        overlap = Bbox.intersection(one, other)
        assert overlap is None or overlap.width < 0.5 or overlap.height < 0.5, (one, other)
    for box in all_boxes:
        assert figure.bbox.x0 <= box.x0 < box.x1 <= figure.bbox.x1
        assert figure.bbox.y0 <= box.y0 < box.y1 <= figure.bbox.y1


@pytest.mark.parametrize(
    ("name", "labels"),
    [
        ("turns", {"angle / rev", "speed / rpm", "(rev/s²)", "lines: whole run", "lines: 12 edges", "lines: one disturbance"}),
        ("linear", {"position / m", "speed / (m/s)", "(m/s²)", "lines: one edge"}),
        ("illegal", {"angle / states", "speed / (states/s)", "(states/s²)", "index", "A", "B"}),
        ("reset-in-motion", {"reset", "time"}),
    ],
)
def test_units_on_every_axis(tmp_path: Path, name: str, labels: set[str]) -> None:
    path = tmp_path / "x.svg"
    plot.write(*SHOWN[name], path)
    texts = {"".join(node.itertext()).strip() for node in ET.parse(path).iter("{http://www.w3.org/2000/svg}text")}  # noqa: S314
    assert labels <= texts


@pytest.mark.parametrize("ending", ["svg", "png", "vcd"])
def test_same_bytes(tmp_path: Path, ending: str) -> None:
    first, second = tmp_path / f"1.{ending}", tmp_path / f"2.{ending}"
    for path in (first, second):
        plot.write(*SHOWN["turns"], path)
    assert first.read_bytes() == second.read_bytes()


def test_disturbances_are_marked() -> None:
    """The closest view shows a disturbance; only disturbed lines have their own edges behind them."""
    profile, scenario = SHOWN["turns"]
    figure = plot.draw(profile, scenario)
    closest = figure.axes[-1]
    begin, end = (value * 1e12 for value in closest.get_xlim())
    odd = np.setxor1d(scenario.edges.lines["a"].toggles_ps, scenario.disturbed.lines["a"].toggles_ps)
    assert np.count_nonzero((odd > begin) & (odd < end)) >= 2
    # A and index twice, B once.
    assert len(closest.lines) - len(closest.lines[5:]) == 5
    clean = plot.draw(*SHOWN["linear"]).axes[-1]
    assert len([line for line in clean.lines if len(line.get_xdata()) > 2 or line.get_drawstyle() == "steps-post"]) == 3  # type: ignore[arg-type]


def test_vcd_read_back(tmp_path: Path) -> None:
    """Pyvcd's reader finds the levels that the pins have."""
    _, scenario = SHOWN["turns"]
    path = tmp_path / "x.vcd"
    plot.write(*SHOWN["turns"], path)
    names, toggles, firsts = {}, {}, {}
    now = 0
    with path.open("rb") as file:
        for token in vcd.reader.tokenize(file):
            match token.kind:
                case vcd.reader.TokenKind.TIMESCALE:
                    assert (int(token.timescale.magnitude), token.timescale.unit.value) == (1, "ps")
                case vcd.reader.TokenKind.VAR:
                    names[token.var.id_code] = token.var.reference
                case vcd.reader.TokenKind.CHANGE_TIME:
                    now = token.time_change
                case vcd.reader.TokenKind.CHANGE_SCALAR:
                    name = names[token.scalar_change.id_code]
                    if name in firsts:
                        toggles[name].append(now)
                    else:
                        firsts[name], toggles[name] = int(token.scalar_change.value), []
    for name, line in scenario.disturbed.lines.items():
        assert (firsts[name], toggles[name]) == (line.first, line.toggles_ps.tolist())
    assert len(toggles["a"]) > 6000


# ---- the command


def run(capsys: pytest.CaptureFixture[str], *words: str) -> tuple[int, str, str]:
    code = main(["plot", *words])
    printed = capsys.readouterr()
    return code, printed.out, printed.err


PROFILE = """\
profile: run-up
about: Up to speed.
encoder: {lines: 1024}
motion: [{move: {by: 1 rev, speed: 3000 rpm}}]
"""


def test_command(folder: Path, capsys: pytest.CaptureFixture[str]) -> None:
    (folder / "x.yaml").write_text(PROFILE)
    assert run(capsys, "x.yaml", "-o", "x.png") == (
        0,
        (
            "run-up  Up to speed.\n"
            "  length          20 ms\n"
            "  edges           4,096 on A, B and index; 4,096 states passed\n"
            "  top speed       204,800 states/s, 3,000 rpm\n"
            "  shortest state  4.88281 us\n"
            "  shortest level  9.76562 us\n"
        ),
        "",
    )
    assert (folder / "x.png").read_bytes().startswith(b"\x89PNG")


@pytest.mark.parametrize(
    ("words", "message"),
    [
        (
            ("knbo",),
            (
                "knbo: there is no such file and no built-in profile of that name; there are "
                f"{', '.join(profile.name for profile in builtin_profiles())} (did you mean 'knob'?)\n"
            ),
        ),
        (("worst-encoder",), "worst-encoder.yaml: the unit 'dwell' needs a decoder; name its file after the profile's\n"),
        (("x.yaml", "none.yaml"), "none.yaml:1: the decoder file cannot be read: No such file or directory\n"),
        (("x.yaml", "-o", "away/x.png"), "tbkit: cannot write away/x.png: No such file or directory\n"),
    ],
)
def test_command_refuses(folder: Path, capsys: pytest.CaptureFixture[str], words: tuple[str, ...], message: str) -> None:
    (folder / "x.yaml").write_text(PROFILE)
    code, _, complaint = run(capsys, *words)
    assert code == 2
    assert complaint.endswith(message)


def test_command_refuses_other_endings(capsys: pytest.CaptureFixture[str]) -> None:
    with pytest.raises(SystemExit) as caught:
        main(["plot", "knob", "-o", "x.gif"])
    assert caught.value.code == 2
    assert capsys.readouterr().err.endswith("argument -o/--output: 'x.gif' does not end in .png, .svg or .vcd\n")


def test_seed_of_the_command(folder: Path, capsys: pytest.CaptureFixture[str]) -> None:
    (folder / "x.yaml").write_text(PROFILE + "disturb: [{glitch: {on: a, width: [1 ns, 1 us], times: 9}}]\n")
    for name, seed in (("1", "1"), ("2", "2"), ("3", "1")):
        assert run(capsys, "x.yaml", "-o", f"{name}.vcd", "--seed", seed)[0] == 0
    files = [(folder / f"{name}.vcd").read_bytes() for name in "123"]
    assert files[0] == files[2] != files[1]
    assert read_profile(Path("x.yaml")).seed is None
