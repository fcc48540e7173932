"""The registry: unique names, sorted, with the nearest name for a missing one."""

from types import SimpleNamespace

import pytest

from sdebench.errors import DuplicateName, UnknownName
from sdebench.registry import Registry


@pytest.fixture
def fruit() -> Registry:
    registry = Registry("fruit", "fruit list")
    for name in ("pear", "apple", "fig"):
        registry.add(SimpleNamespace(name=name), f"{name}.py")
    return registry


def test_names_come_sorted(fruit):
    assert list(fruit) == ["apple", "fig", "pear"]


def test_a_thing_is_found_by_its_name(fruit):
    assert fruit["fig"].name == "fig"


def test_a_missing_name_shows_the_nearest_and_where_all_are_listed(fruit):
    with pytest.raises(UnknownName, match=r"'aple'.*'apple'.*`fruit list` lists all 3"):
        _ = fruit["aple"]


def test_membership_raises_nothing(fruit):
    assert "fig" in fruit
    assert "date" not in fruit


def test_another_thing_of_the_same_name_is_refused_with_both_places(fruit):
    with pytest.raises(DuplicateName, match=r"'fig'.*fig\.py and other\.py"):
        fruit.add(SimpleNamespace(name="fig"), "other.py")


def test_the_same_thing_may_be_added_twice(fruit):
    fruit.add(fruit["fig"], "again.py")
    assert len(fruit) == 3


def test_a_refused_thing_is_not_kept(fruit):
    kept = fruit["fig"]
    with pytest.raises(DuplicateName):
        fruit.add(SimpleNamespace(name="fig"), "other.py")
    assert fruit["fig"] is kept
