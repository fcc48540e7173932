"""What is killed at any moment leaves the old baseline and history whole; two at once lose nothing.

The process writes without a pause and is killed after a random time, so that the kill falls into
every part of a write. The wrong version it catches: a file that is opened and written in place.
"""

import multiprocessing
import os
import random
import resource
import signal
import sqlite3
import subprocess
import sys
import time
from multiprocessing.synchronize import Event
from pathlib import Path

import pytest

import sdebench as sb
from sdebench.acceptance import baseline_of
from sdebench.baseline import load, save
from sdebench.errors import BadHistory, CannotWrite
from sdebench.history import append, read


@pytest.fixture(scope="module")
def evidence() -> sb.Evidence:
    return sb.measure("milstein", on="gbm", steps=(4, 8, 16), looks=1, threads=1)


@pytest.fixture
def place(tmp_path, evidence):
    evidence.save(tmp_path / "e.json")
    save(baseline_of(evidence, ("strong", "weak"), 1, None, "old"), tmp_path / "b.json")
    append(tmp_path / "h.db", evidence, 0)
    return tmp_path


def write_without_end(place: Path, what: str, evidence: sb.Evidence, ready: Event) -> None:
    baseline = load(place / "b.json")
    ready.set()
    while True:
        if what == "accept":
            save(baseline, place / "b.json")
        else:
            append(place / "h.db", evidence, 0)


def killed(place: Path, what: str, evidence: sb.Evidence, rng: random.Random) -> None:
    """Start a process that writes without end, and kill it in the middle of it."""
    context = multiprocessing.get_context("fork")  # which need not import anything again
    ready = context.Event()
    process = context.Process(target=write_without_end, args=(place, what, evidence, ready))
    process.start()
    assert ready.wait(timeout=30)
    time.sleep(rng.uniform(0.0, 0.05))
    process.kill()
    process.join()


def whole(place, evidence, rounds: int, seed: int) -> None:
    rng = random.Random(seed)
    known = load(place / "b.json")
    n_rows = len(read(place / "h.db"))
    for n in range(rounds):
        killed(place, "accept" if n % 2 else "append", evidence, rng)
        assert load(place / "b.json") == known
        points = read(place / "h.db")
        assert len(points) % n_rows == 0, "a run is there with all its rows or not at all"
    append(place / "h.db", evidence, 0)
    assert len(read(place / "h.db")) > n_rows


def test_killed_while_writing_the_old_files_stay_whole(place, evidence):
    whole(place, evidence, rounds=8, seed=1)


@pytest.mark.calibration
def test_killed_a_hundred_times_the_old_files_stay_whole(place, evidence):
    whole(place, evidence, rounds=100, seed=2)


def test_two_gates_at_once_lose_no_run(tmp_path, evidence):
    evidence.save(tmp_path / "e.json")
    code = (
        "import sys, pathlib, sdebench as sb\nfrom sdebench.history import append\n"
        "e = sb.load(sys.argv[1])\n"
        "for _ in range(25):\n    append(pathlib.Path(sys.argv[2]), e, 0)\n"
    )
    words = [sys.executable, "-c", code, str(tmp_path / "e.json"), str(tmp_path / "h.db")]
    both = [subprocess.Popen(words) for _ in range(2)]
    assert [process.wait(timeout=60) for process in both] == [0, 0]
    with sqlite3.connect(tmp_path / "h.db") as connection:
        (runs,) = connection.execute("select count(*) from runs").fetchone()
    connection.close()
    assert runs == 50


def test_a_disk_that_fills_up_is_told_and_the_old_files_stay(place, evidence):
    """By a limit on the size of files: a write beyond it fails as on a full disk."""
    known, points = load(place / "b.json"), read(place / "h.db")
    soft, hard = resource.getrlimit(resource.RLIMIT_FSIZE)
    ignored = signal.signal(signal.SIGXFSZ, signal.SIG_IGN)
    resource.setrlimit(resource.RLIMIT_FSIZE, (1000, hard))
    try:
        with pytest.raises(CannotWrite, match="File too large"):
            save(known, place / "b.json")
        with pytest.raises(BadHistory, match="disk"):
            append(place / "h.db", evidence, 0)
    finally:
        resource.setrlimit(resource.RLIMIT_FSIZE, (soft, hard))
        signal.signal(signal.SIGXFSZ, ignored)
    assert load(place / "b.json") == known
    assert read(place / "h.db") == points
    assert not [name for name in os.listdir(place) if "partial" in name]
