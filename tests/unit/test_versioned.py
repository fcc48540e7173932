"""A file of a versioned format is read into its types, or refused in one sentence."""

import msgspec
import pytest

from sdebench.errors import BadBaseline
from sdebench.versioned import read_versioned


class Held(msgspec.Struct):
    format: str
    number: float


def read(file):
    return read_versioned(file, Held, "held/1", BadBaseline)


def test_what_is_held_is_returned_in_its_types(tmp_path):
    file = tmp_path / "held.json"
    file.write_text('{"format": "held/1", "number": 2}')
    assert read(file) == Held("held/1", 2.0)


@pytest.mark.parametrize(
    ("content", "told"),
    [
        (
            '{"format": "held/2", "number": 2}',
            "its format is 'held/2', this version reads 'held/1'",
        ),
        ('{"format": "held/1"}', "missing required field `number`"),
        ("", "Input data was truncated"),
        ('{"more": ' + "[" * 100_000, "nested too deeply"),
    ],
    ids=["newer", "incomplete", "empty", "deep"],
)
def test_anything_else_is_refused_with_the_files_name(tmp_path, content, told):
    file = tmp_path / "held.json"
    file.write_text(content)
    with pytest.raises(BadBaseline) as caught:
        read(file)
    assert told in str(caught.value)
    assert "held.json" in str(caught.value)


def test_a_file_that_cannot_be_read_is_refused(tmp_path):
    with pytest.raises(BadBaseline, match="Is a directory"):
        read(tmp_path)
