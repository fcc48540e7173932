"""The contract: each law catches the step that breaks it, and says what to change."""

import itertools
import threading
import time
from dataclasses import replace

import numpy as np
import pytest

import sdebench as sb
from sdebench.contract import Law, first_breach
from sdebench.discovery import find_scheme
from sdebench.errors import UserCodeRaised


def euler(sde, t, x, h, noise):
    return x + sde.drift(t, x) * h + sde.diffusion(t, x) * noise.dw


def shorter(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise)[:1]


def a_number(sde, t, x, h, noise):
    return float(x[0])


def a_list(sde, t, x, h, noise):
    return list(euler(sde, t, x, h, noise))


def single_precision(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise).astype(np.float32)


def nothing(sde, t, x, h, noise):
    return None


def writes_to_x(sde, t, x, h, noise):
    result = euler(sde, t, x, h, noise)
    x += 1.0
    return result


def writes_to_noise(sde, t, x, h, noise):
    result = euler(sde, t, x, h, noise)
    noise.dw[...] = 0.0
    return result


def root_of_noise(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise) + 0 * np.sqrt(noise.dw + 3 * h**0.5)


def later_nan(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise) * (np.nan if t > 0 else 1.0)


_calls = itertools.count()


def counts_its_calls(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise) + 1e-3 * h * next(_calls)


def changes_every_second_time(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise) + 1e-3 * h * (next(_calls) % 2)


_work = np.empty(0)


def shares_a_working_array(sde, t, x, h, noise):
    """The array is right until another thread writes into it; a pause lets one do so."""
    global _work
    if _work.shape != x.shape:
        _work = np.empty_like(x)
    work = _work
    np.multiply(sde.diffusion(t, x), noise.dw, out=work)
    time.sleep(1e-3)
    return x + sde.drift(t, x) * h + work


_own = np.random.default_rng(0)


def draws_its_own(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise) + 1e-3 * h * _own.standard_normal(x.shape)


def subtracts_the_mean(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise) + 1e-3 * h * x.mean()


def rolls(sde, t, x, h, noise):
    return x + sde.drift(t, x) * h + sde.diffusion(t, x) * np.roll(noise.dw, 1)


def ignores_its_noise(sde, t, x, h, noise):
    return x + sde.drift(t, x) * h


def drifts_without_a_step(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise) + 1e-9


def drifts_whatever_the_step(sde, t, x, h, noise):
    return x + sde.drift(t, x) + sde.diffusion(t, x) * noise.dw


def fails_on_other_parameters(sde, t, x, h, noise):
    inside = sde.params["sigma"] < 0.45
    return euler(sde, t, x, h, noise) + (0.0 if inside else np.nan)


def is_shorter_on_other_parameters(sde, t, x, h, noise):
    result = euler(sde, t, x, h, noise)
    return result if sde.params["sigma"] < 0.45 else result[:1]


BROKEN = [
    (shorter, Law.SHAPE),
    (a_number, Law.SHAPE),
    (a_list, Law.SHAPE),
    (single_precision, Law.SHAPE),
    (nothing, Law.SHAPE),
    (writes_to_x, Law.INPUTS),
    (writes_to_noise, Law.INPUTS),
    (root_of_noise, Law.FINITE),
    (later_nan, Law.FINITE),
    (counts_its_calls, Law.SAME_BITS),
    (draws_its_own, Law.SAME_BITS),
    (changes_every_second_time, Law.SAME_BITS),
    (shares_a_working_array, Law.OWN_ARRAYS),
    (subtracts_the_mean, Law.OWN_PATH),
    (rolls, Law.OWN_PATH),
    (ignores_its_noise, Law.ITS_NOISE),
    (drifts_without_a_step, Law.NO_STEP),
    (drifts_whatever_the_step, Law.NO_STEP),
    (fails_on_other_parameters, Law.FINITE),
    (is_shorter_on_other_parameters, Law.SHAPE),
]


@pytest.mark.parametrize(("step", "law"), BROKEN, ids=[step.__name__ for step, _ in BROKEN])
def test_a_step_that_breaks_a_law_is_told_which(step, law):
    breach = first_breach(sb.scheme(strong=0.5)(step), sb.problem("gbm"))
    assert breach is not None
    assert breach.law is law


@pytest.mark.parametrize(("step", "law"), BROKEN, ids=[step.__name__ for step, _ in BROKEN])
def test_the_sentence_says_where_and_what_to_change(step, law):
    breach = first_breach(sb.scheme(strong=0.5)(step), sb.problem("gbm"))
    assert breach is not None
    assert breach.sentence.startswith("The step ")
    assert " at t=" in breach.sentence
    assert breach.sentence.endswith(f"{law.value[1]}.")


def test_a_sound_step_breaks_no_law():
    assert first_breach(sb.scheme(strong=0.5)(euler), sb.problem("gbm")) is None


def test_every_law_has_a_step_here_that_breaks_it():
    assert {law for _, law in BROKEN} == set(Law)


def test_a_step_with_a_working_array_for_every_thread_breaks_no_law():
    """Threads take turns inside it as well; what they write is their own."""
    own = threading.local()

    def careful(sde, t, x, h, noise):
        if getattr(own, "work", np.empty(0)).shape != x.shape:
            own.work = np.empty_like(x)
        np.multiply(sde.diffusion(t, x), noise.dw, out=own.work)
        time.sleep(1e-3)
        return x + sde.drift(t, x) * h + own.work

    assert first_breach(sb.scheme(strong=0.5)(careful), sb.problem("gbm")) is None


def test_a_step_may_leave_some_paths_without_noise():
    """As one that is cut off above a level: whether it may is a matter of its orders."""

    def cut(sde, t, x, h, noise):
        return x + sde.drift(t, x) * h + np.where(x < 0.6, sde.diffusion(t, x) * noise.dw, 0.0)

    assert first_breach(sb.scheme(strong=0.5)(cut), sb.problem("gbm")) is None


def test_a_step_may_divide_by_its_increment():
    def secant(sde, t, x, h, noise):
        b = sde.diffusion(t, x)
        slope = (sde.diffusion(t, x + b * noise.dw) - b) / noise.dw
        return euler(sde, t, x, h, noise) + 0.5 * slope * (noise.dw**2 - h)

    assert first_breach(sb.scheme(strong=1.0)(secant), sb.problem("gbm")) is None


@pytest.mark.parametrize("typed", ["ou:theta=100000", "gbm:mu=-100", "gbm:horizon=0.001"])
def test_an_honest_step_breaks_no_law_on_extreme_parameters(typed):
    assert first_breach(sb.scheme(strong=0.5)(euler), sb.problem(typed)) is None


def test_a_nan_on_the_outermost_nodes_alone_is_seen():
    """The rule reaches |z| = 9: a root whose domain ends at |z| = 8 fails there only."""

    def narrow(sde, t, x, h, noise):
        return euler(sde, t, x, h, noise) + 0 * np.sqrt(64 * h - noise.dw**2)

    breach = first_breach(sb.scheme(strong=0.5)(narrow), sb.problem("gbm"))
    assert breach is not None
    assert breach.law is Law.FINITE


def test_inputs_that_were_written_to_are_named():
    breach = first_breach(sb.scheme(strong=0.5)(writes_to_noise), sb.problem("gbm"))
    assert breach is not None
    assert "noise.dw" in breach.sentence


def test_a_step_without_derivatives_may_divide_by_the_root_of_h():
    def supported_value(sde, t, x, h, noise):
        root = h**0.5
        b = sde.diffusion(t, x)
        shifted = x + b * root
        slope = (sde.diffusion(t, shifted) - b) / (2 * root)
        return euler(sde, t, x, h, noise) + slope * (noise.dw**2 - h)

    assert first_breach(sb.scheme(strong=1.0)(supported_value), sb.problem("gbm")) is None


def test_a_step_where_the_noise_vanishes_need_not_use_it():
    """On an SDE whose diffusion is zero at every state no noise can be seen."""
    still = replace(sb.problem("gbm"), diffusion=lambda p, t, x: np.zeros_like(x))
    assert first_breach(sb.scheme(strong=0.5)(ignores_its_noise), still) is None


def test_a_step_that_raises_shows_its_own_frames(user_file):
    path = user_file(
        """
        from sdebench import scheme

        @scheme(strong=0.5)
        def stumbling(sde, t, x, h, noise):
            return sde.drift(t, x) / undefined_name
        """
    )
    with pytest.raises(UserCodeRaised, match="when its contract was checked") as caught:
        first_breach(find_scheme(f"{path}:stumbling"), sb.problem("gbm"))
    assert "NameError" in str(caught.value)
    assert str(caught.value).count("File ") == 1
