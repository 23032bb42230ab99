"""Templates only branch and repeat; what they are given is checked; every line that they make leads back to one of theirs."""

from __future__ import annotations

from importlib import resources
from pathlib import Path

import jinja2
import pytest
from jinja2 import nodes
from pyslang.ast import Compilation
from pyslang.syntax import SyntaxTree

from tbkit.bench import _traced
from tbkit.cli import main
from tbkit.contract_file import read_contract
from tbkit.errors import InputError
from tbkit.render import render_bench, rendered, sv_literal, sv_name
from tbkit.yamltree import KEYWORDS

EXAMPLES = Path(__file__).parents[2] / "example_dut"
TEMPLATES = {
    path.name: path.read_text("utf-8") for path in resources.files("tbkit.templates").iterdir() if path.name.endswith(".j2")
}


@pytest.mark.parametrize("name", TEMPLATES)
def test_no_arithmetic(name: str) -> None:
    tree = jinja2.Environment(autoescape=False).parse(TEMPLATES[name])  # noqa: S701  # HDL
    # A minus before a number in HDL is text; in a tag or an expression it would be one of these.
    found = [type(node).__name__ for kind in (nodes.BinExpr, nodes.UnaryExpr) for node in tree.find_all(kind)]
    assert set(found) <= {"And", "Or", "Not"}


def test_lines_lead_back() -> None:
    bench = render_bench(read_contract(EXAMPLES / "spindle.yaml"))
    lines = bench.text.split("\n")
    assert len(lines) == len(bench.origins)
    plain = 0
    for number, line in enumerate(lines, 1):
        if not bench.origin(number):
            assert line == ""
            continue
        name, _, there = bench.origin(number).partition(":")
        source = TEMPLATES[name].splitlines()[int(there) - 1]
        if "{{" not in source and "{%" not in source:
            assert line == source
            plain += 1
    assert plain > 50
    assert bench.origin(0) == bench.origin(len(lines) + 1) == ""


def test_messages_lead_back() -> None:
    bench = render_bench(read_contract(EXAMPLES / "spindle.yaml"))
    number = bench.text.split("\n").index("    @(posedge running);") + 1
    origin = bench.origin(number)
    assert origin.startswith("bench.sv.j2:")
    log = f"/x/tbkit_bench.sv:{number}: syntax error\nspindle.v:{number}: warning\n%Error: tbkit_bench.sv:{number}:5: no such thing"
    assert _traced(log, bench) == (
        f"/x/tbkit_bench.sv:{number} ({origin}): syntax error\nspindle.v:{number}: warning\n"
        f"%Error: tbkit_bench.sv:{number} ({origin}):5: no such thing"
    )


@pytest.mark.parametrize("keyword", sorted(KEYWORDS)[::25])
def test_keywords_are_escaped(keyword: str) -> None:
    """Pyslang takes the escaped name for the one that it escapes."""
    text = f"module m (input wire {sv_name(keyword)}); endmodule module top; wire w; m n (.{sv_name(keyword)}(w)); endmodule"
    compilation = Compilation()
    compilation.addSyntaxTree(SyntaxTree.fromText(text))
    assert [str(one.code) for one in compilation.getAllDiagnostics()] == []
    (top,) = compilation.getRoot().topInstances
    (instance,) = [member for member in top.body if member.name == "n"]
    assert [port.name for port in instance.body.portList] == [keyword]


def test_names_and_literals() -> None:
    assert sv_name("enc_a$1") == "enc_a$1"
    with pytest.raises(ValueError, match=r"^'1a' is no name in SystemVerilog$"):
        sv_name("1a")
    assert sv_literal(10, 4) == "4'ha"
    with pytest.raises(ValueError, match=r"^16 does not fit in 4 bits$"):
        sv_literal(16, 4)


WRONG = [
    ("Hello {{ nobody }}.\n", "the template cannot be filled in: 'nobody' is undefined"),
    ("{{ bench }}\n\n{% if bench %}\n", None),
    ("{{ bench | sv_nome }}\n", "the template cannot be read: No filter named 'sv_nome'."),
]


@pytest.mark.parametrize(("text", "message"), WRONG)
def test_wrong_templates_of_the_user(
    text: str, message: str | None, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.chdir(tmp_path)
    (tmp_path / "own").mkdir()
    (tmp_path / "own" / "readme.txt.j2").write_text(text, "utf-8")
    words = ["render", str(EXAMPLES / "spindle.yaml"), "--only", "reversals", "-o", "out", "--templates", "own"]
    assert main(words) == 2
    told = capsys.readouterr().err
    if message is None:
        # The place is that of the tag that was never closed.
        assert told.startswith("own/readme.txt.j2:3: the template cannot be read: Unexpected end of template.")
    else:
        assert told == f"own/readme.txt.j2:1: {message}\n"


def test_templates_of_the_user_win(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]) -> None:
    monkeypatch.chdir(tmp_path)
    (tmp_path / "own").mkdir()
    (tmp_path / "own" / "readme.txt.j2").write_text("Ask Ada about {{ bench }}.\n", "utf-8")
    words = ["render", str(EXAMPLES / "spindle.yaml"), "--only", "reversals", "-o", "out", "--templates"]
    assert main([*words, "nowhere"]) == 2
    assert capsys.readouterr().err == "nowhere: there is no such folder\n"
    assert main([*words, "own"]) == 0
    assert (tmp_path / "out" / "README.txt").read_text("utf-8") == "Ask Ada about tbkit_bench.\n"
    assert main(["render", "--check", "out"]) == 0
    (tmp_path / "own" / "readme.txt.j2").write_text("Ask Bob.\n", "utf-8")
    assert main(["render", "--check", "out"]) == 2


def test_what_a_template_is_not_given_is_an_error() -> None:
    given = dict.fromkeys(("version", "file", "digest", "bench", "top", "vhdl", "standard", "zeroed"), "x")
    with pytest.raises(InputError, match=r"readme\.txt\.j2:\d+: the template cannot be filled in: 'seeds' is undefined$"):
        rendered("readme.txt.j2", given)
    assert rendered("readme.txt.j2", {**given, "seeds": [1]}).text.startswith("Rendered by tbkit x from x, digest x.")
