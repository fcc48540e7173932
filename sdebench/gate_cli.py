"""The commands of a project: the gate, its baseline and its history."""

import sys
from pathlib import Path
from typing import Any

import click

PROJECT = click.option(
    "--project",
    "place",
    type=click.Path(path_type=Path),
    default=Path(),
    metavar="PATH",
    help="The project's folder or file.  [default: the one about the working directory]",
)
THREADS = click.option("--threads", type=int, help="Threads; no result depends on it.")


def into(metavar: str) -> Any:
    """Return the settings of an option that names a file to write."""
    return {"type": click.Path(path_type=Path), "metavar": metavar}


@click.command()
@PROJECT
@click.option("--seed", type=int, help="Another seed: what is sampled is compared as independent.")
@THREADS
@click.option("--junit", "junit_file", help="Write JUnit XML.", **into("FILE"))
@click.option("--summary", "summary_file", help="Write Markdown for a job.", **into("FILE"))
@click.option("--save", help="Write the evidence.", **into("EVIDENCE.json"))
@click.option("--report", "folder", help="Write the report of what failed.", **into("DIR"))
@click.option("--history", help="Append to a file that `trend` reads.", **into("FILE"))
@click.option("--quiet", is_flag=True, help="Print nothing when green.")
def gate(
    place: Path,
    seed: int | None,
    threads: int | None,
    junit_file: Path | None,
    summary_file: Path | None,
    save: Path | None,
    folder: Path | None,
    history: Path | None,
    quiet: bool,
) -> None:
    """Measure what the project lists, and hold it against the accepted baseline.

    What is guarded stands in [tool.sdebench] of pyproject.toml, or in sdebench.toml. Exit codes:
    0 as accepted, 1 a regression, 3 a claim that is no longer decided.
    """
    from sdebench.gate import gate as run
    from sdebench.history import append, check_history
    from sdebench.project import find_project
    from sdebench.reports import gate_tables, terminal
    from sdebench.whole_file import check_writable, write_whole

    project = find_project(place)
    for file in filter(None, (junit_file, summary_file, save)):
        check_writable(file)
    if history is not None:
        check_history(history)
    if folder is not None:
        from sdebench.reports.folder import check_folder

        check_folder(folder)
    with terminal.progress_bar(terminal.console(sys.stderr), quiet) as progress:
        gated = run(project, seed=seed, threads=threads, progress=progress)
    if save is not None:
        gated.evidence.save(save)
    if summary_file is not None:
        write_whole(summary_file, gate_tables.gate_markdown(gated).encode())
    if junit_file is not None:
        from sdebench.reports.junit import junit

        write_whole(junit_file, junit(gated))
    if history is not None:
        append(history, gated.evidence, gated.exit_code)
    if folder is not None:
        _report(gated, folder)
    if gated.exit_code or not quiet:
        terminal.show_gate(gated, terminal.console())
    sys.exit(gated.exit_code)


def _report(gated: Any, folder: Path) -> None:
    """Write the report of the schemes and problems that failed; none where all is green."""
    from sdebench.evidence import only
    from sdebench.reports.report import write_report

    if gated.failed:
        write_report([only(gated.evidence, gated.failed)], folder)


@click.command()
@PROJECT
@click.option("--why", default="", metavar="TEXT", help="A note for who reviews the baseline.")
@click.option("--refuted-too", is_flag=True, help="Accept claims that are refuted, too.")
@THREADS
def accept(place: Path, why: str, refuted_too: bool, threads: int | None) -> None:
    """Measure what the project lists, and make that the baseline of the gate."""
    from sdebench.gate import accept as run
    from sdebench.project import find_project
    from sdebench.reports import terminal

    project = find_project(place)
    with terminal.progress_bar(terminal.console(sys.stderr), quiet=False) as progress:
        baseline, evidence = run(
            project, why, refuted_too=refuted_too, threads=threads, progress=progress
        )
    claims = len(baseline.claims)
    errors = sum(len(row.rungs) for row in baseline.rows)
    click.echo(
        f"Accepted {claims} claims ({evidence.verdict.value}) and {errors} errors: "
        f"{project.guarded.baseline}"
    )


@click.command()
@click.argument("file", type=click.Path(path_type=Path), metavar="HISTORY")
@click.option("--report", "folder", help="Also as figures and tables.", **into("DIR"))
def trend(file: Path, folder: Path | None) -> None:
    """Show error constants and cost over the revisions that a gate has seen."""
    from sdebench.history import read
    from sdebench.reports import terminal
    from sdebench.reports.trend import trend_table, write_trend

    runs = read(file)
    if folder is not None:
        click.echo(write_trend(runs, folder))
        return
    terminal.show_table(trend_table(runs), terminal.console())
