"""The command line: `examine`, `minimal`, `certify`, `check`, `score`, `demo`.

Data go to stdout, messages to stderr. Exit statuses: 0 clean or proved; 1 findings or not proved;
2 usage or input error; 3 undecided; 4 something hidden is not known to be stable.
"""

from __future__ import annotations

import json
import os
import sys
import traceback
from contextlib import ExitStack
from dataclasses import asdict
from pathlib import Path
from typing import Any, NoReturn

import click
from rich.console import Console
from rich.text import Text

from realize import __version__, checker
from realize.convert import as_realization
from realize.demo import stories
from realize.dispatch import path_for
from realize.entries import Reading
from realize.errors import CertificateError, RealizeError
from realize.examination import Examination
from realize.examination.against import differences, read_record
from realize.examination.examine import DEFAULT_BUDGET, examine
from realize.examination.page import findings, page
from realize.forms import reduce
from realize.model.files import load, save, to_document
from realize.model.realization import Kind, Realization
from realize.model.transfer import TransferMatrix
from realize.proof.certify import certify
from realize.proof.record import check
from realize.results import Mode, Reduction, spelled
from realize.stability import (
    NUMBERS_NOT_PLANT,
    ROUNDED_COEFFICIENTS,
    Stability,
    hidden_cautions,
)
from realize.testing.problems import DIFFICULTIES, families
from realize.testing.scoring import check_picture_name, load_routine, score
from realize.uncertainty import Rounding, Uncertainty

__all__ = ["main"]

FINDINGS, INPUT_ERROR, NOT_STABLE, BUG = 1, 2, 4, 70

_EXIT_TEXT = (
    "Exit status: 0 nothing hidden and nothing in doubt; 1 hidden modes, or paths or readings "
    "that disagree; 2 usage or input error; 3 undecided; 4 something hidden is not known to be "
    "stable (4 outranks the others)."
)


_CERTIFICATE_TEXT = (
    "Exit status: 0 proved; 1 not proved; 2 usage or input error; 4 proved, and something hidden "
    "is not known to be stable (certify)."
)


class _Commands(click.Group):
    """Turns errors raised on purpose into one line and status 2."""

    def invoke(self, ctx: click.Context) -> Any:
        with _BugStatus():
            return self._told(ctx)

    def _told(self, ctx: click.Context) -> Any:
        try:
            return super().invoke(ctx)
        except BrokenPipeError:
            # Whoever read the output has had enough; that is no error, and nothing is left to say.
            sys.stdout = open(os.devnull, "w")  # noqa: SIM115  # closed when the process ends
            sys.exit(0)
        except (RealizeError, OSError) as error:
            _fail(str(error))


class _BugStatus:
    """Gives a bug its own exit status: Python's, 1, would look like findings."""

    def __enter__(self) -> None:
        return None

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, _: object
    ) -> None:
        expected = (SystemExit, KeyboardInterrupt, click.exceptions.Exit, click.ClickException)
        if error is None or isinstance(error, (*expected, click.Abort)):
            return
        traceback.print_exception(error)
        click.echo("realize: this is a bug; please report it with the model", err=True)
        sys.exit(BUG)


def _fail(message: str) -> NoReturn:
    click.echo(f"realize: {message}", err=True)
    sys.exit(INPUT_ERROR)


@click.group(cls=_Commands, epilog=_EXIT_TEXT, context_settings={"max_content_width": 80})
@click.version_option(__version__, prog_name="realize")
def main() -> None:
    """Decide which modes of a linear model are hidden, on exact and floating paths side by side.

    FILE is a model file (JSON); "-" reads it from standard input.
    """


def _read(file: str) -> Realization | TransferMatrix:
    return load(sys.stdin if file == "-" else file)


def _caution(*texts: str) -> None:
    for text in texts:
        click.echo(f"caution: {text}", err=True)


def _print_page(text: str) -> None:
    """Print a page; on a terminal the labels stand out and a danger is red."""
    if not sys.stdout.isatty():
        click.echo(text)
        return
    console = Console(highlight=False, soft_wrap=True)
    for line in text.split("\n"):
        styled = Text(line)
        if line[:1].strip():
            styled.stylize("bold", 0, 11)
        if line.startswith("Danger") and "a hidden mode" in line:
            styled.stylize("red")
        console.print(styled)


@main.command("examine", epilog=_EXIT_TEXT)
@click.argument("file", metavar="FILE")
@click.option(
    "--reading",
    "readings",
    multiple=True,
    type=click.Choice([str(word) for word in Reading]),
    help="Which exact model the floats stand for; may be repeated. Default: all that fit.",
)
@click.option("--tolerance", type=float, help="For the floating path; default order * 2^-32.")
@click.option(
    "--uncertainty",
    metavar="HOW",
    help="How far each entry of A, B and C may lie from the number given: a number, relative; "
    '"ulp"; or "last digit".',
)
@click.option(
    "--budget",
    type=click.FloatRange(min=0),
    default=DEFAULT_BUDGET,
    show_default=True,
    help="Seconds that the exact path may take, as many for steps of precision without it, and as "
    "many for the uncertainty.",
)
@click.option(
    "--against",
    metavar="RECORD",
    help="Compare with a recorded examination (what --json printed) and tell what moved.",
)
@click.option("--json", "as_json", is_flag=True, help="Print the stable form.")
def examine_command(
    file: str,
    readings: tuple[str, ...],
    tolerance: float | None,
    uncertainty: str | None,
    budget: float,
    against: str | None,
    as_json: bool,
) -> None:
    """Examine the model in FILE on both paths."""
    recorded = None
    if against is not None:
        with open(against, encoding="utf-8") as stream:
            recorded = read_record(stream)
    source = _read(file)
    if isinstance(source, TransferMatrix) and source.kind == Kind.FLOATING:
        _caution(ROUNDED_COEFFICIENTS)
    model = as_realization(source)
    examination = examine(
        model,
        readings=readings or None,
        tolerance=tolerance,
        uncertainty=None if uncertainty is None else _uncertainty(uncertainty),
        budget=budget,
    )
    if recorded is not None:
        sys.exit(_compare(recorded, examination, as_json))
    if as_json:
        click.echo(json.dumps(examination.to_dict(), indent=2))
    else:
        _print_page(page(examination, "" if file == "-" else Path(file).stem))
    sys.exit(examination.status)


def _uncertainty(text: str) -> Uncertainty:
    """Return what the option means: one of the words, or a number."""
    if text in tuple(Rounding):
        return Uncertainty(rounding=Rounding(text))
    return Uncertainty(relative=text)


def _compare(recorded: dict[str, Any], examination: Examination, as_json: bool) -> int:
    """Print what moved since the record; return the exit status."""
    found = differences(recorded, examination.to_dict())
    if as_json:
        click.echo(json.dumps([asdict(each) for each in found], indent=2))
    elif not found:
        click.echo("As recorded.")
    for each in () if as_json else found:
        click.echo(str(each))
    if examination.status == NOT_STABLE and found:
        return NOT_STABLE
    return FINDINGS if found else 0


@main.command("minimal", epilog=_EXIT_TEXT)
@click.argument("file", metavar="FILE")
@click.option(
    "-o",
    "--output",
    metavar="FILE",
    default="-",
    help='Where to write the reduced model; "-", the default, is standard output.',
)
@click.option(
    "--reading",
    type=click.Choice([str(word) for word in Reading]),
    help="Reduce exactly, with floats read so. Default: the arithmetic follows the data.",
)
@click.option("--json", "as_json", is_flag=True, help="Print a report with the model in it.")
def minimal_command(file: str, output: str, reading: str | None, as_json: bool) -> None:
    """Write a minimal realization of the model in FILE."""
    source = _read(file)
    if reading is not None:
        source = source.read(reading)
    reduction = reduce(path_for(source), source)
    modes = reduction.removed.modes
    status = _status_of(reduction, modes)
    if output != "-":
        save(reduction.model, output)
    elif not as_json:
        save(reduction.model, sys.stdout)
    if as_json:
        click.echo(json.dumps(_report(reduction, modes), indent=2))
    click.echo(
        f"order {reduction.source_order} to {reduction.order}, {reduction.model.kind}", err=True
    )
    _caution(*hidden_cautions(modes))
    sys.exit(status)


def _status_of(reduction: Reduction, modes: tuple[Mode, ...]) -> int:
    if any(mode.stability is not Stability.STABLE for mode in modes):
        return NOT_STABLE
    return FINDINGS if reduction.order < reduction.source_order else 0


def _report(reduction: Reduction, modes: tuple[Mode, ...]) -> dict[str, Any]:
    removed = reduction.removed.polynomial
    return {
        "format": "realize-reduction",
        "version": 1,
        "source_order": reduction.source_order,
        "order": reduction.order,
        "removed": [mode.to_dict() for mode in modes],
        "removed_polynomial": None if removed is None else spelled(removed),
        "decisions": [decision.to_dict() for decision in reduction.decisions],
        "model": to_document(reduction.model),
    }


@main.command("score")
@click.argument("routine", metavar="MODULE:FUNCTION")
@click.option(
    "--family",
    "names",
    multiple=True,
    type=click.Choice([family.name for family in families()]),
    help="Which families of problems; may be repeated. Default: all.",
)
@click.option(
    "--hardest",
    type=click.IntRange(DIFFICULTIES[0], DIFFICULTIES[-1]),
    default=DIFFICULTIES[-1],
    show_default=True,
    help="Difficulties go from 0 to this one.",
)
@click.option(
    "--seeds",
    type=click.IntRange(min=1),
    default=10,
    show_default=True,
    help="Problems of each family and difficulty.",
)
@click.option("--picture", metavar="FILE", help="Also draw it; needs the extra plot.")
@click.option("--json", "as_json", is_flag=True, help="Print the stable form.")
def score_command(
    routine: str,
    names: tuple[str, ...],
    hardest: int,
    seeds: int,
    picture: str | None,
    as_json: bool,
) -> None:
    """Score a routine of yours on problems with known answers.

    It takes float arrays A, B, C, D and returns an order, or A, B, C, D of a reduced model. Exit
    status: 0 all right; 1 some wrong or crashed; 2 usage or input error.
    """
    if picture is not None:
        check_picture_name(picture)
    called = load_routine(routine)
    total = len(names or families()) * (hardest + 1) * seeds
    with ExitStack() as stack:
        bar: Any = None
        if sys.stderr.isatty():
            bar = stack.enter_context(click.progressbar(length=total, file=sys.stderr))
        card = score(
            called,
            names or None,
            difficulties=range(hardest + 1),
            seeds=range(seeds),
            name=routine,
            progress=None if bar is None else lambda done, of: bar.update(1),
        )
    if picture is not None:
        card.save_picture(picture)
    click.echo(json.dumps(card.to_dict(), indent=2) if as_json else str(card))
    sys.exit(0 if card.right == len(card.results) else FINDINGS)


@main.command("certify", epilog=_CERTIFICATE_TEXT)
@click.argument("file", metavar="FILE")
@click.option(
    "-o",
    "--output",
    metavar="FILE",
    default="-",
    help='Where to write the certificate; "-", the default, is standard output.',
)
@click.option(
    "--reading",
    type=click.Choice([str(word) for word in Reading]),
    help="Reduce exactly, with floats read so. Default: the arithmetic follows the data.",
)
def certify_command(file: str, output: str, reading: str | None) -> None:
    """Certify the minimal realization of the model in FILE."""
    source = _read(file)
    if reading is not None:
        source = source.read(reading)
    reduction = reduce(path_for(source), source)
    try:
        certificate = certify(reduction)
    except CertificateError as error:
        _not_proved(error)
    if output == "-":
        click.echo(certificate.to_json(), nl=False)
    else:
        with open(output, "w", encoding="ascii", newline="\n") as stream:
            stream.write(certificate.to_json())
    modes = reduction.removed.modes
    click.echo(
        f"order {reduction.source_order} to {reduction.order}, certificate {certificate.digest}",
        err=True,
    )
    _caution(*hidden_cautions(modes), NUMBERS_NOT_PLANT)
    sys.exit(NOT_STABLE if _status_of(reduction, modes) == NOT_STABLE else 0)


@main.command("check", epilog=_CERTIFICATE_TEXT)
@click.argument("file", metavar="FILE")
def check_command(file: str) -> None:
    """Check the certificate in FILE and print its claim in words."""
    if file == "-":
        content = sys.stdin.buffer.read(checker.MAX_BYTES + 1)
    else:
        with open(file, "rb") as stream:
            content = stream.read(checker.MAX_BYTES + 1)
    try:
        # A certificate is ASCII; whatever is not stays visible, and is refused.
        click.echo(check(content.decode("latin-1")))
    except CertificateError as error:
        _not_proved(error)


def _not_proved(error: CertificateError) -> NoReturn:
    click.echo(f"realize: not proved: {error}", err=True)
    sys.exit(FINDINGS)


@main.command("demo")
@click.option("--json", "as_json", is_flag=True, help="Print the stable form.")
def demo_command(as_json: bool) -> None:
    """Examine four models that are shipped with the package."""
    told = [(story, examine(story.model)) for story in stories()]
    if as_json:
        click.echo(
            json.dumps({story.name: examination.to_dict() for story, examination in told}, indent=2)
        )
        return
    for number, (story, examination) in enumerate(told, start=1):
        _print_story(number, story.title, story.lines(), examination)


def _print_story(number: int, title: str, lines: list[str], examination: Examination) -> None:
    if number > 1:
        click.echo()
    heading = f"{number}. {title}"
    click.echo(heading)
    click.echo("=" * len(heading))
    for line in lines:
        click.echo(line)
    click.echo()
    _print_page(findings(examination))
