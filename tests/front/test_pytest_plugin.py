"""The pytest plugin in a user's project, run as a user does."""

import re
import subprocess
import sys
from pathlib import Path

import pytest

DESK = """\
from sdebench import scheme


@scheme(strong=1.0, weak=1.0)
def desk_step(sde, t, x, h, noise):
    b = sde.diffusion(t, x)
    correction = 0.5 * b * sde.diffusion_dx(t, x) * (noise.dw**2 - h)
    return x + sde.drift(t, x) * h + b * noise.dw + correction
"""
TABLE = """\
[tool.sdebench]
schemes = ["desk.py:desk_step", "exact-ou"]
problems = ["gbm", "ou"]
steps = [4, 8, 16, 32]
"""


@pytest.fixture
def project(tmp_path) -> Path:
    (tmp_path / "desk.py").write_text(DESK)
    (tmp_path / "pyproject.toml").write_text(TABLE)
    return tmp_path


@pytest.fixture
def run(project, clean_environment):
    """Return a function that runs pytest in the project and returns its exit code and output."""

    def tested(*words: str, **files: str) -> tuple[int, str]:
        for name, text in files.items():
            (project / f"{name}.py").write_text(text)
        done = subprocess.run(
            [sys.executable, "-m", "pytest", "-p", "no:cacheprovider", "-q", *words],
            cwd=project,
            env=clean_environment | {"PYTHONPATH": str(project)},
            capture_output=True,
            text=True,
            timeout=120,
        )
        return done.returncode, done.stdout + done.stderr

    return tested


HELPER = """\
from sdebench.testing import assert_converges


def step(sde, t, x, h, noise):
    b = sde.diffusion(t, x)
    return x + sde.drift(t, x) * h + b * noise.dw


def test_what_it_does():
    assert_converges(step, on="gbm", strong=0.5, weak=1.0)


def test_what_it_does_not():
    assert_converges(step, on="gbm", strong=1.0, weak=1.0)
"""


def test_the_helper_fails_with_the_benchs_sentence_and_the_errors(run):
    code, out = run(test_desk=HELPER)
    assert code == 1
    assert "1 failed, 1 passed" in out
    assert re.search(r"E +AssertionError: step on gbm, strong: refuted\. One-step evidence, ", out)
    assert re.search(r"E\s+4096\s+0\.000244141\s+\(6\.67947808 ± ", out)
    assert "term dw³" in out
    assert "measure(tested" not in out, "the bench's own frames are of no use to the reader"


FIXTURE = """\
from desk import desk_step


def test_options_are_the_projects(guarded_options):
    assert guarded_options["steps"] == [4, 8, 16, 32]


def test_the_fixture_measures_with_them(assert_converges):
    evidence = assert_converges(desk_step, on="gbm")
    assert evidence.provenance.steps == [4, 8, 16, 32]


def test_what_a_test_says_goes_before(assert_converges):
    evidence = assert_converges(desk_step, on="gbm", steps=[4, 8, 16])
    assert evidence.provenance.steps == [4, 8, 16]
"""


def test_the_fixtures_take_their_options_from_the_project(run):
    code, out = run(test_desk=FIXTURE)
    assert (code, "3 passed" in out) == (0, True), out


def test_without_a_table_the_fixture_has_the_defaults(run, project):
    (project / "pyproject.toml").write_text("[project]\nname = 'desk'\n")
    test = FIXTURE[FIXTURE.index("def test_what") :].replace(
        "def test", "from desk import desk_step\n\n\ndef test"
    )
    code, out = run(test_desk=test)
    assert (code, "1 passed" in out) == (0, True), out


CLAIMS = [
    "pyproject.toml::desk.py:desk_step on gbm, strong",
    "pyproject.toml::desk.py:desk_step on gbm, weak",
    "pyproject.toml::desk.py:desk_step on ou, strong",
    "pyproject.toml::desk.py:desk_step on ou, weak",
    "pyproject.toml::exact-ou on ou, strong",
    "pyproject.toml::exact-ou on ou, weak",
]


def test_each_claim_that_applies_is_an_item_when_asked_for(run):
    code, out = run("--guarded-claims", "--collect-only")
    assert code == 0
    assert [line for line in out.splitlines() if "::" in line] == CLAIMS
    assert "no tests" in run("--collect-only")[1]


@pytest.mark.parametrize("workers", [(), ("-n", "2")], ids=["alone", "xdist"])
def test_a_claim_fails_by_itself_with_its_sentence(run, project, workers):
    (project / "desk.py").write_text(DESK.replace("0.5 * b", "0.25 * b"))
    code, out = run("--guarded-claims", "-rf", *workers)
    assert code == 1
    assert "1 failed, 5 passed" in out
    assert f"FAILED {CLAIMS[0]}" in out
    assert "desk.py:desk_step on gbm, strong: refuted. One-step evidence" in out
    assert "Traceback" not in out


def test_claims_are_chosen_by_name_as_any_test(run):
    code, out = run("--guarded-claims", "-k", "ou and weak")
    assert (code, "2 passed, 4 deselected" in out) == (0, True), out


def test_a_wrong_table_is_one_sentence_where_it_is_asked_for_and_no_harm_elsewhere(run, project):
    (project / "pyproject.toml").write_text(TABLE + "seeds = 1\n")
    code, out = run("--guarded-claims")
    assert code != 0
    assert "there is no key tool.sdebench.seeds; the nearest is seed" in out
    assert "Traceback" not in out
    assert run(test_plain="def test_it():\n    pass\n")[0] == 0
    uses = "def test_it(assert_converges):\n    pass\n"
    code, out = run(test_plain=uses)
    assert (code, "the nearest is seed" in out) == (1, True), "not the defaults, silently"


def test_a_project_that_does_not_use_it_loads_none_of_it(project, clean_environment):
    """Neither the bench nor NumPy: the plugin is a module that imports pytest alone."""
    code = (
        "import sys, pytest\n"
        "pytest.main(['--collect-only', '-q', '-p', 'no:cacheprovider'])\n"
        "print([n for n in ('sdebench_pytest', 'sdebench', 'numpy') if n in sys.modules])"
    )
    (project / "test_plain.py").write_text("def test_it():\n    pass\n")
    done = subprocess.run(
        [sys.executable, "-c", code],
        cwd=project,
        env=clean_environment,
        capture_output=True,
        text=True,
        check=True,
    )
    assert done.stdout.splitlines()[-1] == "['sdebench_pytest']"
