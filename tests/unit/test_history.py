"""The history of a gate: what a run leaves in it, and what is refused."""

import sqlite3

import pytest

from sdebench.errors import BadHistory
from sdebench.history import append, check_history, read


@pytest.fixture
def file(tmp_path):
    return tmp_path / "history.db"


def test_a_run_has_a_point_for_each_kind_of_error(file, supported_evidence):
    append(file, supported_evidence, 0)
    append(file, supported_evidence, 1)
    points = read(file)
    rows = [r for r in supported_evidence.results if r.kind in ("strong", "weak") and not r.check]
    assert [p.run for p in points] == [1] * len(rows) + [2] * len(rows)
    assert [p.exit_code for p in points[:: len(rows)]] == [0, 1]
    for point, row in zip(points, rows, strict=False):
        assert (point.kind, point.functional) == (row.kind, row.functional)
        c = row.error_constant
        assert (point.exponent, point.constant, point.low) == (c.order, c.value, c.low)
        assert point.step_seconds == row.cost.step_seconds


def test_an_error_without_a_constant_is_kept_without_one(file, refuted_evidence):
    append(file, refuted_evidence, 1)
    assert len(read(file)) == 1


def test_a_run_that_fails_half_way_leaves_nothing(file, supported_evidence, monkeypatch):
    append(file, supported_evidence, 0)
    before = read(file)
    spoilt = type(supported_evidence)(
        **{
            name: getattr(supported_evidence, name)
            for name in supported_evidence.__struct_fields__
            if name != "results"
        },
        results=[*supported_evidence.results, "no row"],
    )
    with pytest.raises(AttributeError):
        append(file, spoilt, 0)
    assert read(file) == before


def test_checking_makes_an_empty_history(file):
    check_history(file)
    assert read(file) == []


def test_a_text_is_not_taken_for_a_history(file):
    file.write_text("runs,errors\n" * 100)
    for use in (check_history, read):
        with pytest.raises(BadHistory, match="cannot be used as a history"):
            use(file)
    assert file.read_text().startswith("runs,errors")


def test_another_programs_database_is_left_as_it_is(file):
    with sqlite3.connect(file) as connection:
        connection.execute("create table theirs (a)")
    connection.close()
    before = file.read_bytes()
    for use in (check_history, read):
        with pytest.raises(BadHistory, match="another program's database"):
            use(file)
    assert file.read_bytes() == before


def test_a_newer_history_is_left_as_it_is(file):
    check_history(file)
    with sqlite3.connect(file) as connection:
        connection.execute("pragma user_version = 2")
    connection.close()
    with pytest.raises(BadHistory, match="its format 2 is newer than 1"):
        check_history(file)


def test_a_missing_history_is_told_and_not_made(file):
    with pytest.raises(BadHistory, match="there is no such file"):
        read(file)
    assert not file.exists()


def test_a_place_that_cannot_be_written_to_is_told(tmp_path):
    with pytest.raises(BadHistory, match="unable to open"):
        check_history(tmp_path / "nowhere" / "history.db")
