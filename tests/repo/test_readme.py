"""The README, run: every command and every example in it does what it says."""

import json
import os
import re
import shlex
import shutil
import subprocess
import sys
import tomllib
from pathlib import Path

import msgspec
import pytest

from sdebench import Verdict
from sdebench.cli import cli
from sdebench.project import Guarded

ROOT = Path(__file__).parents[2]
README = (ROOT / "README.md").read_text()
BLOCK = re.compile(r"<!-- (file|run): (\S+) -->\n```(\w+)\n(.*?)```\n", re.DOTALL)
BLOCKS = {(kind, name): content for kind, name, _, content in BLOCK.findall(README)}


def parts(name: str) -> list[str]:
    """Return the commands of a one-line block, in order."""
    (line,) = BLOCKS["run", name].splitlines()
    return line.split(" && ")


@pytest.fixture
def desk(tmp_path):
    """Return a folder with the files that the README puts there, and an environment to run in."""
    for (kind, name), content in BLOCKS.items():
        if kind == "file":
            (tmp_path / name).write_text(content)
    scripts = Path(sys.executable).parent
    if not (scripts / "sdebench").exists():
        pytest.skip("the project's scripts are not installed beside this interpreter")
    dropped = {k: v for k, v in os.environ.items() if k not in ("FORCE_COLOR", "COLUMNS")}
    return tmp_path, dropped | {"PATH": f"{scripts}{os.pathsep}{os.environ['PATH']}"}


def ran(desk, name: str, *words: str) -> subprocess.CompletedProcess[str]:
    """Run a block of commands, by the shell unless told by what."""
    folder, environment = desk
    command = [*(words or ("sh", "-ec")), BLOCKS["run", name]]
    return subprocess.run(command, cwd=folder, env=environment, capture_output=True, text=True)


def test_every_fenced_block_is_marked_for_a_test():
    assert len(BLOCKS) == README.count("\n```") // 2


def test_the_blocks_are_those_that_are_tested_here():
    assert set(BLOCKS) == {
        ("run", "measure"),
        ("run", "test"),
        ("file", "desk.py"),
        ("run", "example"),
        ("run", "advice"),
        ("run", "python"),
        ("run", "report"),
        ("run", "figures"),
        ("file", "pyproject.toml"),
        ("run", "accept"),
        ("run", "gate"),
        ("file", "gate.yml"),
        ("file", "test_desk.py"),
        ("file", "desk.c"),
        ("file", "desk_program.py"),
        ("file", "others.py"),
        ("run", "others"),
    }


def test_the_example_is_supported_on_every_problem(desk):
    done = ran(desk, "example")
    assert (done.returncode, done.stderr) == (0, "")
    assert "Verdict: supported (6 supported)" in done.stdout


def test_the_desks_step_is_advised_and_compared(desk):
    done = ran(desk, "advice")
    assert (done.returncode, done.stderr) == (0, "")
    first, second = (line.split()[0] for line in done.stdout.splitlines()[2:4])
    assert (first, second) == ("desk.py:desk_step", "euler-maruyama")
    assert "desk.py:desk_step has the smaller error on every rung" in done.stdout


def test_integrators_in_other_languages_are_supported(desk):
    if shutil.which("cc") is None:
        pytest.skip("no C compiler here")
    done = ran(desk, "others")
    assert (done.returncode, done.stderr) == (0, "")
    assert "Verdict: supported (6 supported)" in done.stdout


def test_the_python_example_runs_and_saves_its_evidence(desk):
    folder, _ = desk
    done = ran(desk, "python", sys.executable, "-c")
    assert (done.returncode, done.stderr) == (0, "")
    assert done.stdout.startswith("supported 0.99")
    assert json.loads((folder / "evidence.json").read_text())["verdict"] == "supported"


def test_the_desks_report_is_written_and_its_figure_restyled(desk):
    folder, _ = desk
    for words in (("report",), ("figures", sys.executable, "-c")):
        done = ran(desk, *words)
        assert (done.returncode, done.stderr) == (0, "")
    page = (folder / "report" / "report.html").read_text()
    assert "All 4 claims of 1 scheme on 2 problems are supported." in page
    assert (folder / "convergence.pdf").read_bytes().startswith(b"%PDF")


def gated(desk, script: str, **variables: str) -> subprocess.CompletedProcess[str]:
    """Run a pipeline's commands but those that set it up: here they are done."""
    folder, environment = desk
    setup = re.compile(r"^python.*(venv|pip install).*$", re.MULTILINE)
    return subprocess.run(
        ["sh", "-ec", setup.sub("", script)],
        cwd=folder,
        env=environment | variables,
        capture_output=True,
        text=True,
    )


def test_the_pipelines_are_green_on_what_was_accepted_and_red_on_a_regression(desk):
    folder, _ = desk
    accepted = gated(desk, BLOCKS["run", "accept"])
    assert accepted.returncode == 0
    assert accepted.stdout.splitlines()[-1].startswith("Green: 6 claims (6 supported as accepted)")
    (step,) = re.findall(r"^      - run: (sdebench gate.*)$", BLOCKS["file", "gate.yml"], re.M)
    scripts = [BLOCKS["run", "gate"], step]
    summaries = ["gate.md", "job.md"]
    for script, summary in zip(scripts, summaries, strict=True):
        assert gated(desk, script, GITHUB_STEP_SUMMARY="job.md").returncode == 0
        assert (folder / summary).read_text().startswith("**Green: ")
    spoilt = BLOCKS["file", "desk.py"].replace("0.5 * b", "0.25 * b")
    (folder / "desk.py").write_text(spoilt)
    for script, summary in zip(scripts, summaries, strict=True):
        assert gated(desk, script, GITHUB_STEP_SUMMARY="job.md").returncode == 1
        assert (folder / summary).read_text().startswith("**Red: ")
        assert (folder / "gate-report" / "report.html").is_file()


def test_the_desks_tests_pass_and_its_claims_are_collected(desk):
    folder, environment = desk
    words = [sys.executable, "-m", "pytest", "-q", "-p", "no:cacheprovider", "--guarded-claims"]
    done = subprocess.run(
        [*words, "test_desk.py"], cwd=folder, env=environment, capture_output=True, text=True
    )
    assert done.returncode == 0
    assert "8 passed" in done.stdout


def test_the_keys_that_are_told_are_those_of_the_table():
    told = re.search(r"Further keys of the table: (.*?), each as", README, re.DOTALL)
    assert told is not None
    named = set(re.findall(r"`([a-z-]+)`", told[1])) | {"schemes", "problems"}
    assert named == {field.encode_name for field in msgspec.structs.fields(Guarded)}


def test_the_command_that_measures_ends_in_a_valid_one():
    *setup, last = parts("measure")
    program, *words = shlex.split(last)
    assert program == "sdebench"
    assert cli.commands[words[0]].make_context(words[0], words[1:])
    assert setup[-1] == "python -m pip install -e ."


def test_the_command_that_tests_installs_an_extra_that_there_is():
    project = tomllib.loads((ROOT / "pyproject.toml").read_text())["project"]
    install, pytest_ = parts("test")[-2:]
    (extra,) = re.findall(r"-e '\.\[(\w+)\]'", install)
    assert extra in project["optional-dependencies"]
    assert pytest_ == "python -m pytest"


def test_both_commands_set_up_the_same_way():
    assert parts("measure")[:2] == parts("test")[:2]


def test_ci_runs_the_very_command_that_the_readme_tells():
    (extract,) = re.findall(r"^command=\$\((.*)\)$", (ROOT / ".ci/run").read_text(), re.MULTILINE)
    done = subprocess.run(["bash", "-c", extract], cwd=ROOT, capture_output=True, text=True)
    assert done.stdout == BLOCKS["run", "test"]


def test_ci_can_be_run_as_it_is_told():
    assert os.access(ROOT / ".ci/run", os.X_OK)


@pytest.mark.parametrize("verdict", Verdict, ids=lambda v: v.value)
def test_the_table_of_verdicts_gives_the_exit_code_of_each(verdict):
    (code,) = re.findall(rf"^\| {verdict.value} \|.*\| (\d) \|$", README, re.MULTILINE)
    assert int(code) == verdict.exit_code


@pytest.mark.parametrize("document", ["README.md", "DEVELOPERS.md"])
def test_every_option_named_in_prose_exists(document):
    prose = re.sub(r"```.*?```", "", (ROOT / document).read_text(), flags=re.DOTALL)
    named = set(re.findall(r"`(?:sdebench measure )?(--[a-z-]+)", prose))
    known = {opt for c in cli.commands.values() for p in c.params for opt in p.opts} | {"--help"}
    assert named <= known


def test_every_command_named_exists():
    named = set(re.findall(r"`?sdebench ([a-z]+)", "\n".join(re.findall(r"`[^`\n]+`", README))))
    assert named
    assert named <= set(cli.commands)


def test_the_sentence_on_a_missing_half_is_what_the_bench_says(desk):
    folder, environment = desk
    wrong = BLOCKS["file", "desk.py"].replace("0.5 * ", "").replace("desk_step", "step")
    (folder / "my.py").write_text(wrong)
    done = subprocess.run(
        ["sdebench", "measure", "my.py:step", "--on", "gbm", "--looks", "1", "--threads", "1"],
        cwd=folder,
        env=environment,
        capture_output=True,
        text=True,
    )
    (quoted,) = re.findall(r"\n\n((?:    .*\n)+)\n", README)
    assert done.returncode == 1
    assert " ".join(quoted.split()) in " ".join(done.stdout.split())
