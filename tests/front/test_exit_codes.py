"""The exit codes: what a shell script or CI learns."""

import dataclasses
import math
import subprocess
import sys
from importlib.metadata import version
from pathlib import Path

import numpy as np
import pytest

import sdebench as sb
from sdebench import cli

ONCE = ("--looks", "1", "--threads", "1")


def test_supported_claims_end_with_0(typed):
    outcome = typed("measure", "milstein", "--on", "gbm", "--threads", "1")
    assert outcome.code == 0
    assert "Verdict: supported" in outcome.out


def test_a_scheme_that_does_not_apply_ends_with_0(typed):
    outcome = typed("measure", "exact-ou", "--on", "gbm", *ONCE)
    assert outcome.code == 0
    assert "not-applicable" in outcome.out


def test_a_refuted_claim_ends_with_1(typed, write):
    write(
        "@scheme(strong=1.0)\ndef bold(sde, t, x, h, noise):\n    return euler(sde, t, x, h, noise)"
    )
    outcome = typed("measure", "my.py:bold", "--on", "gbm", *ONCE)
    assert outcome.code == 1
    assert "Verdict: refuted" in outcome.out


def test_wrong_use_ends_with_2(typed):
    assert typed("measure", "no-such-scheme").code == 2


def test_claims_on_heavy_tails_are_undecided_and_end_with_3(typed):
    outcome = typed("measure", "milstein", "--on", "gbm:mu=2,sigma=1", *ONCE)
    assert outcome.code == 3
    assert "Verdict: undecided" in outcome.out


def test_an_honest_scheme_on_too_stiff_a_problem_is_undecided_and_ends_with_3(typed):
    outcome = typed("measure", "euler-maruyama", "--on", "ou:theta=100000", *ONCE)
    assert outcome.code == 3
    assert "The errors overflow with 64 steps" in outcome.out
    assert "try --steps 16,32,64,128,256" in outcome.out


def test_one_refuted_claim_among_others_ends_with_1(typed, write):
    write(
        "@scheme(strong=1.0)\ndef bold(sde, t, x, h, noise):\n    return euler(sde, t, x, h, noise)"
    )
    outcome = typed("measure", "my.py:bold", "--on", "ou", "--on", "gbm", *ONCE)
    assert "refuted" not in outcome.out.splitlines()[1]
    assert outcome.code == 1


def _gbm_of_wrong_law() -> sb.Problem:
    right = sb.problem("gbm")

    def law(p):
        found = right.law(p)
        return dataclasses.replace(found, mean=found.mean + math.log(1.1))  # E X_T 10% too large

    return dataclasses.replace(right, law=law)


def _gbm_of_wrong_flow() -> sb.Problem:
    right = sb.problem("gbm")

    def flow(p, t, x, h, noise):
        return x * np.exp(p["mu"] * h + p["sigma"] * noise.dw)  # the -σ²/2 is missing

    return dataclasses.replace(right, flow=flow)


@pytest.mark.parametrize(
    "faulty", [_gbm_of_wrong_law(), _gbm_of_wrong_flow()], ids=["wrong-law", "wrong-flow"]
)
def test_a_problem_that_contradicts_itself_is_a_fault_of_the_bench(faulty):
    # 32768 paths: the relative standard error of the mean is 0.3/181 = 0.0017; the laws are 0.1
    # and 0.045 apart, hence above the 4.9 standard errors of a false alarm of 1e-6.
    with pytest.raises(sb.BenchFault):
        sb.measure("euler-maruyama", on=faulty, looks=1, threads=1)


def test_a_right_problem_made_by_hand_is_no_fault_of_the_bench():
    problem = dataclasses.replace(sb.problem("gbm"))
    evidence = sb.measure("euler-maruyama", on=problem, looks=1, threads=1)
    assert evidence.verdict is not sb.Verdict.REFUTED


def test_a_fault_of_the_bench_ends_with_4_and_one_sentence(capsys):
    with pytest.raises(SystemExit) as end, cli.told():
        sb.measure("euler-maruyama", on=_gbm_of_wrong_law(), looks=1, threads=1)
    out, err = capsys.readouterr()
    assert end.value.code == 4
    assert out == ""
    assert err.startswith("sdebench: ")
    assert err.count("\n") == 1


def test_the_installed_command_and_the_module_are_the_same(in_own_process, clean_environment):
    script = Path(sys.executable).parent / "sdebench"
    if not script.exists():
        pytest.skip("the project's scripts are not installed beside this interpreter")
    installed = subprocess.run(
        [script, "measure", "milstien"], capture_output=True, text=True, env=clean_environment
    )
    module = in_own_process("measure", "milstien")
    assert (installed.returncode, installed.stderr) == (module.code, module.err)
    assert module.code == 2


@pytest.mark.parametrize("word", ["-h", "--help"])
@pytest.mark.parametrize("command", [(), ("measure",), ("catalogue",), ("schema",)], ids="-".join)
def test_help_says_how_a_command_is_used_and_ends_with_0(typed, command, word):
    outcome = typed(*command, word)
    assert outcome.code == 0
    assert outcome.out.startswith("Usage: sdebench")


def test_the_version_is_that_of_the_package(typed):
    assert version("sdebench") in typed("--version").out


def test_no_command_shows_the_commands_and_is_a_wrong_use(typed):
    outcome = typed()
    assert outcome.code == 2
    assert "measure" in outcome.err
    assert outcome.out == ""
