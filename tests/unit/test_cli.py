"""The command line: commands, options, streams, exit statuses, and what goes where."""

from __future__ import annotations

import inspect
import json
import os
import re
import subprocess
import sys
from collections.abc import Callable, Mapping
from pathlib import Path
from typing import Any

import click.testing
import numpy as np
import pytest

import realize
from realize import Realization, TransferMatrix, exact
from realize.cli import main
from realize.errors import RealizeError
from realize.examination.page import page
from tests.helpers import assert_same_transfer

# --------------------------------------------------------------------------- running it


def run(*arguments: str, text: str | bytes | None = None) -> Any:
    """Run the command line in this process; anything but an exit is raised."""
    # click 8.1 mixes the two streams unless told not to; later ones never do.
    known = inspect.signature(click.testing.CliRunner).parameters
    options: Mapping[str, Any] = {"mix_stderr": False} if "mix_stderr" in known else {}
    runner = click.testing.CliRunner(**options)
    return runner.invoke(
        main, list(arguments), input=text, catch_exceptions=False, prog_name="realize"
    )


def run_module(
    *arguments: str, text: str | None = None, **environment: str
) -> subprocess.CompletedProcess[str]:
    """Run `python -m realize` in a process of its own."""
    path = os.pathsep.join(part for part in sys.path if part)
    return subprocess.run(
        [sys.executable, "-m", "realize", *arguments],
        input=text,
        capture_output=True,
        text=True,
        timeout=60,
        env=os.environ | {"PYTHONPATH": path} | environment,
    )


# --------------------------------------------------------------------------- model files


def minimal_model() -> Realization:
    """Two states, both reached and seen."""
    return Realization([[-1, 0], [0, -2]], [1, 1], [1, 1])


def hidden_stable() -> Realization:
    """-2 is not reached: A B = -B. It decays."""
    return Realization(
        [[-1, 0], ["1/3", -2]],
        [1, "1/3"],
        [1, 1],
        input_names=["valve"],
        output_names=["level"],
    )


def hidden_growing() -> Realization:
    """1/4 is not reached; it grows."""
    return Realization([[-1, 0], [0, "1/4"]], [1, 0], [1, 1])


def hidden_integrator() -> Realization:
    """0 is not seen; it stays."""
    return Realization([[-1.0, 0.0], [0.0, 0.0]], [1.0, 1.0], [1.0, 0.0])


def decimals() -> Realization:
    """Minimal as stored, of order 1 as written."""
    return Realization([[-0.1, -0.2], [0.0, -0.3]], [0.1, 0.1], [1.0, 0.0])


def cancelling() -> TransferMatrix:
    """(s + 1) / ((s + 1)(s + 2))."""
    return TransferMatrix([1, 1], [1, 3, 2])


def square_transfer() -> TransferMatrix:
    """Two inputs and outputs: 1/(s + 1) in every entry, of order 1."""
    return TransferMatrix([[[1], [1]], [[1], [1]]], [[[1, 1], [1, 1]], [[1, 1], [1, 1]]])


def no_states() -> Realization:
    """A gain."""
    return Realization([], [], [], [[1, 2]])


@pytest.fixture
def file(tmp_path: Path) -> Callable[[Any], str]:
    """Return what writes a model, or any text, to a file and gives its name."""

    def write(content: Any) -> str:
        target = tmp_path / f"{len(list(tmp_path.iterdir()))}.json"
        if isinstance(content, bytes):
            target.write_bytes(content)
        elif isinstance(content, str):
            target.write_text(content, "utf-8")
        else:
            realize.save(content, target)
        return str(target)

    return write


def text_of(model: Any, tmp_path: Path) -> str:
    """Return the text of a model file."""
    realize.save(model, tmp_path / "model.json")
    return (tmp_path / "model.json").read_text("ascii")


# --------------------------------------------------------------------------- examine

EXAMINED = [
    pytest.param(minimal_model, [], 0, id="nothing hidden"),
    pytest.param(no_states, [], 0, id="no states"),
    pytest.param(hidden_stable, [], 1, id="hidden and stable"),
    pytest.param(decimals, [], 1, id="readings disagree"),
    pytest.param(cancelling, [], 1, id="cancelling transfer"),
    pytest.param(square_transfer, [], 1, id="transfer matrix"),
    pytest.param(decimals, ["--budget", "0"], 3, id="undecided"),
    pytest.param(minimal_model, ["--budget", "0"], 3, id="undecided, nothing hidden"),
    pytest.param(hidden_growing, [], 4, id="hidden and growing"),
    pytest.param(hidden_integrator, [], 4, id="hidden and steady"),
    pytest.param(hidden_growing, ["--budget", "0"], 4, id="growing outranks undecided"),
    pytest.param(hidden_integrator, ["--budget", "0"], 4, id="doubt about growth, too"),
]


@pytest.mark.parametrize(("model", "options", "status"), EXAMINED)
def test_examine(
    model: Callable[[], Any], options: list[str], status: int, file: Callable[[Any], str]
) -> None:
    """The page is on stdout, nothing is on stderr, and the status says how it stands."""
    done = run("examine", file(model()), *options)
    assert done.exit_code == status
    assert done.stderr == ""
    assert done.stdout.startswith("Model ")
    assert max(map(len, done.stdout.splitlines())) <= 80
    assert done.stdout.endswith("\n")
    assert not done.stdout.endswith("\n\n")


@pytest.mark.parametrize(("model", "options", "status"), EXAMINED)
def test_examine_in_json(
    model: Callable[[], Any], options: list[str], status: int, file: Callable[[Any], str]
) -> None:
    """The stable form is one JSON document, and what the library says; the status is the same."""
    subject = model()
    done = run("examine", file(subject), "--json", *options)
    assert done.exit_code == status
    assert done.stderr == ""
    found = json.loads(done.stdout)
    budget = 0 if options else 10
    expected = realize.examine(realize.as_realization(subject), budget=budget).to_dict()
    for document in (found, expected):
        del document["seconds"], document["peak_memory"]
        document["not_done"] = len(document["not_done"])  # the times left differ
    assert found == expected


def test_the_page_is_that_of_the_library(file: Callable[[Any], str]) -> None:
    """Word for word, apart from the end of the line."""
    model = hidden_growing()
    name = file(model)
    done = run("examine", name)
    expected = page(realize.examine(model), Path(name).stem)
    assert untimed(done.stdout) == untimed(expected + "\n")


def test_readings_are_chosen(file: Callable[[Any], str]) -> None:
    """--reading may be repeated; only those named are examined."""
    name = file(decimals())
    one = json.loads(run("examine", name, "--reading", "written", "--json").stdout)
    assert one["minimal_order"] == {"written": 1}
    two = run("examine", name, "--json", "--reading", "stored", "--reading", "written")
    assert json.loads(two.stdout)["minimal_order"] == {"stored": 2, "written": 1}
    assert two.exit_code == 1
    given = run("examine", file(minimal_model()), "--reading", "given", "--json")
    assert json.loads(given.stdout)["minimal_order"] == {"given": 2}


def test_the_tolerance_is_passed_on(file: Callable[[Any], str]) -> None:
    """A tolerance of 1/2 leaves the floating path with fewer states than the exact one."""
    name = file(Realization([[-1, 0], [0, "-5/4"]], [1, 1], [1, 1]))
    found = json.loads(run("examine", name, "--tolerance", "0.3", "--json").stdout)
    assert found["floating_order"] < found["minimal_order"]["given"] == 2
    assert found["decisions"][0]["cutoff"] == 0.3 * found["decisions"][0]["scale"]
    assert json.loads(run("examine", name, "--json").stdout)["floating_order"] == 2


# --------------------------------------------------------------------------- minimal


@pytest.mark.parametrize(
    ("model", "order", "status"),
    [
        pytest.param(minimal_model, 2, 0, id="nothing to remove"),
        pytest.param(no_states, 0, 0, id="no states"),
        pytest.param(hidden_stable, 1, 1, id="hidden and stable"),
        pytest.param(hidden_growing, 1, 4, id="hidden and growing"),
        pytest.param(cancelling, 1, 1, id="transfer"),
        pytest.param(square_transfer, 1, 1, id="transfer matrix"),
    ],
)
def test_the_reduced_file_has_the_same_transfer_matrix(
    model: Callable[[], Any],
    order: int,
    status: int,
    file: Callable[[Any], str],
    tmp_path: Path,
) -> None:
    """The file written loads, is minimal, has the names and, exactly, the transfer matrix."""
    source, target = model(), tmp_path / "reduced.json"
    done = run("minimal", file(source), "-o", str(target))
    assert done.exit_code == status
    assert done.stdout == ""
    reduced = realize.load(target)
    assert isinstance(reduced, Realization)
    assert reduced.order == order == exact.minimal(reduced).order
    assert (reduced.input_names, reduced.output_names) == (source.input_names, source.output_names)
    whole = realize.as_transfer_matrix(source)
    assert_same_transfer(exact.transfer_matrix(reduced), whole)
    states = realize.as_realization(source).order
    assert f"order {states} to {order}, rational" in done.stderr


def test_without_a_target_the_model_is_on_stdout(
    file: Callable[[Any], str], tmp_path: Path
) -> None:
    """stdout holds the model file and nothing else, as with `-o -`; -o FILE gets the same bytes."""
    name = file(hidden_growing())
    plain, dash = run("minimal", name), run("minimal", name, "-o", "-")
    assert plain.exit_code == dash.exit_code == 4
    assert plain.stdout == dash.stdout
    (tmp_path / "again.json").write_text(plain.stdout, "ascii")
    assert realize.load(tmp_path / "again.json").order == 1  # type: ignore[union-attr]
    run("minimal", name, "--output", str(tmp_path / "target.json"))
    assert (tmp_path / "target.json").read_text("ascii") == plain.stdout


def test_rounded_coefficients_come_with_their_caution(file: Callable[[Any], str]) -> None:
    """A transfer function in doubles may be another filter than the one meant; an exact one not."""
    rounded = run("examine", file(TransferMatrix([1.0], [1.0, 0.1])))
    assert "caution: Coefficients that are correctly rounded" in rounded.stderr
    assert rounded.exit_code == 0
    assert run("examine", file(TransferMatrix([1], [1, "1/10"]))).stderr == ""


def test_cautions_go_to_stderr(file: Callable[[Any], str], tmp_path: Path) -> None:
    """What the reduced model no longer shows is said, and not among the data."""
    done = run("minimal", file(hidden_growing()))
    assert "Hidden unstable mode at 0.25" in done.stderr
    assert "Do not judge the stability of the plant from the reduced model" in done.stderr
    json.loads(done.stdout)
    calm = run("minimal", file(minimal_model()), "-o", str(tmp_path / "calm.json"))
    assert calm.stderr == "order 2 to 2, rational\n"


def test_the_arithmetic_follows_the_data_unless_a_reading_is_named(
    file: Callable[[Any], str],
) -> None:
    """Floats are reduced in floats; with --reading exactly, and by that reading."""
    name = file(decimals())
    loose = run("minimal", name)
    assert "order 2 to 1, floating" in loose.stderr
    written = run("minimal", name, "--reading", "written")
    assert "order 2 to 1, rational" in written.stderr
    assert json.loads(written.stdout)["realization"]["A"] == [["-3/10"]]
    assert written.exit_code == 1
    stored = run("minimal", name, "--reading", "stored")
    assert "order 2 to 2, rational" in stored.stderr
    assert stored.exit_code == 0


def test_minimal_reports_in_json(file: Callable[[Any], str], tmp_path: Path) -> None:
    """--json prints a report with the model in it, and -o still writes the model."""
    name, target = file(hidden_growing()), tmp_path / "reduced.json"
    done = run("minimal", name, "--json", "-o", str(target))
    assert done.exit_code == 4
    report = json.loads(done.stdout)
    assert (report["format"], report["version"]) == ("realize-reduction", 1)
    assert (report["source_order"], report["order"]) == (2, 1)
    assert report["removed_polynomial"] == ["1", "-1/4"]
    (mode,) = report["removed"]
    assert (mode["real"], mode["imaginary"], mode["stability"]) == (0.25, 0.0, "unstable")
    assert [d["rank"] for d in report["decisions"]] == [1, 0, 1]
    assert report["model"] == json.loads(target.read_text("ascii"))
    bare = run("minimal", name, "--json")
    assert json.loads(bare.stdout) == report
    floating = json.loads(run("minimal", file(decimals()), "--json").stdout)
    assert floating["removed_polynomial"] is None
    assert floating["order"] == 1


# --------------------------------------------------------------------------- certificates


@pytest.mark.parametrize(
    ("model", "arguments", "status"),
    [
        pytest.param(minimal_model, [], 0, id="nothing to remove"),
        pytest.param(no_states, [], 0, id="no states"),
        pytest.param(hidden_stable, [], 0, id="hidden and stable"),
        pytest.param(hidden_growing, [], 4, id="hidden and growing"),
        pytest.param(square_transfer, [], 0, id="transfer matrix"),
        pytest.param(decimals, [], 0, id="floats"),
        pytest.param(decimals, ["--reading", "stored"], 0, id="floats as stored"),
    ],
)
def test_a_certificate_is_written_and_checked(
    model: Callable[[], Any],
    arguments: list[str],
    status: int,
    file: Callable[[Any], str],
    tmp_path: Path,
) -> None:
    """What `certify` writes, `check` proves; with -o, to stdout, and from a stream."""
    target = tmp_path / "certificate.json"
    done = run("certify", file(model()), "-o", str(target), *arguments)
    assert (done.exit_code, done.stdout) == (status, "")
    assert ("caution: Hidden unstable mode" in done.stderr) == (status == 4)
    text = target.read_text("ascii")
    checked = run("check", str(target))
    assert (checked.exit_code, checked.stderr) == (0, "")
    assert checked.stdout == realize.check(text) + "\n"
    assert json.loads(text)["digest"] in done.stderr
    assert "caution: A certificate is a statement about exact tables of numbers" in done.stderr
    assert run("check", "-", text=text).stdout == checked.stdout
    shown = run("certify", file(model()), *arguments)
    assert json.loads(shown.stdout)["digest"] == json.loads(text)["digest"]


@pytest.mark.parametrize("content", [b"", b"{}", b"\xff\xfe\x00", b'{"format":"realize-model"}'])
def test_what_is_not_proved(content: bytes, tmp_path: Path) -> None:
    """A file that is no certificate is status 1, with one line on stderr."""
    name = tmp_path / "certificate.json"
    name.write_bytes(content)
    for done in (run("check", str(name)), run("check", "-", text=content)):
        assert (done.exit_code, done.stdout) == (1, "")
        assert done.stderr.startswith("realize: not proved: the certificate does not hold: ")
        assert done.stderr.count("\n") == 1


def test_a_floating_order_that_no_reading_confirms(
    file: Callable[[Any], str], tmp_path: Path
) -> None:
    """Nothing is written, and the status is 1."""
    model = Realization([[-1.0, 0.1 + 0.2], [1e-17, -2.0]], [[1.0], [1e-18]], [[1.0, 1.0]])
    target = tmp_path / "certificate.json"
    done = run("certify", file(model), "-o", str(target))
    assert (done.exit_code, done.stdout) == (1, "")
    assert "delivered order 1; the exact minimal order is 2 as stored" in done.stderr
    assert not target.exists()


# --------------------------------------------------------------------------- streams


@pytest.mark.parametrize("command", ["examine", "minimal"])
def test_a_dash_reads_standard_input(
    command: str, file: Callable[[Any], str], tmp_path: Path
) -> None:
    """`-` gives what the file gives."""
    model = hidden_stable()
    text = text_of(model, tmp_path)
    name = file(model)
    from_stream, from_file = run(command, "-", text=text), run(command, name)
    assert from_stream.exit_code == from_file.exit_code == 1
    # A stream has no name.
    named = from_file.stdout.replace(f"{Path(name).stem}: ", "", 1)
    assert untimed(" ".join(from_stream.stdout.split())) == untimed(" ".join(named.split()))
    assert from_stream.stderr == from_file.stderr


def test_commands_can_be_chained(tmp_path: Path) -> None:
    """What `minimal -` writes, `examine -` finds minimal; in processes of their own."""
    reduced = run_module("minimal", "-", text=text_of(hidden_growing(), tmp_path))
    assert reduced.returncode == 4
    found = run_module("examine", "-", "--json", text=reduced.stdout)
    assert found.returncode == 0
    assert json.loads(found.stdout)["minimal_order"] == {"given": 1}


def test_nobody_reads_the_output(tmp_path: Path) -> None:
    """A reader that stops early, as `head` does, is no input error: nothing is said of it."""
    name = tmp_path / "large.json"
    size = 60
    entries = np.random.default_rng(1).integers(-9, 9, (size, size))
    realize.save(Realization(entries, entries[:, :1], entries[:1]), name)
    path = os.pathsep.join(part for part in sys.path if part)
    with subprocess.Popen(
        [sys.executable, "-m", "realize", "minimal", str(name), "--json"],
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        env=os.environ | {"PYTHONPATH": path},
    ) as process:
        assert process.stdout is not None
        assert process.stderr is not None
        process.stdout.close()
        message = process.stderr.read().decode()
        process.wait(60)
    assert "Traceback" not in message
    assert "Broken pipe" not in message


# --------------------------------------------------------------------------- what is refused

HEAD = '{"format": "realize-model", "version": 1, "realization": '
WRONG_FILES = [
    pytest.param("", "not JSON", id="empty"),
    pytest.param("A = [1, 2]", "not JSON", id="no JSON"),
    pytest.param('{"format": "realize-model", "vers', "not JSON", id="truncated"),
    pytest.param(b"\xff\xfe\x00\x01", "UTF-8", id="not text"),
    pytest.param("[1, 2, 3]", "not a model file", id="a list"),
    pytest.param('{"A": [[1]], "B": [[1]], "C": [[1]]}', "not a model file", id="no format"),
    pytest.param('{"format": "realize-model", "version": 9}', "version", id="another version"),
    pytest.param(HEAD + '{"A": [[1]], "B": [[1]]}}', "missing", id="no C"),
    pytest.param(HEAD + '{"A": [[1, 2]], "B": [[1]], "C": [[1]]}}', "A", id="not square"),
    pytest.param(HEAD + '{"A": [[1], [2, 3]], "B": [[1]], "C": [[1]]}}', "A", id="ragged"),
    pytest.param(HEAD + '{"A": [["one"]], "B": [[1]], "C": [[1]]}}', "one", id="no number"),
    pytest.param(HEAD + '{"A": [["1/0"]], "B": [[1]], "C": [[1]]}}', "1/0", id="over zero"),
    pytest.param(HEAD + '{"A": [["1e999999999"]], "B": [[1]], "C": [[1]]}}', "exponent", id="huge"),
    pytest.param(HEAD + '{"A": [[NaN]], "B": [[1]], "C": [[1]]}}', "NaN", id="NaN"),
    pytest.param(HEAD + '{"A": [[1e999]], "B": [[1]], "C": [[1]]}}', "inf", id="overflow"),
    pytest.param(HEAD + '{"A": [[true]], "B": [[1]], "C": [[1]]}}', "bool", id="bool"),
    pytest.param(HEAD + '{"A": [[null]], "B": [[1]], "C": [[1]]}}', "None", id="null"),
    pytest.param(
        HEAD + '{"A": [[1]], "B": [[1]], "C": [[1]]}, "sampling_period": 0}', "period", id="period"
    ),
    pytest.param("[" * 100_000, "nesting", id="deep"),
    pytest.param(HEAD + '{"A": [[' + "0," * 2_000_001 + "0]]}}", "entries", id="many entries"),
    pytest.param(HEAD + '{"A": [[' + "9" * 200_000 + ']], "B": [[1]], "C": [[1]]}}', "digits",
                 id="many digits"),
    pytest.param(HEAD + '{"A": [], "B": [], "C": []}, "states": 1000000000}', "states",
                 id="a huge count"),
    pytest.param(
        '{"format": "realize-model", "version": 1,'
        ' "transfer": {"numerators": [1, 0, 0], "denominators": [1, 1]}}',
        "improper",
        id="improper",
    ),
    pytest.param(
        '{"format": "realize-model", "version": 1,'
        ' "transfer": {"numerators": [1], "denominators": [0, 0]}}',
        "denominator",
        id="zero denominator",
    ),
]  # fmt: skip


def assert_refused(done: Any, words: str) -> None:
    """Status 2, one line on stderr that says why, nothing on stdout."""
    assert done.exit_code == 2
    assert done.stdout == ""
    assert done.stderr.startswith("realize: ")
    assert done.stderr.count("\n") == 1
    assert len(done.stderr) < 600
    assert words.lower() in done.stderr.lower()
    assert "Traceback" not in done.stderr


@pytest.mark.parametrize("command", ["examine", "minimal", "certify"])
@pytest.mark.parametrize(("content", "words"), WRONG_FILES)
def test_files_that_are_no_models(
    command: str, content: Any, words: str, file: Callable[[Any], str]
) -> None:
    """Not JSON, not models, truncated, enormous: status 2 and one line."""
    assert_refused(run(command, file(content)), words)


@pytest.mark.parametrize(
    ("content", "words"),
    [p for p in WRONG_FILES if p.id in ("truncated", "a list", "ragged", "deep")],
)
def test_streams_that_are_no_models(content: str, words: str) -> None:
    """The same from standard input."""
    assert_refused(run("examine", "-", text=content), words)


def test_a_stream_that_is_not_text() -> None:
    """Bytes that are no UTF-8 on standard input, in a process of its own."""
    path = os.pathsep.join(part for part in sys.path if part)
    done = subprocess.run(
        [sys.executable, "-m", "realize", "examine", "-"],
        input=b"\xff\xfe\x00\x01",
        capture_output=True,
        timeout=60,
        env=os.environ | {"PYTHONPATH": path, "PYTHONIOENCODING": "utf-8:strict"},
    )
    assert done.returncode == 2
    assert done.stdout == b""
    assert done.stderr.startswith(b"realize: ")
    assert b"Traceback" not in done.stderr


@pytest.mark.parametrize("command", ["examine", "minimal", "certify", "check"])
def test_files_that_cannot_be_read(command: str, tmp_path: Path) -> None:
    """A missing file, and a directory."""
    assert_refused(run(command, str(tmp_path / "nothing.json")), "nothing.json")
    assert_refused(run(command, str(tmp_path)), tmp_path.name)


def test_a_target_that_cannot_be_written(file: Callable[[Any], str], tmp_path: Path) -> None:
    """The directory of the target does not exist."""
    target = tmp_path / "nowhere" / "reduced.json"
    assert_refused(run("minimal", file(minimal_model()), "-o", str(target)), "nowhere")


def test_a_file_that_is_no_model_leaves_the_target_alone(
    file: Callable[[Any], str], tmp_path: Path
) -> None:
    """An error on the way in writes nothing on the way out."""
    target = tmp_path / "kept.json"
    target.write_text("kept", "ascii")
    assert run("minimal", file("[]"), "-o", str(target)).exit_code == 2
    assert target.read_text("ascii") == "kept"


@pytest.mark.parametrize(
    "arguments",
    [
        ["examine"],
        ["minimal"],
        ["examine", "FILE", "FILE"],
        ["examine", "FILE", "--reading", "rounded"],
        ["minimal", "FILE", "--reading", "rounded"],
        ["minimal", "FILE", "--budget", "1"],
        ["examine", "FILE", "--budget", "-1"],
        ["examine", "FILE", "--budget", "long"],
        ["examine", "FILE", "--tolerance", "small"],
        ["examine", "FILE", "--colour"],
        ["demo", "FILE"],
        ["reduce", "FILE"],
        ["--verbose"],
    ],
)
def test_usage_errors(arguments: list[str], file: Callable[[Any], str]) -> None:
    """Unknown commands, options and words, missing and spare arguments: status 2, on stderr."""
    name = file(minimal_model())
    done = run(*[name if word == "FILE" else word for word in arguments])
    assert done.exit_code == 2
    assert done.stdout == ""
    assert "Usage: realize" in done.stderr


@pytest.mark.parametrize(
    ("options", "words"),
    [
        (["--tolerance", "-1"], "tolerance"),
        (["--tolerance", "nan"], "tolerance"),
        (["--tolerance", "inf"], "tolerance"),
        (["--budget", "nan"], "budget"),
        (["--reading", "given"], "given"),
    ],
)
def test_values_that_the_library_refuses(
    options: list[str], words: str, file: Callable[[Any], str]
) -> None:
    """The message of the library in one line, status 2."""
    assert_refused(run("examine", file(decimals()), *options), words)


def test_given_is_refused_for_floats(file: Callable[[Any], str]) -> None:
    """`minimal --reading given` of a file with floats."""
    assert_refused(run("minimal", file(decimals()), "--reading", "given"), "given")


def test_other_errors_are_not_swallowed(
    file: Callable[[Any], str], monkeypatch: pytest.MonkeyPatch
) -> None:
    """A fault of the program is not dressed up as an input error; one of the library is told."""

    def fault(*_: Any, **__: Any) -> None:
        raise ZeroDivisionError("a fault")

    def refusal(*_: Any, **__: Any) -> None:
        raise RealizeError("found this, wanted that")

    name = file(minimal_model())
    monkeypatch.setattr("realize.cli.examine", fault)
    broken = run("examine", name)
    assert broken.exit_code == 70
    assert "ZeroDivisionError: a fault" in broken.stderr
    assert "bug" in broken.stderr
    monkeypatch.setattr("realize.cli.examine", refusal)
    assert run("examine", name).stderr == "realize: found this, wanted that\n"


# --------------------------------------------------------------------------- help and version


def test_version() -> None:
    """--version says the version of the package on stdout."""
    done = run("--version")
    assert done.exit_code == 0
    assert done.stdout == f"realize, version {realize.__version__}\n"
    assert done.stderr == ""


@pytest.mark.parametrize("arguments", [["--help"], ["examine", "--help"], ["minimal", "--help"]])
def test_help_names_the_exit_statuses(arguments: list[str]) -> None:
    """Help is on stdout, fits 80 columns, and tells the statuses."""
    done = run(*arguments)
    assert done.exit_code == 0
    assert max(map(len, done.stdout.splitlines())) <= 80
    words = " ".join(done.stdout.split())
    for status in ("0 nothing hidden", "1 hidden modes", "2 usage", "3 undecided", "4 something"):
        assert status in words


def test_commands_are_listed() -> None:
    """The commands, each with a sentence."""
    words = run("--help").stdout
    for command in ("examine", "minimal", "certify", "check", "demo"):
        assert re.search(rf"^  {command}  +\w.*\.$", words, re.MULTILINE)


def test_python_m_realize() -> None:
    """`python -m realize` is the same program, under the same name."""
    done = run_module("--version")
    assert (done.returncode, done.stdout, done.stderr) == (0, run("--version").stdout, "")
    wrong = run_module("examine")
    assert wrong.returncode == 2
    assert wrong.stderr.startswith("Usage: realize examine")


@pytest.mark.parametrize("missing", ["click", "rich"])
def test_without_the_extra(missing: str) -> None:
    """Without click or rich the program says what to install, with the status of a usage error."""
    code = (
        "import runpy, sys\n"
        "class Absent:\n"
        "    def find_spec(self, name, *rest):\n"
        f"        if name == {missing!r}:\n"
        "            raise ModuleNotFoundError(f'No module named {name!r}', name=name)\n"
        "sys.meta_path.insert(0, Absent())\n"
        "sys.argv = ['realize', 'demo']\n"
        "runpy.run_module('realize', run_name='__main__')\n"
    )
    path = os.pathsep.join(part for part in sys.path if part)
    done = subprocess.run(
        [sys.executable, "-c", code],
        capture_output=True,
        text=True,
        timeout=60,
        env=os.environ | {"PYTHONPATH": path},
    )
    assert done.stdout == ""
    assert "realize[cli]" in done.stderr
    assert missing in done.stderr
    assert "Traceback" not in done.stderr
    assert done.returncode == 2


# --------------------------------------------------------------------------- demo


def test_demo() -> None:
    """Four stories with their examinations, on at most 80 columns; status 0 whatever they hold."""
    done = run("demo")
    assert done.exit_code == 0
    assert done.stderr == ""
    lines = done.stdout.splitlines()
    assert max(map(len, lines)) <= 80
    assert [line[:2] for line in lines if re.match(r"\d\. ", line)] == ["1.", "2.", "3.", "4."]
    assert sum(line.startswith("Answer ") for line in lines) == 4
    assert sum(line.startswith("Danger ") for line in lines) == 4


def test_demo_in_json() -> None:
    """What each story promises is what its examination found."""
    done = run("demo", "--json")
    assert done.exit_code == 0
    found = json.loads(done.stdout)
    decimal, growing, conflict, minimal = found.values()
    # Only the written reading (and the simplest fractions, which are the same) shows it.
    assert decimal["minimal_order"]["stored"] == decimal["order"]
    assert decimal["minimal_order"]["written"] < decimal["order"]
    assert decimal["answer"]["basis"] == "written"
    assert any("unstable" in caution for caution in growing["cautions"])
    assert growing["stabilizable"] == "no"
    # No single tolerance gives the exact answer.
    assert conflict["cutoff_ranges"] == {"given": None}
    assert conflict["conflicts"]["given"]
    assert not conflict["paths_agree"]
    assert minimal["minimal_order"] == {"given": minimal["order"]}
    low, high = minimal["cutoff_ranges"]["given"]
    assert low < minimal["decisions"][0]["cutoff"] < high


def test_the_last_story_tells_a_rank_that_is_too_low() -> None:
    """The rank of the controllability matrix in the text is numpy's, and below the order."""
    from realize.demo import stories

    *_, story = stories()
    told = re.search(r"is (\d+) of (\d+)", " ".join(story.lines()))
    assert told is not None
    model = story.model.to_float()
    powers = [np.linalg.matrix_power(model.A, k) @ model.B for k in range(model.order)]
    assert int(told[1]) == np.linalg.matrix_rank(np.hstack(powers)) < int(told[2]) == model.order


# --------------------------------------------------------------------------- colour

pty = pytest.importorskip("pty", reason="needs a terminal of a Unix system")


def on_a_terminal(*arguments: str, **environment: str) -> str:
    """Run `python -m realize` with a terminal as its stdout, and return what came there."""
    path = os.pathsep.join(part for part in sys.path if part)
    inherited = {k: v for k, v in os.environ.items() if k not in ("NO_COLOR", "FORCE_COLOR")}
    near, far = pty.openpty()
    try:
        with subprocess.Popen(
            [sys.executable, "-m", "realize", *arguments],
            stdin=subprocess.DEVNULL,
            stdout=far,
            stderr=subprocess.PIPE,
            env=inherited | {"PYTHONPATH": path, "TERM": "xterm-256color"} | environment,
        ) as process:
            os.close(far)
            pieces = []
            while True:
                try:
                    piece = os.read(near, 65536)
                except OSError:  # Linux says so when the other end of a terminal is closed
                    piece = b""
                if not piece:
                    break
                pieces.append(piece)
            process.wait(60)
    finally:
        os.close(near)
    return b"".join(pieces).decode().replace("\r\n", "\n")


def untimed(text: str) -> str:
    """A page without what it says of the time and the memory it took."""
    return re.sub(r"Took .*?(?= Caution|\n\n|\n?$)", "Took", text, flags=re.DOTALL)


COLOUR = re.compile(r"\x1b\[(?:\d+;)*3\d(?:;\d+)*m")
CODE = re.compile(r"\x1b\[[\d;]*m")


def test_a_terminal_shows_danger_in_colour(file: Callable[[Any], str]) -> None:
    """On a terminal a danger is coloured; without the codes it is the same page."""
    model = hidden_growing()
    name = file(model)
    shown = on_a_terminal("examine", name)
    coloured = [line for line in shown.splitlines() if COLOUR.search(line)]
    assert len(coloured) == 1
    assert CODE.sub("", coloured[0]).startswith("Danger ")
    expected = page(realize.examine(model), Path(name).stem)
    assert untimed(CODE.sub("", shown)) == untimed(expected + "\n")


def test_no_color_is_honoured(file: Callable[[Any], str]) -> None:
    """With NO_COLOR set there is no colour on a terminal."""
    shown = on_a_terminal("examine", file(hidden_growing()), NO_COLOR="1")
    assert "Danger" in shown
    assert not COLOUR.search(shown)


def test_a_pipe_gets_no_codes(file: Callable[[Any], str]) -> None:
    """Not on a terminal nothing is styled, whatever the terminal could do."""
    done = run_module(
        "examine", file(hidden_growing()), TERM="xterm-256color", COLORTERM="truecolor"
    )
    assert done.returncode == 4
    assert "\x1b" not in done.stdout
    assert done.stderr == ""
