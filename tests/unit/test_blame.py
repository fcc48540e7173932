"""Whose mistake an exception is."""

import pytest

import sdebench as sb
from sdebench.blame import blamed
from sdebench.contract import first_breach
from sdebench.discovery import find_scheme
from sdebench.errors import BadOption, UserCodeRaised

RAISING = """
from sdebench import scheme

def inner(x):
    raise ValueError("state out of range")

@scheme(strong=0.5)
def stumbling(sde, t, x, h, noise):
    return inner(x)
"""


@pytest.fixture
def stumbling(user_file):
    return find_scheme(f"{user_file(RAISING)}:stumbling")


def test_an_exception_in_the_users_file_is_theirs(stumbling):
    raised = pytest.raises(UserCodeRaised, match="ValueError in a test: state out of range")
    with raised, watched(stumbling):
        stumbling.step(None, 0.0, None, 0.1, None)


def watched(scheme):
    return blamed(f"Scheme '{scheme.label}'", scheme.step, "in a test")


def frames(error: UserCodeRaised) -> list[str]:
    return [line for line in str(error).splitlines() if line.strip().startswith("File")]


def test_the_users_frames_are_shown_down_to_where_it_happened(stumbling):
    with (
        pytest.raises(UserCodeRaised) as caught,
        watched(stumbling),
    ):
        stumbling.step(None, 0.0, None, 0.1, None)
    *_, outer, inner = frames(caught.value)
    assert "mine.py" in outer
    assert "in stumbling" in outer
    assert "mine.py" in inner
    assert "in inner" in inner


def test_frames_of_the_bench_and_of_libraries_are_not_shown(user_file):
    path = user_file(
        """
        import numpy
        from sdebench import scheme

        @scheme(strong=0.5)
        def singular(sde, t, x, h, noise):
            return numpy.linalg.inv(numpy.zeros((2, 2)))
        """
    )
    with pytest.raises(UserCodeRaised, match="LinAlgError") as caught:
        first_breach(find_scheme(f"{path}:singular"), sb.problem("gbm"))
    assert [str(path) in frame for frame in frames(caught.value)] == [True]


def test_the_scheme_is_shown_as_it_was_typed(stumbling):
    raised = pytest.raises(UserCodeRaised, match=r"Scheme '.*mine\.py:stumbling'")
    with raised, watched(stumbling):
        stumbling.step(None, 0.0, None, 0.1, None)


def test_an_exception_that_never_passed_the_users_file_is_ours(stumbling):
    with (
        pytest.raises(ZeroDivisionError),
        watched(stumbling),
    ):
        _ = 1 / 0


def test_a_sentence_of_the_bench_goes_on_unchanged(stumbling):
    with pytest.raises(BadOption), watched(stumbling):
        raise BadOption("steps", 3, "no")


def test_the_cause_is_kept(stumbling):
    with (
        pytest.raises(UserCodeRaised) as caught,
        watched(stumbling),
    ):
        stumbling.step(None, 0.0, None, 0.1, None)
    assert isinstance(caught.value.__cause__, ValueError)


def test_nothing_happens_where_nothing_is_raised(stumbling):
    with watched(stumbling):
        pass


def test_an_attempt_to_exit_is_an_exception_like_any_other(user_file):
    path = user_file(RAISING.replace('ValueError("state out of range")', "SystemExit(0)"))
    leaving = find_scheme(f"{path}:stumbling")
    with pytest.raises(UserCodeRaised, match="SystemExit"), watched(leaving):
        leaving.step(None, 0.0, None, 0.1, None)


def test_an_interruption_is_nobodys_mistake(stumbling):
    with pytest.raises(KeyboardInterrupt), watched(stumbling):
        raise KeyboardInterrupt
