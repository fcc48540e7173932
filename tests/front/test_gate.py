"""The gate of the island grid's operations desk: green on its integrator, red on what spoils it."""

import json
import re
import shutil
import sqlite3
from pathlib import Path
from xml.etree import ElementTree

import msgspec
import pytest

import sdebench as sb
from sdebench import baseline
from sdebench.gate import accept
from sdebench.project import find_project

DESK = '''\
"""The integrator of the operations desk: deviation of frequency, demand, and a ramp of wind."""

import numpy as np

from sdebench import scheme


@scheme(strong=1.0, weak=1.0)
def desk_step(sde, t, x, h, noise):
    """One step of the desk's integrator: drift, noise, and the correction for its change."""
    b = sde.diffusion(t, x)
    slope = sde.diffusion_dx(t, x)
    drift = sde.drift(t, x) * h
    correction = 0.5 * b * slope * (noise.dw**2 - h)
    return x + drift + b * noise.dw + correction
'''
TABLE = """\
[tool.sdebench]
schemes = ["desk.py:desk_step"]
problems = ["gbm:mu=0.3,sigma=0.2", "ou:mean=0.1", "ramped-noise"]
"""
# What a refactor does to a line, and what the gate must say of it.
REGRESSIONS = {
    "half of the correction is lost": (
        ("correction = 0.5 *", "correction = 0.25 *"),
        "term dw² - h was 1 of what the SDE needs and is 0.5 of it",
    ),
    "the correction is lost": (("+ b * noise.dw + correction", "+ b * noise.dw"), "is missing"),
    "the correction has lost its - h": (("(noise.dw**2 - h)", "noise.dw**2"), "the SDE needs"),
    "the correction has the other sign": (("correction = 0.5", "correction = -0.5"), "is -1 of it"),
    "the drift is taken twice": (
        ("sde.drift(t, x) * h", "2 * sde.drift(t, x) * h"),
        "is 2 of it",
    ),
    "the drift has lost a part in a thousand": (
        ("sde.drift(t, x) * h", "0.999 * sde.drift(t, x) * h"),
        "is 0.999 of it",
    ),
    "the noise is a thousandth too large": (
        ("+ b * noise.dw", "+ 1.001 * b * noise.dw"),
        "is 1.001 of it",
    ),
    "the time is a step late": (
        ("    b = sde", "    t = t + h\n    b = sde"),
        "ramped-noise, strong error: worse by",
    ),
    "single precision has slipped in": (
        ("    b = sde", "    x = x.astype(np.float32).astype(np.float64)\n    b = sde"),
        "desk_step on",
    ),
    "the error constant moves, by a term of the next order": (
        ("return x + drift", "return x + drift - 0.05 * drift * h"),
        "No leading term of one step moved: look at terms of higher order.",
    ),
    "the drift is read at a predicted state": (
        ("drift = sde.drift(t, x) * h", "drift = sde.drift(t, x + b * noise.dw) * h"),
        "error: worse by",
    ),
    "the state is kept in a cache between calls": (
        (
            "    b = sde",
            "    global last\n    last = x = 0.5 * (x + globals().get('last', x))\n    b = sde",
        ),
        "contract: refuted (new)",
    ),
    "rare paths end in NaN": (
        ("+ correction", "+ correction * np.sqrt(1.0 + 0.2 * noise.dw / np.sqrt(h))"),
        "desk_step on",
    ),
    "the claim is lowered": (("strong=1.0", "strong=0.5"), "lowered from 1 to 0.5"),
    "a claim is dropped": (("strong=1.0, weak=1.0", "weak=1.0"), "strong: gone"),
}


def project(place: Path, table: str) -> Path:
    """Return the desk's project with its baseline; a copy is spoilt by each test."""
    (place / "desk.py").write_text(DESK)
    (place / "pyproject.toml").write_text(table)
    accept(find_project(place), "first measured", threads=1)
    return place


@pytest.fixture(scope="module")
def accepted(tmp_path_factory) -> Path:
    return project(tmp_path_factory.mktemp("desk"), TABLE)


@pytest.fixture(scope="module")
def accepted_without_frequency(tmp_path_factory) -> Path:
    return project(tmp_path_factory.mktemp("desk"), TABLE.replace(', "ou:mean=0.1"', ""))


@pytest.fixture
def desk(accepted, folder) -> Path:
    """Return a fresh copy of the project, which is the working directory."""
    shutil.copytree(accepted, folder, dirs_exist_ok=True)
    return folder


@pytest.fixture
def smaller_desk(accepted_without_frequency, folder) -> Path:
    """Return the same of a project that is measured sooner."""
    shutil.copytree(accepted_without_frequency, folder, dirs_exist_ok=True)
    return folder


def spoil(desk: Path, old: str, new: str) -> None:
    before = (desk / "desk.py").read_text()
    assert before.count(old) == 1
    (desk / "desk.py").write_text(before.replace(old, new))


def test_it_is_green_on_what_was_accepted(typed, desk):
    outcome = typed("gate")
    assert outcome.code == 0
    assert outcome.out.count("\n") == 1
    assert outcome.out.startswith("Green: 6 claims (6 supported as accepted); 68 errors (68 ")
    assert "68 unchanged (same bits)" in outcome.out
    assert typed("gate", "--quiet").out == ""


@pytest.mark.parametrize("threads", ["1", "2"])
def test_another_process_gives_the_same_bits_on_any_number_of_threads(
    in_own_process, desk, threads
):
    outcome = in_own_process("gate", "--threads", threads)
    assert "68 unchanged (same bits)" in outcome.out


@pytest.mark.parametrize(("change", "told"), REGRESSIONS.values(), ids=REGRESSIONS)
def test_it_is_red_on_a_regression_and_says_what_moved(typed, smaller_desk, change, told):
    spoil(smaller_desk, *change)
    outcome = typed("gate")
    assert outcome.code == 1
    assert told in outcome.out
    assert re.search(r"^Red: ", outcome.out, re.M)


@pytest.mark.parametrize(("part", "code"), [(0.0075, 1), (0.0015, 0)])
def test_an_error_constant_that_moves_by_two_percent_is_red_and_by_half_of_one_let_be(
    typed, desk, part, code
):
    """A term of the next order moves the errors of a sample by what its intervals do not show."""
    problems = 'problems = ["gbm:mu=0.3,sigma=0.2", "ou:mean=0.1", "ramped-noise"]'
    (desk / "pyproject.toml").write_text(TABLE.replace(problems, 'problems = ["ramped-noise"]'))
    assert typed("accept").code == 0
    spoil(desk, "return x + drift", f"return x + drift * (1 - {part} * h)")
    outcome = typed("gate")
    moved = [float(m) for m in re.findall(r"worse by ([\d.]+)% ± ", outcome.out)]
    assert outcome.code == code
    assert 0.2 < max(moved) < 3.0
    assert ("look at terms of higher order" in outcome.out) == bool(code)


def test_an_improvement_is_green_and_told(typed, desk):
    spoil(desk, "return x + drift", "return x + drift * (1 + 0.04 * h)")
    (desk / "pyproject.toml").write_text(TABLE.replace('", "ou:mean=0.1"', '"'))
    assert typed("accept").code == 0
    shutil.copy(desk / "desk.py", desk / "old.py")
    spoil(desk, "drift * (1 + 0.04 * h)", "drift * (1 + 0.1 * h)")
    outcome = typed("gate")
    assert outcome.code == 0
    assert "better by" in outcome.out


@pytest.mark.parametrize("seed", ["2", "77"])
def test_on_other_paths_honest_code_stays_green(typed, desk, seed):
    outcome = typed("gate", "--seed", seed)
    assert outcome.code == 0
    assert "48 unchanged (same bits), 20 unchanged within uncertainty" in outcome.out


def test_a_pipeline_gets_its_files(typed, desk):
    spoil(desk, "correction = 0.5 *", "correction = 0.25 *")
    words = ("--junit", "j.xml", "--summary", "s.md", "--save", "e.json", "--report", "out")
    assert typed("gate", *words).code == 1
    suite = ElementTree.parse(desk / "j.xml").getroot().find("testsuite")
    cases = suite.findall("testcase")
    failed = [case for case in cases if case.find("failure") is not None]
    assert int(suite.get("tests")) == len(cases) == 6 + 12
    assert int(suite.get("failures")) == len(failed)
    assert {case.get("classname") for case in failed} == {
        "desk.py:desk_step on gbm:mu=0.3,sigma=0.2"
    }
    assert "is 0.5 of it" in failed[-1].find("failure").text
    assert (desk / "s.md").read_text().startswith("**Red: ")
    assert {c.problem for c in sb.load(desk / "e.json").claims} >= {"ou:mean=0.1", "ramped-noise"}
    page = (desk / "out" / "report.html").read_text()
    assert "gbm:mu=0.3" in page
    assert "desk_step on ou:mean" not in page, "the report is of what failed"


def test_a_green_run_writes_no_report_and_its_cases_pass(typed, desk):
    assert typed("gate", "--report", "out", "--junit", "j.xml").code == 0
    assert not (desk / "out").exists()
    assert ElementTree.parse(desk / "j.xml").getroot().find("testsuite").get("failures") == "0"


def test_refuted_evidence_is_accepted_on_demand_alone(typed, desk):
    before = (desk / "sdebench-baseline.json").read_bytes()
    spoil(desk, "correction = 0.5 *", "correction = 0.25 *")
    outcome = typed("accept", "--why", "we know")
    assert outcome.code == 1
    assert "gbm:mu=0.3,sigma=0.2, strong refuted" in outcome.err
    assert (desk / "sdebench-baseline.json").read_bytes() == before
    assert typed("accept", "--why", "we know", "--refuted-too").code == 0
    assert baseline.load(desk / "sdebench-baseline.json").why == "we know"
    assert typed("gate").code == 0


SETTINGS = {
    "seed": ("seed = 2", "made with seed = 1, and the project says 2"),
    "steps": (
        "steps = [4, 8, 16]",
        "made with steps = none, and the project says 4, 8, 16",
    ),
    "looks": ("looks = 2", "made with looks = 1, and the project says 2"),
}


@pytest.mark.parametrize(("line", "told"), SETTINGS.values(), ids=SETTINGS)
def test_a_baseline_of_other_settings_is_refused(typed, desk, line, told):
    (desk / "pyproject.toml").write_text(f"{TABLE}{line}\n")
    outcome = typed("gate")
    assert (outcome.code, outcome.out, outcome.err.count("\n")) == (2, "", 1)
    assert told in outcome.err


def test_a_problem_whose_defaults_have_changed_is_refused(typed, desk):
    path = desk / "sdebench-baseline.json"
    path.write_text(path.read_text().replace("sigma = 0.6, x0 = 2.5", "sigma = 0.5, x0 = 2.5"))
    outcome = typed("gate")
    assert (outcome.code, outcome.err.count("\n")) == (2, 1)
    assert "made on ou:mean=0.1 as" in outcome.err


def test_another_stream_of_normals_is_said_and_compared_as_independent(typed, desk):
    path = desk / "sdebench-baseline.json"
    then = baseline.load(path)
    path.unlink()
    baseline.save(msgspec.structs.replace(then, stream="0" * 16), path)
    spoil(desk, "return x + drift", "return x + drift * (1 - 0.0075 * h)")
    outcome = typed("gate")
    assert "The generator's normals are not those of the baseline" in outcome.out
    assert "ramped-noise, strong error: worse" not in outcome.out, "2% is within chance there"


@pytest.mark.parametrize("content", ["", "{", '{"format": "sdebench-baseline/9"}', "[]"])
def test_a_baseline_that_cannot_be_read_is_never_passed(typed, desk, content):
    (desk / "sdebench-baseline.json").write_text(content)
    outcome = typed("gate")
    assert (outcome.code, outcome.out, outcome.err.count("\n")) == (2, "", 1)


def test_a_problem_taken_from_the_table_is_gone(typed, desk):
    (desk / "pyproject.toml").write_text(TABLE.replace(', "ou:mean=0.1"', ""))
    outcome = typed("gate")
    assert outcome.code == 1
    assert "ou:mean=0.1, strong: gone." in outcome.out


def test_a_read_only_checkout_is_gated(in_own_process, desk):
    """By what the gate leaves behind: nothing; a superuser may write anywhere."""
    before = sorted(desk.rglob("*"))
    for path in (desk, *desk.iterdir()):
        path.chmod(0o555 if path.is_dir() else 0o444)
    try:
        assert in_own_process("gate").code == 0
        assert sorted(desk.rglob("*")) == before
    finally:
        desk.chmod(0o755)


def test_a_project_with_packages_named_as_ours_is_gated_without_a_collision(in_own_process, desk):
    for name in ("schemes", "reports", "problems"):
        (desk / name).mkdir()
        (desk / name / "__init__.py").write_text(f"WHOSE = 'desk {name}'\n")
    spoil(desk, "import numpy as np\n", "import reports\nimport schemes\n")
    spoil(desk, "    slope =", "    assert schemes.WHOSE + reports.WHOSE\n    slope =")
    assert in_own_process("gate").code == 0


def test_every_run_is_kept_in_a_history_and_shown_as_a_trend(typed, desk):
    for change in (None, ("drift * h", "drift * h * 1.0"), None):
        if change is not None and "drift * h" in (desk / "desk.py").read_text():
            spoil(desk, *change)
        assert typed("gate", "--history", "h.db").code == 0
    with sqlite3.connect(desk / "h.db") as connection:
        assert connection.execute("select count(*), max(exit_code) from runs").fetchone() == (3, 0)
    table = typed("trend", "h.db").out
    assert "desk.py:desk_step" in table
    assert "+0.00%" in table
    outcome = typed("trend", "h.db", "--report", "t")
    assert outcome.out == "t/report.html\n"
    assert (desk / "t" / "tables" / "trend.csv").is_file()
    assert list((desk / "t" / "figures").glob("trend--desk.py-desk-step-on-ramped-noise*cost.svg"))


def test_what_cannot_be_written_is_told_before_anything_is_measured(typed, desk):
    for option in ("--junit", "--summary", "--save", "--history"):
        outcome = typed("gate", option, "nowhere/file")
        assert (outcome.code, outcome.err.count("\n")) == (2, 1), option
        assert "nowhere/file" in outcome.err


def test_a_json_reader_finds_the_baseline_small_and_its_note_in_front(desk):
    text = (desk / "sdebench-baseline.json").read_text()
    assert len(text) < 50_000
    assert list(json.loads(text))[:2] == ["format", "why"]
