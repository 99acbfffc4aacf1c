"""Every command that a document prints runs; every block of code in it is looked at by something.

The `python` blocks of README.md and the docstrings are doctests, which the suite collects. The
first two `sh` blocks of README.md make an environment of their own; the continuous integration
runs them to the letter, and here what they run in the end.
"""

from __future__ import annotations

import re
import shlex
from pathlib import Path

import click.testing
import pytest

import realize
from realize.cli import main
from tests.house.everything import hidden_in_every_part

ROOT = Path(__file__).parents[2]
DOCUMENTS = ("README.md", "DEVELOPERS.md", "benchmarks/README.md")
BLOCK = re.compile(r"^```(\w*)\n(.*?)^```$", re.MULTILINE | re.DOTALL)


def blocks(document: str, kind: str) -> list[str]:
    """The fenced blocks of one kind."""
    text = (ROOT / document).read_text("utf-8")
    return [body for word, body in BLOCK.findall(text) if word == kind]


def commands(document: str) -> list[str]:
    """The lines of a document's `text` blocks that begin with the command, without their notes."""
    lines = "\n".join(blocks(document, "text")).split("\n")
    return [re.split(r"\s{2,}", line)[0] for line in lines if line.startswith("realize ")]


def options(document: str) -> list[str]:
    """The options that the notes of those blocks tell of."""
    return re.findall(r"--[a-z]+", "\n".join(blocks(document, "text")))


@pytest.mark.parametrize("document", DOCUMENTS)
def test_every_block_is_of_a_kind_that_is_run(document: str) -> None:
    """Nothing is printed that no test looks at; `python` blocks are all doctests."""
    kinds = {word for word, _ in BLOCK.findall((ROOT / document).read_text("utf-8"))}
    assert kinds <= {"sh", "text", "python"}
    for body in blocks(document, "python"):
        assert body.startswith(">>> "), body
        assert document == "README.md", "only README.md is collected for doctests"


def test_the_two_commands_of_the_readme() -> None:
    """The demo and the suite: as the continuous integration takes them from there."""
    demo, suite = blocks("README.md", "sh")[:2]
    assert shlex.split(demo)[-2:] == [".venv/bin/realize", "demo"]
    assert "-m pytest" in suite
    assert click.testing.CliRunner().invoke(main, ["demo"]).exit_code == 0
    runner = (ROOT / ".ci/run").read_text("utf-8")
    assert "block 1" in runner
    assert "block 2" in runner


@pytest.mark.filterwarnings("ignore::realize.HiddenInstabilityWarning")
@pytest.mark.parametrize("line", commands("README.md"))
def test_every_command_of_the_readme_runs(
    line: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """With a file of its own for each FILE: no usage error, nothing on the error stream."""
    monkeypatch.chdir(tmp_path)
    monkeypatch.syspath_prepend(str(tmp_path))
    realize.save(hidden_in_every_part(), "model.json")
    reduction = realize.exact.minimal(hidden_in_every_part())
    certificate = realize.certify(reduction)
    Path("certificate.json").write_text(certificate.to_json(), "utf-8")
    (tmp_path / "module.py").write_text("def function(A, B, C, D):\n    return len(A)\n", "utf-8")
    words = shlex.split(line)[1:]
    read = "certificate.json" if words[0] == "check" else "model.json"
    stands_for = {"FILE": read, "MODULE:FUNCTION": "module:function"}
    arguments = [
        "out.json" if words[i - 1] == "-o" else stands_for.get(word, word)
        for i, word in enumerate(words)
    ]
    done = click.testing.CliRunner().invoke(main, arguments)
    assert done.exit_code in (0, 1, 3, 4), done.output
    assert done.exception is None or isinstance(done.exception, SystemExit)
    if words[0] == "minimal":
        assert realize.load("out.json") == reduction.model
    if words[0] == "certify":
        assert realize.check(Path("out.json").read_text("utf-8")) == certificate.claim


def test_the_readme_tells_of_every_command_and_only_of_options_there_are() -> None:
    """The list of commands is complete; each option named belongs to one of them."""
    assert {shlex.split(line)[1] for line in commands("README.md")} == set(main.commands)
    known = {
        name
        for command in main.commands.values()
        for parameter in command.params
        for name in parameter.opts
    }
    named = options("README.md")
    assert named
    assert set(named) <= known


@pytest.mark.parametrize("document", ["DEVELOPERS.md", "benchmarks/README.md"])
def test_commands_for_developers_name_what_is_there(document: str) -> None:
    """Every module and every script that a `sh` block runs exists."""
    found = 0
    for body in blocks(document, "sh"):
        for line in body.strip().split("\n"):
            words = shlex.split(line, comments=True)
            if words[:2] == ["python", "-m"]:
                assert (ROOT / f"{words[2].replace('.', '/')}.py").is_file(), line
            else:
                assert (ROOT / words[-1]).is_file(), line
            found += 1
    assert found
