"""How evidence was made: the command that repeats it, and the files that were measured."""

import hashlib
import shlex
from itertools import pairwise

import pytest

import sdebench as sb

QUICK = {"on": "gbm", "looks": 1, "threads": 1, "steps": (4, 8, 16)}
STEP = """\
from sdebench import scheme


@scheme(strong=0.5)
def step(sde, t, x, h, noise):
    return x + sde.drift(t, x) * h + sde.diffusion(t, x) * noise.dw


def call(x):
    return x * (x > 0.5)
"""


@pytest.mark.parametrize("route", ["propagated", "sampled"])
def test_the_command_names_a_route_that_was_taken_alone(route):
    command = sb.measure("milstein", route=route, **QUICK).provenance.command
    assert dict(pairwise(shlex.split(command)))["--route"] == route


def test_the_command_of_a_run_by_both_routes_names_none():
    assert "--route" not in sb.measure("milstein", **QUICK).provenance.command


def test_the_provenance_holds_what_repeats_the_run():
    p = sb.measure("milstein", **QUICK, seed=7, confidence=0.9, tolerance=0.2).provenance
    assert (p.seed, p.confidence, p.tolerance, p.steps, p.threads) == (7, 0.9, 0.2, [4, 8, 16], 1)
    assert p.sdebench
    assert p.numpy
    assert p.python


def test_the_command_repeats_the_run():
    evidence = sb.measure(
        ["milstein", "euler-maruyama"],
        on="gbm:mu=0.3",
        looks=2,
        threads=1,
        steps=(4, 8, 16),
        seed=7,
        grid_maximum=True,
        confidence=0.9,
    )
    words = shlex.split(evidence.provenance.command)
    assert words[:4] == ["sdebench", "measure", "milstein", "euler-maruyama"]
    options = dict(pairwise(words))
    wanted = {"--on": "gbm:mu=0.3", "--steps": "4,8,16", "--looks": "2", "--seed": "7"}
    assert wanted.items() <= options.items()
    assert float(options["--confidence"]) == 0.9
    assert "--grid-maximum" in words


def test_a_budget_is_replaced_by_its_looks_in_the_command():
    evidence = sb.measure("milstein", on="gbm", threads=1, steps=(4, 8, 16), budget=1e-9)
    assert evidence.provenance.command.endswith("--looks 1")
    assert "--budget" not in evidence.provenance.command


def test_the_command_repeats_the_run_to_the_bit_where_a_parameter_has_many_digits():
    problem = sb.problem("gbm", mu=0.123456789)
    evidence = sb.measure("milstein", on=problem, looks=1, threads=1, steps=(4, 8, 16))
    words = shlex.split(evidence.provenance.command)
    again = sb.problem(words[words.index("--on") + 1])
    assert dict(again.params) == dict(problem.params)


def test_every_file_of_a_users_has_its_digest_and_no_file_of_the_bench(user_file):
    """By the standard library's SHA-256 of what was written."""
    file = user_file(STEP)
    schemes = [f"{file}:step", "milstein"]
    found = sb.measure(schemes, functionals=f"{file}:call", **QUICK).provenance.files
    assert found == {str(file): hashlib.sha256(STEP.encode()).hexdigest()}


def test_a_file_that_changes_while_it_is_measured_is_named_as_it_was_loaded(user_file):
    file = user_file(STEP)

    def meddle(*_):
        file.write_text("nonsense")

    found = sb.measure(f"{file}:step", progress=meddle, **QUICK).provenance.files
    assert found == {str(file): hashlib.sha256(STEP.encode()).hexdigest()}


def test_a_scheme_that_is_in_no_file_has_no_digest():
    space = {}
    exec(compile(STEP, "<typed>", "exec"), space)
    assert sb.measure(space["step"], **QUICK).provenance.files == {}
