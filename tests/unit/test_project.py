"""What a project guards, and one sentence for each thing that will not do."""

import pytest

from sdebench.errors import BadProject, UserFileError
from sdebench.project import find_project

STEP = """\
from sdebench import scheme


@scheme(strong=0.5, weak=1.0)
def step(sde, t, x, h, noise):
    return x + sde.drift(t, x) * h + sde.diffusion(t, x) * noise.dw


def call(x):
    return x * (x > 0.5)
"""
TABLE = '[tool.sdebench]\nschemes = ["mine.py:step", "milstein"]\n'


@pytest.fixture
def project(tmp_path, monkeypatch):
    """Return a function that writes a project's file and finds it from a folder below."""
    (tmp_path / "mine.py").write_text(STEP)
    (tmp_path / "src" / "deep").mkdir(parents=True)
    monkeypatch.chdir(tmp_path / "src" / "deep")

    def find(text, name="pyproject.toml"):
        (tmp_path / name).write_text(text)
        return find_project(tmp_path / "src" / "deep")

    return find


def test_it_is_found_above_with_paths_from_its_own_folder(project, tmp_path):
    found = project(TABLE)
    assert [s.label for s in found.schemes()] == ["mine.py:step", "milstein"]
    assert found.baseline == tmp_path / "sdebench-baseline.json"


def test_what_is_left_out_is_as_in_measure(project):
    options = project(TABLE).options
    defaults = {"steps": None, "functionals": [], "seed": 1, "confidence": 0.95, "tolerance": 0.1}
    assert options == defaults | {"looks": 1}


def test_a_file_of_its_own_has_no_table_and_goes_before_the_shared_one(project):
    project('[tool.sdebench]\nschemes = ["euler-maruyama"]\n')
    found = project('schemes = ["milstein"]\n', "sdebench.toml")
    assert [s.label for s in found.schemes()] == ["milstein"]


def test_a_shared_file_of_another_project_is_passed_by(project, tmp_path):
    (tmp_path / "src" / "pyproject.toml").write_text("[project]\nname = 'inner'\n")
    assert project(TABLE).folder == tmp_path


def test_every_claim_that_applies_is_listed_and_no_other(project):
    table = '[tool.sdebench]\nschemes = ["exact-ou", "mine.py:step"]\nkinds = ["strong"]\n'
    found = project(table + 'problems = ["ou", "gbm:mu=0.3"]\n')
    claims = [(s.label, p.label, kind) for s, p, kind in found.claims()]
    assert claims == [
        ("exact-ou", "ou", "strong"),
        ("mine.py:step", "ou", "strong"),
        ("mine.py:step", "gbm:mu=0.3", "strong"),
    ]


def test_functionals_are_found_in_the_projects_folder(project):
    (call,) = project(TABLE + 'functionals = ["mine.py:call"]\n').functionals()
    assert call.name == "mine.py:call"


WRONG = {
    "an unknown key": (
        "toleranse = 0.1",
        "there is no key tool.sdebench.toleranse; the nearest is tolerance",
    ),
    "an underscore": ("allowed_change = 0.1", "the nearest is allowed-change"),
    "text for a number": ('seed = "one"', "tool.sdebench.seed: expected a whole number, got text"),
    "a number for a list": ("steps = 4", "tool.sdebench.steps: expected a list"),
    "text in a list of numbers": ('steps = [4, "8"]', "tool.sdebench.steps[1]: expected"),
    "a kind that is none": ('kinds = ["strange"]', "tool.sdebench.kinds[0]: invalid enum value"),
    "no kind": ("kinds = []", "tool.sdebench.kinds: expected a list of length >= 1"),
    "a fraction above 1": ("allowed-change = 2.0", "tool.sdebench.allowed-change: expected"),
    "a confidence of 0": ("confidence = 0.0", "tool.sdebench.confidence: expected"),
}


@pytest.mark.parametrize(("line", "told"), WRONG.values(), ids=WRONG)
def test_a_key_that_will_not_do_is_told_with_its_path(project, line, told):
    with pytest.raises(BadProject) as caught:
        project(f"{TABLE}{line}\n")
    assert told in str(caught.value)
    assert "pyproject.toml" in str(caught.value)
    assert str(caught.value).count("\n") == 0


def test_a_table_without_schemes_says_what_to_write(project):
    with pytest.raises(BadProject, match=r'schemes is missing: write schemes = \["my.py:step"\]'):
        project("[tool.sdebench]\nseed = 1\n")


@pytest.mark.parametrize("text", ["[tool.sdebench", "a = 1\na = 2", "\x00"])
def test_a_file_that_is_no_toml_is_told(project, text):
    with pytest.raises(BadProject, match="cannot be read as TOML"):
        project(text)


def test_a_table_that_is_none_is_told(project):
    with pytest.raises(BadProject, match=r"tool\.sdebench is no table"):
        project('[tool]\nsdebench = "all"\n')


def test_no_project_at_all_says_what_to_write(tmp_path):
    with pytest.raises(BadProject, match=r"neither here nor above .* write one, with schemes = "):
        find_project(tmp_path)


def test_a_file_named_outright_must_have_the_table(tmp_path):
    (tmp_path / "pyproject.toml").write_text("[project]\n")
    with pytest.raises(BadProject, match=r"has no table \[tool.sdebench\]"):
        find_project(tmp_path / "pyproject.toml")


def test_a_scheme_in_no_file_is_told(project):
    with pytest.raises(UserFileError, match=r"other\.py"):
        project('[tool.sdebench]\nschemes = ["other.py:step"]\n').schemes()
