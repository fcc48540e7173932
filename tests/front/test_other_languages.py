"""Integrators in C, in Fortran and in a program of their own: the real ones, compiled and run.

Mutants of them are refuted; what fails is told in one sentence, and nothing is left running.
"""

import os
import shutil
import subprocess
from collections.abc import Iterator
from pathlib import Path

import pytest

import sdebench as sb
from tests.tolerance import round_off

SOURCES = Path(__file__).parents[1] / "foreign"
COMPILERS = {"milstein.c": "gcc", "euler.f90": "gfortran"}
DECLARED = """\
import sys

from sdebench import library, program, scheme, whole_path

names = {"params": ("mu", "sigma")}
in_c = library("libmilstein.so", "milstein_path", strong=1.0, weak=1.0, **names)
in_fortran = library("libeuler.so", "euler_path", strong=0.5, weak=1.0, **names)
alone = program([sys.executable, "prog.py"], name="alone", strong=1.0, weak=1.0, **names)


@scheme(strong=1.0, weak=1.0)
def in_python(sde, t, x, h, noise):
    mu, sigma, dw = sde.params["mu"], sde.params["sigma"], noise.dw
    b = sigma * x
    return x + mu * x * h + b * dw + 0.5 * b * sigma * (dw**2 - h)


@whole_path(strong=1.0, weak=1.0)
def whole(sde, t, x, h, noise):
    for dw in noise.dw:
        x = in_python(sde, t, x, h, type(noise)(dw=dw))
    return x
"""
QUICK = ("--on", "gbm", "--looks", "1", "--steps", "4,8,16,32", "--threads", "2")


def compiled(source: Path, into: Path) -> None:
    compiler = COMPILERS[source.name.replace("spoilt-", "")]
    if shutil.which(compiler) is None and os.environ.get("SDEBENCH_TOOLS") != "required":
        pytest.skip(f"no {compiler} here; .ci/run installs one")
    words = [compiler, "-O2", "-shared", "-fPIC", str(source), "-o", str(into)]
    subprocess.run(words, check=True)


@pytest.fixture(scope="module")
def built(tmp_path_factory) -> Path:
    place = tmp_path_factory.mktemp("built")
    compiled(SOURCES / "milstein.c", place / "libmilstein.so")
    compiled(SOURCES / "euler.f90", place / "libeuler.so")
    return place


@pytest.fixture
def declared(built, folder) -> Path:
    """Return the working directory, with the integrators and the file that declares them."""
    for library in built.iterdir():
        shutil.copy(library, folder)
    shutil.copy(SOURCES / "milstein_program.py", folder / "prog.py")
    (folder / "own.py").write_text(DECLARED)
    return folder


def processes() -> Iterator[tuple[str, str, int]]:
    """Yield the words, the state and the parent of every process but this one."""
    for each in Path("/proc").glob("[0-9]*"):
        try:
            words = (each / "cmdline").read_bytes().decode(errors="replace")
            state, parent, *_ = (each / "stat").read_text().rpartition(")")[2].split()
        except OSError:
            continue
        if each.name != str(os.getpid()):
            yield words.replace("\0", " "), state, int(parent)


def running(what: object) -> list[str]:
    """Return the processes whose words hold something."""
    return [words for words, _, _ in processes() if str(what) in words]


def strong_errors(evidence: sb.Evidence) -> list[float]:
    (row,) = [r for r in evidence.results if r.kind == "strong" and r.rungs]
    return [rung.error for rung in row.rungs]


@pytest.mark.parametrize("name", ["in_c", "alone", "whole"])
def test_every_language_gives_the_errors_of_the_same_scheme_in_numpy(declared, name):
    """On the same paths, to the round-off of some 16 operations a step on numbers of size 1."""
    options = {"on": "gbm", "looks": 1, "steps": (4, 8, 16, 32), "route": "sampled"}
    found, known = (sb.measure(f"own.py:{n}", **options) for n in (name, "in_python"))
    assert found.verdict is sb.Verdict.SUPPORTED
    for error, expected in zip(strong_errors(found), strong_errors(known), strict=True):
        assert abs(error - expected) <= round_off(1.0, 16 * 32)


def test_fortran_is_supported_at_its_own_order(typed, declared):
    outcome = typed("measure", "own.py:in_fortran", "--on", "gbm")
    assert outcome.code == 0
    assert "own.py:in_fortran runs whole paths" in outcome.out
    assert "term dw" in outcome.out, "contract and one step are measured too"


MUTANTS = {
    "in_c": ("milstein.c", "0.5 * b", "b", "the ½ of the correction"),
    "in_fortran": ("euler.f90", "params(1) * end * h", "2 * params(1) * end * h", "term h"),
    "alone": ("milstein_program.py", "0.5 * b", "b", "the ½ of the correction"),
}


@pytest.mark.parametrize(("name", "mutant"), MUTANTS.items(), ids=MUTANTS)
def test_a_mutant_in_its_language_is_refuted_by_name(typed, declared, name, mutant):
    file, old, new, told = mutant
    text = (SOURCES / file).read_text()
    assert text.count(old) == 1
    spoilt = declared / f"spoilt-{file}"
    spoilt.write_text(text.replace(old, new))
    if file.endswith(".py"):
        spoilt.rename(declared / "prog.py")
    else:
        target = {"in_c": "libmilstein.so", "in_fortran": "libeuler.so"}[name]
        (declared / target).unlink()
        compiled(spoilt, declared / target)
    outcome = typed("measure", f"own.py:{name}", *QUICK)
    assert outcome.code == 1
    assert told in outcome.out


def test_what_is_kept_from_step_to_step_is_seen_on_whole_paths(typed, declared):
    """Sound on one step, so that only whole paths can tell."""
    weaker = "    for dw in noise.dw / len(noise.dw) ** 0.25:"
    text = DECLARED.replace("    for dw in noise.dw:", weaker)
    (declared / "own.py").write_text(text)
    outcome = typed("measure", "own.py:whole", *QUICK)
    assert outcome.code == 1
    assert "strong: refuted. Local order" in outcome.out


def test_a_problem_without_the_parameters_is_not_applicable(typed, declared):
    outcome = typed("measure", "own.py:in_c", "--on", "ou")
    assert outcome.code == 0
    assert "ou has no parameter 'mu', which own.py:in_c steps by" in outcome.out


HEAD = """\
import json, os, subprocess, sys, time
from types import SimpleNamespace
import numpy as np
pipe = SimpleNamespace(read=sys.stdin.buffer.read)
out = sys.stdout.buffer
n = 0
for line in iter(sys.stdin.buffer.readline, b""):
    run = json.loads(line)
    x = np.lib.format.read_array(pipe)
    dw = np.lib.format.read_array(pipe)
    n += 1
"""
LONG = 1_000_000 + os.getpid()  # seconds, that tell the child of this run from others
FAULTS = {
    "it exits": ("    sys.exit('no licence')", ["ended with exit code 1", "no licence"]),
    "it dies by a signal": ("    os.abort()", ["ended by signal 6"]),
    "it prints": ("    print('step', n, flush=True)", ["answered b'step", "NPY format"]),
    "another shape": ("    np.save(out, x[:-1]); out.flush()", ["of shape (16383,)"]),
    "single precision": ("    np.save(out, x.astype('f4')); out.flush()", ["array of float32"]),
    "objects": (
        "    np.save(out, np.array([None] * x.size), allow_pickle=True); out.flush()",
        ["of object", "not of float64"],
    ),
    "too few bytes": (
        "    np.save(out, x); out.seek(0) if 0 else out.flush(); sys.exit(0)",
        ["ended with exit code 0"],
    ),
    "half an answer": (
        "    import io; b = io.BytesIO(); np.save(b, x); out.write(b.getvalue()[:999]); "
        "out.flush(); sys.exit(3)",
        ["ended with exit code 3 after 871 of 131072 bytes"],
    ),
    "it dies half-way": (
        "    np.save(out, x) if n < 9 else sys.exit(7); out.flush()",
        ["ended with exit code 7"],
    ),
    "it hangs with a child": (
        f"    subprocess.Popen(['sleep', '{LONG}']); time.sleep({LONG})",
        ["has not answered within 2 s and was ended"],
    ),
    "it gives NaN": ("    np.save(out, np.nan * x); out.flush()", ["gives nan for finite input"]),
}


@pytest.mark.parametrize(("body", "told"), FAULTS.values(), ids=FAULTS)
def test_a_program_that_fails_is_told_and_nothing_of_it_is_left(
    in_own_process, declared, body, told
):
    (declared / "prog.py").write_text(f"{HEAD}{body}\n")
    text = DECLARED.replace('name="alone"', 'name="alone", seconds=2.0')
    (declared / "own.py").write_text(text)
    temporary = declared / "tmp"
    temporary.mkdir()
    environment = {**os.environ, "TMPDIR": str(temporary)}
    outcome = in_own_process("measure", "own.py:alone", *QUICK, env=environment)
    said = outcome.out + outcome.err
    assert outcome.code == (1 if "nan" in told[0] else 2), said
    assert all(each in said for each in told), said
    assert "Traceback" not in said
    assert not running(declared)
    if "sleep" in body:
        assert not running(f"sleep {LONG}")
    assert not list(temporary.iterdir())


def test_programs_end_with_the_bench(in_own_process, declared):
    assert in_own_process("measure", "own.py:alone", *QUICK).code == 0
    assert not running(declared)


def test_no_zombie_is_left_while_the_bench_goes_on(declared):
    (declared / "prog.py").write_text(f"{HEAD}    sys.exit(1)\n")
    for _ in range(3):
        with pytest.raises(sb.SdebenchError, match="ended with exit code 1"):
            sb.measure("own.py:alone", on="gbm", looks=1)
    assert not running(declared)
    assert not [
        words for words, state, parent in processes() if (state, parent) == ("Z", os.getpid())
    ]


MISSING = {
    "a library": ("libmilstein.so", "none.so", "in_c", "There is no library 'none.so' beside"),
    "a function": (
        "milstein_path",
        "no_path",
        "in_c",
        "'libmilstein.so' has no function 'no_path'",
    ),
    "a program": ("sys.executable, ", '"no-such-program", ', "alone", "There is no program"),
    "no library": ("libmilstein.so", "own.py", "in_c", "'own.py' cannot be loaded"),
    "no program": ("sys.executable, ", '"own.py", ', "alone", "cannot be started"),
}


@pytest.mark.parametrize(("old", "new", "name", "told"), MISSING.values(), ids=MISSING)
def test_what_is_missing_is_told_in_one_sentence(typed, declared, old, new, name, told):
    (declared / "own.py").write_text(DECLARED.replace(old, new))
    outcome = typed("measure", f"own.py:{name}", *QUICK)
    assert (outcome.code, outcome.err.count("\n")) == (2, 1)
    assert told in outcome.err


def test_a_function_that_says_it_failed_is_told(typed, declared):
    text = (SOURCES / "milstein.c").read_text().replace("return 0;", "return steps > 1 ? 5 : 0;")
    (declared / "spoilt-milstein.c").write_text(text)
    (declared / "libmilstein.so").unlink()
    compiled(declared / "spoilt-milstein.c", declared / "libmilstein.so")
    outcome = typed("measure", "own.py:in_c", *QUICK)
    assert (outcome.code, outcome.err.count("\n")) == (2, 1)
    assert "'milstein_path' returned 5 instead of 0" in outcome.err


def test_a_whole_path_that_returns_all_its_states_is_told(typed, declared):
    text = DECLARED.replace("    return x\n", "    return noise.dw if len(noise.dw) > 1 else x\n")
    (declared / "own.py").write_text(text)
    outcome = typed("measure", "own.py:whole", *QUICK)
    assert (outcome.code, outcome.err.count("\n")) == (2, 1)
    assert "return the states after the last step alone" in outcome.err
