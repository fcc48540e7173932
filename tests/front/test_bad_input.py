"""Bad input: exit code 2, one sentence on standard error, nothing measured, nothing printed."""

import pytest

ONCE = ("--looks", "1", "--threads", "1")


def assert_one_sentence(outcome) -> None:
    """Assert that wrong use was told in one line of ours, or in click's usage error."""
    lines = outcome.err.splitlines()
    assert outcome.code == 2
    assert outcome.out == ""
    if lines[0].startswith("Usage: "):
        lines = lines[lines.index("") + 1 :]
    assert len(lines) == 1
    assert lines[0].startswith(("sdebench: ", "Error: "))


@pytest.mark.parametrize(
    ("words", "told"),
    [
        (("milstien",), "Did you mean 'milstein'?"),
        (("euler_maruyama",), "Did you mean 'euler-maruyama'?"),
        (("no-such-thing-at-all",), "`sdebench catalogue` lists all"),
        (("milstein", "--on", "gmb"), "Did you mean 'gbm'?"),
        (("milstein", "--on", "gbm,mu=1"), "Did you mean 'gbm'?"),
        (("milstein", "--on", ""), "No problem named ''"),
        (("",), "No scheme named ''"),
        (("milstein", "--functional", "cosine"), "Did you mean 'cos'?"),
        (("milstein", "--functional", "absent.py:f"), "no file 'absent.py'"),
        (("absent.py:step",), "no file 'absent.py'"),
        (("absent.py",), "no file 'absent.py'"),
    ],
    ids=lambda value: value if isinstance(value, str) else " ".join(value) or "empty",
)
def test_an_unknown_name_is_told_with_what_there_is(typed, words, told):
    outcome = typed("measure", *words, *ONCE)
    assert_one_sentence(outcome)
    assert told in outcome.err


@pytest.mark.parametrize(
    ("setting", "told"),
    [
        ("gbm:nu=1", "Did you mean 'mu'?"),
        ("gbm:=1", "No parameter of gbm named ''"),
        ("gbm:mu", "write parameter=value"),
        ("gbm:mu=", "write parameter=value"),
        ("gbm:mu=fast", "'fast' cannot be used: a parameter is a number"),
        ("gbm:mu=1;sigma=2", "a parameter is a number"),
        ("gbm:mu=nan", "finite"),
        ("gbm:mu=inf", "finite"),
        ("gbm:mu=-inf", "finite"),
        ("gbm:mu=1e400", "finite"),
        ("gbm:sigma=-0.3", "must be above 0"),
        ("gbm:sigma=0", "no noise"),
        ("gbm:x0=0", "X stays at 0"),
        ("gbm:x0=-1", "must be above 0"),
        ("gbm:horizon=0", "must be above 0"),
        ("gbm:horizon=-1", "must be above 0"),
        ("ou:theta=0", "must be above 0"),
        ("ou:theta=-0.5", "must be above 0"),
        ("ou:sigma=0", "no noise"),
        ("ramped-noise:b=0", "no noise"),
    ],
)
def test_an_unusable_parameter_is_told_with_the_rule(typed, traced, folder, setting, told):
    outcome = typed("measure", traced, "--on", setting, *ONCE)
    assert_one_sentence(outcome)
    assert told in outcome.err
    assert not (folder / "called").exists()


@pytest.mark.parametrize(
    ("steps", "told"),
    [
        ("8,16", "three rungs"),
        ("8", "three rungs"),
        ("4,6,8", "whole multiple"),
        ("16,8,4", "whole multiple"),
        ("4,4,4", "whole multiple"),
        ("0,1,2", "at least 1"),
        ("-4,8,16", "at least 1"),
        ("4.5,9,18", "no list of whole numbers"),
        ("a,b,c", "no list of whole numbers"),
        ("4,8,16,", "no list of whole numbers"),
        ("", "no list of whole numbers"),
    ],
)
def test_an_unusable_ladder_is_told_with_the_rule(typed, traced, folder, steps, told):
    outcome = typed("measure", traced, "--on", "gbm", *ONCE, "--steps", steps)
    assert_one_sentence(outcome)
    assert told in outcome.err
    assert not (folder / "called").exists()


@pytest.mark.parametrize(
    "options",
    [
        ("--confidence", "2"),
        ("--confidence", "0"),
        ("--confidence", "1"),
        ("--confidence", "nan"),
        ("--confidence", "high"),
        ("--tolerance", "0"),
        ("--tolerance", "-0.1"),
        ("--tolerance", "nan"),
        ("--tolerance", "1"),
        ("--looks", "0"),
        ("--looks", "-1"),
        ("--looks", "1.5"),
        ("--budget", "0"),
        ("--budget", "-1"),
        ("--budget", "nan"),
        ("--looks", "1", "--budget", "5"),
        ("--threads", "0"),
        ("--threads", "-2"),
        ("--seed", "-1"),
        ("--seed", "1.5"),
        ("--seed", "lucky"),
        ("--route", "scenic"),
        ("--no-such-option",),
        ("--save",),
    ],
    ids=" ".join,
)
def test_an_unusable_option_is_told_by_its_name(typed, traced, folder, options):
    outcome = typed("measure", traced, "--on", "gbm", *options)
    assert_one_sentence(outcome)
    assert options[0].strip("-") in outcome.err
    assert not (folder / "called").exists()


def test_an_unknown_command_is_told_with_the_nearest(typed):
    outcome = typed("mesure")
    assert_one_sentence(outcome)
    assert "'measure'" in outcome.err


@pytest.mark.parametrize(
    ("body", "function", "told"),
    [
        ("def broken(:\n", "broken", "does not parse"),
        ("x = 1\0\n", "x", "does not parse"),
        ("def other(x):\n    return x\n", "step", "No function in 'my.py' named 'step'"),
        ("step = 3\n", "step", "No function in 'my.py' named 'step'"),
        ("def step(sde, t, x, h, noise):\n    return x\n", "step", "write @scheme("),
        ("@scheme(strong='one')\ndef step(*a):\n    pass\n", "step", "an order is a number"),
        ("@scheme(weak=True)\ndef step(*a):\n    pass\n", "step", "an order is a number"),
        ("@scheme(weak=float('nan'))\ndef step(*a):\n    pass\n", "step", "positive, finite"),
        ("@scheme(strong=-1)\ndef step(*a):\n    pass\n", "step", "positive, finite"),
        ("@scheme(strong=0)\ndef step(*a):\n    pass\n", "step", "positive, finite"),
        ("@scheme()\ndef step(*a):\n    pass\n", "step", "claims nothing"),
        ("@scheme(weak=1, noise='dv')\ndef step(*a):\n    pass\n", "step", "functional named 'dv'"),
        ("@scheme(weak=1, calculus='old')\ndef step(*a):\n    pass\n", "step", "'ito' or"),
    ],
    ids=[
        "does-not-parse",
        "null-byte",
        "no-such-function",
        "not-a-function",
        "undecorated",
        "claim-in-words",
        "claim-a-truth-value",
        "claim-nan",
        "claim-negative",
        "claim-zero",
        "claims-nothing",
        "unknown-wiener-functional",
        "unknown-calculus",
    ],
)
def test_a_file_that_cannot_be_used_is_told_in_one_sentence(typed, write, body, function, told):
    write(body)
    outcome = typed("measure", f"my.py:{function}", "--on", "gbm", *ONCE)
    assert_one_sentence(outcome)
    assert told in outcome.err


def test_a_file_without_a_function_is_told_with_the_schemes_in_it(typed, traced):
    outcome = typed("measure", "trace.py", *ONCE)
    assert_one_sentence(outcome)
    assert "write 'trace.py:function'. It defines: traced." in outcome.err


@pytest.mark.parametrize(
    ("parameters", "returned"),
    [("x", "1/0 + x"), ("x", "x[:3]"), ("x", "None"), ("x", "'text'"), ("x, y", "x")],
    ids=["raises", "wrong-shape", "none", "text", "two-arguments"],
)
def test_a_functional_that_cannot_be_used_is_told_without_our_traceback(
    typed, write, parameters, returned
):
    write(f"def f({parameters}):\n    return {returned}\n", "fn.py")
    words = ("--on", "ou", "--functional", "fn.py:f", "--steps", "4,8,16", *ONCE)
    outcome = typed("measure", "milstein", *words)
    assert outcome.code == 2
    assert outcome.out == ""
    assert outcome.err.startswith("sdebench: ")
    assert "fn.py:f" in outcome.err


def test_a_functional_that_writes_into_its_input_is_no_fault_of_the_bench(typed, write):
    write("def shift(x):\n    x += 1\n    return x\n\n\ndef same(x):\n    return +x\n", "fn.py")
    functionals = ("--functional", "fn.py:shift", "--functional", "fn.py:same")
    outcome = typed("measure", "milstein", "--on", "ou", *functionals, *ONCE)
    assert_one_sentence(outcome)
    assert "writes into its input" in outcome.err


def test_a_functional_that_is_not_finite_is_told_in_one_sentence(typed, write):
    write("def root(x):\n    return np.sqrt(-x * x)\n", "fn.py")
    words = ("--on", "ou", "--functional", "fn.py:root", "--steps", "4,8,16", *ONCE)
    outcome = typed("measure", "milstein", *words)
    assert_one_sentence(outcome)
    assert "gives nan at x=" in outcome.err


@pytest.mark.parametrize("code", [0, 3])
def test_a_file_that_exits_when_loaded_is_not_taken_for_a_verdict(typed, write, code):
    write(f"raise SystemExit({code})\n")
    outcome = typed("measure", "my.py:step", *ONCE)
    assert (outcome.code, outcome.out) == (2, "")
    assert outcome.err.startswith(f"sdebench: 'my.py' raised SystemExit when loaded: {code}")


@pytest.mark.parametrize(
    "body",
    [
        "import no_such_package\n",
        "1 / 0\n",
    ],
    ids=["import", "division"],
)
def test_a_file_that_raises_when_loaded_shows_its_own_line(typed, write, body):
    path = write(body)
    outcome = typed("measure", "my.py:step", *ONCE)
    assert (outcome.code, outcome.out) == (2, "")
    assert outcome.err.startswith("sdebench: 'my.py' raised ")
    assert f'File "{path}", line ' in outcome.err
    assert body.splitlines()[0] in outcome.err
    assert outcome.err.count("File ") == 1


@pytest.mark.parametrize(
    ("setting", "told"),
    [
        ("gbm:sigma=1e200", "overflows double precision"),
        ("gbm:mu=1e308", "overflows double precision"),
        ("gbm:horizon=1e6", "overflows double precision"),
        ("ou:sigma=1e-300", "its noise is lost in the round-off"),
        ("gbm:sigma=1e-18", "its noise is lost in the round-off"),
    ],
)
def test_parameters_beyond_floating_point_are_told_before_a_step_is_taken(
    typed, traced, folder, setting, told
):
    outcome = typed("measure", traced, "--on", setting, *ONCE, "--steps", "4,8,16")
    assert_one_sentence(outcome)
    assert told in outcome.err
    assert not (folder / "called").exists()


def test_two_functionals_of_one_name_are_told(typed, write, folder):
    write("def f(x):\n    return x**3\n", "fn.py")
    words = ("--on", "gbm", "--functional", "fn.py:f", "--functional", "fn.py:f", *ONCE)
    outcome = typed("measure", "milstein", *words)
    assert_one_sentence(outcome)
    assert "two of them have this name" in outcome.err
