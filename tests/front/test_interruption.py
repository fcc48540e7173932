"""A run that is interrupted, killed, or whose reader goes away."""

import signal
import subprocess
import time

import pytest

LONG = ("--on", "gbm", "--looks", "12", "--threads", "2")  # minutes, if nothing ended it


@pytest.fixture
def measuring(started, traced, folder):
    """Return a function that starts a long run and waits until it has called the scheme."""
    running = []

    def start(*words: str):
        process = started("measure", traced, *LONG, *words)
        running.append(process)
        deadline = time.monotonic() + 30
        while not (folder / "called").exists():
            assert process.poll() is None
            assert time.monotonic() < deadline
            time.sleep(0.05)
        return process

    yield start
    for process in running:
        process.kill()
        process.communicate()


@pytest.mark.parametrize("delay", [0.0, 1.0], ids=["at-the-start", "while-sampling"])
def test_an_interrupt_ends_with_130_and_one_line(measuring, delay, folder):
    for _ in range(3):
        process = measuring()
        time.sleep(delay)
        process.send_signal(signal.SIGINT)
        try:
            out, err = process.communicate(timeout=10)
            break
        except subprocess.TimeoutExpired as running:
            # Python drops an interrupt that it meets while it cleans up after an object.
            if b"Exception ignored in" not in (running.stderr or b""):
                raise
            (folder / "called").unlink()
    else:
        pytest.fail("three interrupts in turn were dropped")
    # Python itself ends by the signal, which a shell shows as 130 too, if the interrupt passed
    # through a text that is executed, as while SciPy is imported.
    assert process.returncode in (130, -signal.SIGINT)
    assert out == ""
    # The empty line before it ends the one on which a terminal shows ^C.
    assert err.strip().startswith("sdebench: interrupted")
    assert err.strip().count("\n") == 0


def test_an_interrupt_leaves_the_old_evidence_as_it_was(measuring, folder):
    (folder / "evidence.json").write_text("old")
    process = measuring("--save", "evidence.json")
    process.send_signal(signal.SIGINT)
    process.communicate(timeout=30)
    assert (folder / "evidence.json").read_text() == "old"
    assert [p.name for p in folder.glob("evidence*")] == ["evidence.json"]


def test_a_kill_leaves_the_old_evidence_as_it_was(measuring, folder):
    (folder / "evidence.json").write_text("old")
    process = measuring("--save", "evidence.json")
    process.send_signal(signal.SIGKILL)
    process.communicate(timeout=30)
    assert process.returncode == -signal.SIGKILL
    assert (folder / "evidence.json").read_text() == "old"
    assert [p.name for p in folder.glob("evidence*")] == ["evidence.json"]


@pytest.fixture(
    params=[("catalogue",), ("schema",), ("measure", "exact-ou", "--on", "gbm")], ids=lambda w: w[0]
)
def unread(request, started):
    """Return a process whose reader went away before it wrote, and what it said."""
    process = started(*request.param)
    process.stdout.close()
    process.stdout = None
    _, err = process.communicate(timeout=30)
    return process.returncode, err


def test_a_reader_that_goes_away_is_no_traceback(unread):
    assert unread[1] == ""


def test_a_reader_that_goes_away_is_not_taken_for_a_verdict(unread):
    assert unread[0] in (0, 128 + signal.SIGPIPE)
