"""What is seen: on a terminal, in a narrow one, in a pipe."""

import pytest

ESCAPE = "\x1b"
COLOURS = [f"{ESCAPE}[{style}m" for style in ("31", "32", "33", "1;31")]
QUICK = ("--looks", "1", "--threads", "1", "--steps", "4,8,16")
REFUTED = "@scheme(strong=1.0)\ndef step(sde, t, x, h, noise):\n    return x\n"


def coloured(text: str) -> bool:
    """Return whether there is a coloured word in the text."""
    return any(colour in text for colour in COLOURS)


def test_a_pipe_is_given_plain_text(in_own_process, write):
    write(REFUTED)
    outcome = in_own_process("measure", "my.py:step", "--on", "gbm", *QUICK)
    assert "refuted" in outcome.out
    assert ESCAPE not in outcome.out + outcome.err


def test_a_terminal_is_given_colours(on_terminal, write):
    write(REFUTED)
    outcome = on_terminal("measure", "my.py:step", "--on", "gbm", *QUICK)
    assert outcome.code == 1
    assert coloured(outcome.out)


def test_a_terminal_is_given_no_colours_where_they_are_unwanted(on_terminal, write):
    write(REFUTED)
    outcome = on_terminal("measure", "my.py:step", "--on", "gbm", *QUICK, NO_COLOR="1")
    assert "refuted" in outcome.out
    assert not coloured(outcome.out)


@pytest.fixture
def slow(write) -> str:
    """Return a scheme, as typed, whose sample of 4 blocks (2 looks) takes over 1.2 seconds."""
    write(
        "import time\n\n\n@scheme(strong=0.5)\ndef slow(sde, t, x, h, noise):\n"
        "    if (t, h) == (0.75, 0.25):\n        time.sleep(0.3)\n"
        "    return euler(sde, t, x, h, noise)\n",
        "slow.py",
    )
    return "slow.py:slow"


def test_work_of_over_a_second_shows_a_progress_bar(on_terminal, slow):
    outcome = on_terminal("measure", slow, "--on", "gbm", "--looks", "2", "--threads", "1")
    assert "━" in outcome.out


def test_quick_work_shows_no_progress_bar(on_terminal, write):
    write(REFUTED)
    assert "━" not in on_terminal("measure", "my.py:step", "--on", "gbm").out


def test_a_quiet_run_shows_no_progress_bar(on_terminal, slow):
    words = ("--on", "gbm", "--looks", "2", "--threads", "1", "--quiet")
    assert "━" not in on_terminal("measure", slow, *words).out


def test_a_pipe_is_shown_no_progress_bar(in_own_process, slow):
    words = ("--on", "gbm", "--looks", "2", "--threads", "1")
    outcome = in_own_process("measure", slow, *words)
    assert (outcome.err, "━" in outcome.out) == ("", False)


@pytest.mark.parametrize("columns", [60, 80])
def test_a_narrow_terminal_loses_no_part_of_a_name(on_terminal, write, columns):
    write(REFUTED, "desk_of_the_island_grid.py")
    words = ("desk_of_the_island_grid.py:step", "--on", "gbm:mu=0.375,sigma=0.1875,x0=1.5")
    shown = on_terminal("measure", *words, *QUICK, columns=columns).out
    table = shown.split("contract: ")[0]
    assert "…" not in table
    assert "0.1875" in table.replace("\r\n", "\n")


def test_a_terminal_of_80_columns_shows_the_whole_catalogue(on_terminal):
    assert "…" not in on_terminal("catalogue", columns=80).out


def test_a_narrow_terminal_shows_the_whole_catalogue(on_terminal):
    assert "…" not in on_terminal("catalogue", columns=60).out


def test_a_narrow_terminal_keeps_every_column_that_is_not_in_its_headings(on_terminal):
    shown = on_terminal("measure", "exact-ou", "--on", "gbm", columns=60).out
    assert "exact-ou on gbm" in shown.splitlines()[0]
    for heading in ("kind", "claimed", "order", "verdict"):
        assert heading in shown


def test_a_narrow_terminal_has_a_heading_for_every_pair(on_terminal):
    words = ("measure", "exact-ou", "milstein", "--on", "gbm", *QUICK)
    shown = on_terminal(*words, columns=60).out
    for pair in ("exact-ou on gbm", "milstein on gbm"):
        assert shown.count(f"{ESCAPE}[1m{pair}{ESCAPE}[0m") == 1


def test_a_wide_terminal_has_one_table_of_claims(on_terminal):
    words = ("measure", "exact-ou", "milstein", "--on", "gbm", *QUICK)
    shown = on_terminal(*words, columns=160).out
    (headings,) = [line for line in shown.splitlines() if "claimed" in line]
    for heading in ("scheme", "problem", "kind", "order", "verdict"):
        assert heading in headings


def test_a_pipe_is_given_one_line_a_claim_whatever_its_length(typed, write):
    name = "a_rather_long_name_for_a_file_with_one_step_of_an_integrator.py"
    write(REFUTED, name)
    outcome = typed(
        "measure", f"{name}:step", "--on", "gbm:mu=0.375,sigma=0.1875,x0=1.5,horizon=2.5", *QUICK
    )
    lines = [line for line in outcome.out.splitlines() if line.startswith(f"{name}:step  ")]
    assert len(lines) == 2
    assert all("gbm:mu=0.375,sigma=0.1875,x0=1.5,horizon=2.5" in line for line in lines)


def test_a_quiet_run_of_supported_claims_prints_nothing(typed):
    outcome = typed("measure", "exact-ou", "--on", "ou", "--threads", "1", "--quiet")
    assert (outcome.code, outcome.out, outcome.err) == (0, "", "")


def test_a_quiet_run_prints_what_is_refuted(typed, write):
    write(REFUTED)
    outcome = typed("measure", "my.py:step", "--on", "gbm", "--quiet", *QUICK)
    assert outcome.code == 1
    assert "whatever its noise" in outcome.out


def test_a_quiet_run_prints_nothing_of_what_is_supported(typed, write):
    write(REFUTED)
    words = ("measure", "exact-ou", "my.py:step", "--on", "ou", "--quiet", "--threads", "1")
    outcome = typed(*words)
    assert "my.py:step" in outcome.out
    assert "exact-ou" not in outcome.out


ONCE = ("measure", "milstein", "--on", "gbm", "--looks", "1", "--threads", "1")


def lines_of_rungs(out: str, steps: int) -> list[str]:
    return [line for line in out.splitlines() if line.split()[:1] == [str(steps)]]


def test_a_single_pair_is_shown_with_every_rung(typed):
    outcome = typed(*ONCE)
    for steps in (4, 16, 64, 256, 1024, 4096):
        assert len(lines_of_rungs(outcome.out, steps)) == 4


def test_a_single_pair_that_is_sampled_is_shown_with_every_rung(typed):
    outcome = typed(*ONCE, "--route", "sampled")
    for steps in (4, 8, 16, 32, 64):
        assert len(lines_of_rungs(outcome.out, steps)) == 4


def test_the_rungs_of_a_check_are_not_shown_beside_what_it_checks(typed):
    """Rungs of 8 and 32 steps are the check's alone; the last lines say that it agrees."""
    outcome = typed(*ONCE)
    assert lines_of_rungs(outcome.out, 8) + lines_of_rungs(outcome.out, 32) == []
    assert outcome.out.splitlines()[-2] == (
        "Propagated errors agree with a check on 32768 sampled paths (4 rows, rungs to 64 steps)."
    )


def test_what_had_to_be_sampled_is_told_before_the_verdict(typed):
    outcome = typed("measure", "milstein", "euler-maruyama", "--on", "ramped-noise", *QUICK)
    assert outcome.out.splitlines()[-2] == (
        "Sampled, since ramped-noise depends on time: milstein on ramped-noise, "
        "euler-maruyama on ramped-noise."
    )


def test_the_verdict_is_the_last_line(typed):
    outcome = typed("measure", "milstein", "--on", "gbm", *QUICK)
    assert outcome.out.splitlines()[-1].startswith("Verdict: ")
