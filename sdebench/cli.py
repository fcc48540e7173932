"""The command line: a client of the public interface.

Exit codes: 0 every claim supported; 1 a claim refuted; 2 wrong use or bad input; 3 undecided;
4 the bench contradicts itself.
"""

import json
import sys
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import click

from sdebench import gate_cli
from sdebench.errors import SdebenchError


class Steps(click.ParamType[tuple[int, ...]]):
    """A ladder as comma-separated numbers of steps."""

    name = "N,N,..."

    def convert(
        self, value: Any, param: click.Parameter | None, ctx: click.Context | None
    ) -> tuple[int, ...]:
        """Return the numbers; the ladder itself is checked by the study."""
        try:
            return tuple(int(part) for part in str(value).split(","))
        except ValueError:
            self.fail(f"'{value}' is no list of whole numbers such as 8,16,32,64.", param, ctx)


@click.group(context_settings={"help_option_names": ["-h", "--help"]})
@click.version_option(package_name="sdebench")
def cli() -> None:
    """Measure whether SDE integrators converge, strongly and weakly, at the orders they claim."""


@cli.command()
@click.argument("schemes", metavar="[SCHEME]...", nargs=-1)
@click.option(
    "--on",
    "problems",
    metavar="PROBLEM",
    multiple=True,
    help="A problem, with parameters if wanted: gbm:mu=1.5,sigma=0.5. May be repeated. "
    "Default: every problem the scheme applies to.",
)
@click.option(
    "--steps",
    type=Steps(),
    help="The rungs of the ladder.  [default: 4 to 64, and to 4096 where errors are propagated]",
)
@click.option(
    "--functional",
    "functionals",
    metavar="NAME",
    multiple=True,
    help="A further weak functional, file.py:function. May be repeated.",
)
@click.option(
    "--grid-maximum", is_flag=True, help="Also the largest strong error over each rung's grid."
)
@click.option(
    "--route",
    type=click.Choice(["propagated", "sampled"]),
    help="One route to errors alone.  [default: propagated where it applies, checked by a sample]",
)
@click.option("--seed", type=int, default=1, show_default=True, help="Same seed, same bits.")
@click.option("--confidence", type=float, default=0.95, show_default=True, help="Of intervals.")
@click.option("--tolerance", type=float, default=0.1, show_default=True, help="In orders.")
@click.option("--budget", type=float, metavar="SECONDS", help="Stop looking after this time.")
@click.option("--looks", type=int, metavar="K", help="Look exactly K times.")
@click.option("--threads", type=int, help="Threads; no result depends on it.")
@click.option("--save", type=click.Path(path_type=Path), metavar="EVIDENCE.json")
@click.option(
    "--report",
    "folder",
    type=click.Path(path_type=Path),
    metavar="DIR",
    help="Write the convergence report into a folder.",
)
@click.option("--quiet", is_flag=True, help="Print nothing but what is not supported.")
def measure(
    schemes: tuple[str, ...],
    problems: tuple[str, ...],
    functionals: tuple[str, ...],
    save: Path | None,
    folder: Path | None,
    quiet: bool,
    **options: Any,
) -> None:
    """Measure schemes and judge their claims.

    SCHEME is a registered name or file.py:function; none means every registered one.
    """
    from sdebench.reports import terminal
    from sdebench.study import measure as run
    from sdebench.whole_file import check_writable

    tell_faults()
    if save is not None:
        check_writable(save)
    if folder is not None:
        from sdebench.reports.folder import check_folder

        check_folder(folder)
    with terminal.progress_bar(terminal.console(sys.stderr), quiet) as progress:
        evidence = run(
            schemes or None, problems or None, functionals=functionals, progress=progress, **options
        )
    if save is not None:
        evidence.save(save)
    if folder is not None:
        from sdebench.reports.report import write_report

        write_report([evidence], folder)
    show = terminal.show_sentences if quiet else terminal.show_evidence
    show(evidence, terminal.console())
    sys.exit(evidence.exit_code)


@cli.command()
@click.argument("schemes", metavar="[SCHEME]...", nargs=-1)
@click.option("--on", "problem", metavar="PROBLEM", required=True, help="The problem.")
@click.option("--error", type=float, required=True, metavar="E", help="The target of the error.")
@click.option(
    "--kind",
    type=click.Choice(["strong", "weak"]),
    default="strong",
    show_default=True,
    help="Which error: the root mean square on one path, or that of expectations.",
)
@click.option(
    "--functional",
    "functionals",
    metavar="NAME",
    multiple=True,
    help="A weak functional that is to meet the target: mean, second-moment, cos or "
    "file.py:function. May be repeated.  [default: the first three]",
)
@click.option("--seed", type=int, default=1, show_default=True, help="Of what is sampled.")
@click.option("--confidence", type=float, default=0.95, show_default=True, help="Of intervals.")
@click.option("--threads", type=int, help="Threads; no result depends on it.")
def advise(
    schemes: tuple[str, ...], problem: str, functionals: tuple[str, ...], **options: Any
) -> None:
    """Find the largest step of each scheme that keeps an error below a target.

    SCHEME is a registered name or file.py:function; none means every one that applies. The
    cheapest, by measured time a path, comes first.
    """
    from sdebench.advise import advise as run
    from sdebench.reports import terminal

    tell_faults()
    found = run(schemes or None, on=problem, functionals=functionals or None, **options)
    terminal.show_advice(found, terminal.console())
    sys.exit(0 if any(each.steps is not None for each in found) else 3)


@cli.command()
@click.argument("old")
@click.argument("new")
@click.option(
    "--on",
    "problems",
    metavar="PROBLEM",
    multiple=True,
    help="A problem. May be repeated.  [default: every problem that both apply to]",
)
@click.option("--steps", type=Steps(), help="The rungs of the ladder.")
@click.option("--functional", "functionals", metavar="NAME", multiple=True, help="As in measure.")
@click.option("--seed", type=int, default=1, show_default=True, help="Of what is sampled.")
@click.option("--confidence", type=float, default=0.95, show_default=True, help="Of intervals.")
@click.option("--threads", type=int, help="Threads; no error depends on it.")
def compare(
    old: str, new: str, problems: tuple[str, ...], functionals: tuple[str, ...], **options: Any
) -> None:
    """Hold the errors, error constants and cost of two integrators against one another.

    OLD and NEW are registered names or file.py:function.
    """
    from sdebench.compare import compare as run
    from sdebench.reports import terminal

    tell_faults()
    found = run(old, new, on=problems or None, functionals=functionals, **options)
    terminal.show_comparisons(found, terminal.console())


@cli.command()
def catalogue() -> None:
    """List the schemes, the problems and the functionals that there are."""
    from sdebench import discovery
    from sdebench.functional import STANDARD
    from sdebench.reports import catalogue as tables
    from sdebench.reports import terminal

    out = terminal.console()
    tell_faults()
    found = discovery.schemes().values(), discovery.problems().values()
    for table in tables.catalogue(*found, STANDARD):
        terminal.show_table(table, out)
        out.print()


@cli.command()
@click.argument(
    "files",
    metavar="EVIDENCE.json...",
    nargs=-1,
    required=True,
    type=click.Path(path_type=Path),
)
@click.option(
    "--out",
    "folder",
    metavar="DIR",
    required=True,
    type=click.Path(path_type=Path),
    help="The folder of the report: a new one, an empty one, or that of an earlier report.",
)
def report(files: tuple[Path, ...], folder: Path) -> None:
    """Write the convergence report of evidence files; nothing is measured again.

    A page, report.html, with a summary and every figure and table as files beside it.
    """
    from sdebench.evidence import load
    from sdebench.reports.report import write_report

    click.echo(write_report([load(file) for file in files], folder))


for command in (gate_cli.gate, gate_cli.accept, gate_cli.trend):
    cli.add_command(command)


@cli.command()
def schema() -> None:
    """Print the JSON Schema of the evidence file."""
    from sdebench.evidence import schema as evidence_schema
    from sdebench.reports import terminal

    terminal.console().print(json.dumps(evidence_schema(), indent=2), soft_wrap=True)


def tell_faults() -> None:
    """Tell on standard error what installed packages offer and cannot be had."""
    from sdebench import discovery

    for fault in discovery.schemes().faults:
        click.echo(f"sdebench: {fault}", err=True)


@contextmanager
def told() -> Iterator[None]:
    """Turn the exceptions of the bench into one sentence on standard error and an exit code."""
    try:
        yield
    except SdebenchError as error:
        click.echo(f"sdebench: {error}", err=True)
        sys.exit(error.exit_code)
    except KeyboardInterrupt:
        click.echo("sdebench: interrupted.", err=True)
        sys.exit(130)


def main() -> None:
    """Run the command line."""
    with told():
        try:
            cli.main(standalone_mode=False)
        except click.exceptions.Abort:
            raise KeyboardInterrupt from None
        except click.ClickException as error:
            error.show()
            sys.exit(error.exit_code)
