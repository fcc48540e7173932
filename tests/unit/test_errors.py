"""Each error takes facts and writes the sentence that a user reads."""

import traceback

import pytest

from sdebench import errors


@pytest.mark.parametrize(
    "kind",
    [k for k in vars(errors).values() if isinstance(k, type) and issubclass(k, Exception)],
    ids=lambda k: k.__name__,
)
def test_every_error_but_a_fault_of_the_bench_and_a_refuted_claim_ends_with_code_two(kind):
    assert issubclass(kind, errors.SdebenchError)
    assert kind.exit_code == {errors.BenchFault: 4, errors.RefutedEvidence: 1}.get(kind, 2)


def test_an_unknown_name_shows_the_nearest_one():
    text = str(errors.UnknownName("scheme", "milstien", ["euler-maruyama", "milstein"]))
    assert "'milstien'" in text
    assert "Did you mean 'milstein'?" in text


def test_an_unknown_name_far_from_all_guesses_nothing_and_lists_what_there_is():
    text = str(errors.UnknownName("scheme", "zzz", ["milstein", "euler-maruyama"]))
    assert "Did you mean" not in text
    assert "Known: euler-maruyama, milstein." in text


def test_an_unknown_name_shows_the_hint_in_place_of_a_long_listing():
    text = str(errors.UnknownName("scheme", "zzz", ["milstein"], " `list` shows all 9."))
    assert text.endswith("`list` shows all 9.")
    assert "Known" not in text


def test_an_unknown_name_among_none_still_is_a_sentence():
    assert str(errors.UnknownName("function", "step", [])) == "No function named 'step'."


def test_a_duplicate_name_shows_both_places_and_the_cure():
    text = str(errors.DuplicateName("scheme", "euler", ["one.py", "two.py"]))
    assert "'euler'" in text
    assert "one.py and two.py" in text
    assert "name=" in text


@pytest.mark.parametrize(
    ("error", "facts"),
    [
        (errors.BadParameter("gbm", "sigma", -1, "it must be above 0"), ["gbm", "sigma", "-1"]),
        (errors.BadClaim("mine", "weak", "two", "an order is a number"), ["mine", "weak", "'two'"]),
        (errors.BadOption("looks", 0, "1 or more"), ["looks", "0", "1 or more"]),
        (errors.BadEvidenceFile("e.json", "it is empty"), ["'e.json'", "it is empty"]),
        (errors.CannotWrite("e.json", "it is a directory"), ["'e.json'", "it is a directory"]),
    ],
    ids=lambda v: type(v).__name__ if isinstance(v, Exception) else "",
)
def test_an_error_shows_the_offending_value_and_the_rule(error, facts):
    assert [fact for fact in facts if fact not in str(error)] == []


def test_an_undeclared_functional_shows_what_to_type():
    text = str(errors.UndeclaredFunctional("dz", ["dw"]))
    assert 'noise=("dw", "dz")' in text


def test_an_undeclared_functional_is_an_attribute_error_for_hasattr():
    assert issubclass(errors.UndeclaredFunctional, AttributeError)


FRAME = traceback.FrameSummary("mine.py", 3, "my_step", line="return 1 / x")


@pytest.mark.parametrize(
    ("cause", "sentence"),
    [
        (ValueError("too small"), "Scheme 'mine' raised ValueError in a step: too small"),
        (AssertionError(), "Scheme 'mine' raised AssertionError in a step"),
    ],
    ids=["with words", "without words"],
)
def test_a_users_code_that_raised_is_told_with_the_cause_and_the_frames(cause, sentence):
    first, *rest = str(errors.UserCodeRaised("Scheme 'mine'", "in a step", cause, [FRAME])).split(
        "\n"
    )
    assert first == sentence
    assert rest == ['  File "mine.py", line 3, in my_step', "    return 1 / x"]
