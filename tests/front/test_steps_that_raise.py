"""A step that raises is shown the user's own frames, and none of the bench's."""

import re

import pytest

ONCE = ("--looks", "1", "--threads", "1")


@pytest.fixture
def raised(typed, write):
    """Return a function that measures a step with this body and returns what was told."""

    def run(body: str, *options: str, parameters: str = "sde, t, x, h, noise") -> str:
        write(f"@scheme(strong=0.5)\ndef step({parameters}):\n    {body}\n")
        outcome = typed("measure", "my.py:step", "--on", "gbm", *ONCE, *options)
        assert (outcome.code, outcome.out) == (2, "")
        assert outcome.err.startswith("sdebench: ")
        return outcome.err

    return run


def test_a_step_that_raises_is_told_with_what_it_raised(raised):
    assert "'my.py:step' raised ZeroDivisionError" in raised("return x / (1 // 0)")


def test_a_step_that_raises_shows_only_frames_of_the_users_file(raised, folder):
    told = raised("return helper(x)\n\n\ndef helper(x):\n    return x / (1 // 0)")
    assert re.findall(r'File "(.*)", line \d+, in (\w+)', told) == [
        (str(folder / "my.py"), "step"),
        (str(folder / "my.py"), "helper"),
    ]


def test_an_error_inside_the_given_coefficients_shows_only_the_users_frames(raised, folder):
    told = raised("return sde.drift(t, 'text')")
    assert re.findall(r'File "(.*)", line', told) == [str(folder / "my.py")]


LATE = "return euler(sde, t, x, h, noise) if (t, h) != (0.75, 0.25) else x / (1 // 0)"
LATE_OF_8 = "return euler(sde, t, x, h, noise) if (t, h) != (0.75, 0.125) else x / (1 // 0)"
MANY = "return x / (1 // 0) if 1000 < len(x) < 8000 else euler(sde, t, x, h, noise)"


@pytest.mark.parametrize(
    ("body", "options"),
    [(LATE, ("--route", "sampled")), (LATE_OF_8, ())],
    ids=["sampled alone", "in a check"],
)
def test_a_step_that_raises_only_while_sampling_shows_only_the_users_frames(
    raised, folder, body, options
):
    told = raised(body, *options)
    assert "while sampling" in told
    assert re.findall(r'File "(.*)", line', told) == [str(folder / "my.py")]


@pytest.mark.parametrize(
    ("body", "when"),
    [(LATE, "when it was tried at other times"), (MANY, "while its errors were propagated")],
    ids=["late", "for as many states as nodes"],
)
def test_a_step_that_raises_only_while_propagating_shows_only_the_users_frames(
    raised, folder, body, when
):
    told = raised(body, "--route", "propagated")
    assert when in told
    assert re.findall(r'File "(.*)", line', told) == [str(folder / "my.py")]


@pytest.mark.parametrize("parameters", ["sde, t, x, h", "x", ""], ids=["four", "one", "none"])
def test_a_step_of_another_signature_is_told_without_our_traceback(raised, parameters):
    told = raised("return x", parameters=parameters)
    assert f"'my.py': 'step' takes ({parameters}): a step is f(sde, t, x, h, noise)" in told
    assert "Traceback" not in told


def test_reading_a_functional_that_was_not_declared_says_what_to_declare(raised):
    told = raised("return euler(sde, t, x, h, noise) + noise.dz")
    assert "declares only dw" in told
    assert 'noise=("dw", "dz")' in told
    assert told.count("\n") == 1


def test_reading_a_functional_that_does_not_exist_names_those_that_do(raised):
    told = raised("return euler(sde, t, x, h, noise) + noise.dv")
    assert "'dv'" in told
    assert "decayed" in told


def test_reading_a_parameter_that_the_problem_lacks_names_it(raised):
    assert "'theta'" in raised("return x * sde.params['theta']")


def test_a_step_that_exits_is_not_taken_for_a_verdict(raised):
    assert "my.py:step" in raised("raise SystemExit(0)")
