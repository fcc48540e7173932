"""Figures as files, of one process and of several."""

import multiprocessing
from functools import partial

import pytest
from sdebench.reports import figures, render
from sdebench.reports.sections import sections


@pytest.fixture(scope="module")
def drawing(supported_evidence):
    return partial(figures.convergence, sections([supported_evidence])[0])


def test_several_processes_draw_what_one_does(drawing, monkeypatch):
    monkeypatch.setattr(render.os, "cpu_count", lambda: 2)
    several = render.all_images([drawing] * render.FEW)
    assert several == [render.images(drawing())] * render.FEW


def test_where_a_system_does_not_fork_one_process_draws_all(drawing, monkeypatch):
    monkeypatch.setattr(multiprocessing, "get_all_start_methods", lambda: ["spawn"])
    monkeypatch.setattr(multiprocessing, "get_context", None)
    assert len(render.all_images([drawing] * render.FEW)) == render.FEW


def test_files_are_what_their_endings_say(drawing):
    found = render.images(drawing())
    assert found["svg"].startswith(b"<?xml")
    assert found["pdf"].startswith(b"%PDF")
    assert found["png"].startswith(b"\x89PNG")


def raising():
    raise ValueError("no figure today")


def test_a_figure_that_cannot_be_drawn_is_told_in_every_process():
    with pytest.raises(ValueError, match="no figure today"):
        render.all_images([raising] * render.FEW)
