"""Where schemes, problems and functionals come from: names, files, installed packages."""

import subprocess
import sys
from pathlib import Path
from textwrap import dedent

import numpy as np
import pytest

import sdebench as sb
from sdebench import discovery
from sdebench.errors import BadParameter, UnknownName, UserCodeRaised, UserFileError
from sdebench.functional import STANDARD

SOUND = """
from sdebench import scheme

@scheme(strong=0.5)
def my_step(sde, t, x, h, noise):
    return x

def plain(sde, t, x, h, noise):
    return x

def payoff(x):
    return x * 3

NUMBER = 3
"""


def test_every_registered_scheme_is_under_its_name():
    found = discovery.schemes()
    assert len(found) > 0
    assert all(name == scheme.name for name, scheme in found.items())


def test_every_registered_problem_is_under_its_name():
    found = discovery.problems()
    assert len(found) > 0
    assert all(name == problem.name for name, problem in found.items())


def test_a_registered_scheme_is_found_by_its_name():
    assert discovery.find_scheme("milstein").name == "milstein"


def test_a_scheme_is_found_as_it_is_given():
    made = sb.scheme(strong=0.5)(lambda sde, t, x, h, noise: x)
    assert discovery.find_scheme(made) is made


def test_an_unknown_scheme_shows_the_nearest_and_where_all_are_listed():
    with pytest.raises(UnknownName, match=r"'milstien'.*'milstein'.*`sdebench catalogue` lists"):
        discovery.find_scheme("milstien")


def test_a_scheme_in_a_file_is_found_and_keeps_its_typed_name(user_file):
    typed = f"{user_file(SOUND)}:my_step"
    found = discovery.find_scheme(typed)
    assert (found.name, found.label) == ("my-step", typed)


def test_a_file_is_found_from_the_current_folder(user_file, monkeypatch):
    monkeypatch.chdir(user_file(SOUND).parent)
    assert discovery.find_scheme("mine.py:my_step").label == "mine.py:my_step"


def test_a_missing_file_is_told():
    with pytest.raises(UserFileError, match=r"There is no file 'none.py'"):
        discovery.find_scheme("none.py:step")


def test_a_folder_is_no_file(tmp_path):
    (tmp_path / "folder.py").mkdir()
    with pytest.raises(UserFileError, match="There is no file"):
        discovery.find_scheme(f"{tmp_path / 'folder.py'}:step")


def test_a_file_without_a_function_shows_those_it_defines(user_file):
    with pytest.raises(UserFileError, match=r"names no function.*It defines: my-step"):
        discovery.find_scheme(str(user_file(SOUND)))


def test_a_function_that_is_not_there_shows_the_nearest_and_the_others(user_file):
    with pytest.raises(UnknownName, match=r"'my_stap'.*Did you mean 'my_step'.*It has: ") as caught:
        discovery.find_scheme(f"{user_file(SOUND)}:my_stap")
    assert "plain" in str(caught.value)


def test_imported_names_are_not_offered_as_functions_of_the_file(user_file):
    with pytest.raises(UnknownName) as caught:
        discovery.find_scheme(f"{user_file(SOUND)}:zzz")
    assert "It has: my_step, plain, payoff." in str(caught.value)


def test_a_name_that_is_no_function_is_told(user_file):
    with pytest.raises(UnknownName, match="'NUMBER'"):
        discovery.find_scheme(f"{user_file(SOUND)}:NUMBER")


def test_a_function_without_the_decorator_is_told_what_to_write(user_file):
    with pytest.raises(UserFileError, match=r"'plain' .* is not a scheme: write @scheme"):
        discovery.find_scheme(f"{user_file(SOUND)}:plain")


def test_a_python_function_without_the_decorator_is_told_what_to_write():
    def bare(sde, t, x, h, noise):
        return x

    with pytest.raises(UserFileError, match=r"bare claims no order: write @scheme"):
        discovery.find_scheme(bare)


def test_a_syntax_error_is_told_with_its_line(user_file):
    path = user_file("x = 1\ndef step(:\n    pass\n")
    with pytest.raises(UserFileError, match=r"does not parse: .*line 2: def step\(:"):
        discovery.find_scheme(f"{path}:step")


RAISING = """
def inner():
    raise RuntimeError("no licence")

inner()
"""


def test_a_file_that_raises_when_loaded_shows_the_users_frames_only(user_file):
    path = user_file(RAISING)
    with pytest.raises(
        UserCodeRaised, match="raised RuntimeError when loaded: no licence"
    ) as caught:
        discovery.find_scheme(f"{path}:step")
    frames = [line for line in str(caught.value).splitlines() if line.strip().startswith("File")]
    assert len(frames) == 2
    assert all(str(path) in frame for frame in frames)


def test_a_file_given_by_a_relative_path_shows_the_users_frames_too(user_file, monkeypatch):
    monkeypatch.chdir(user_file(RAISING).parent)
    with pytest.raises(UserCodeRaised) as caught:
        discovery.find_scheme("mine.py:step")
    assert str(caught.value).count("File ") == 2


def test_a_wrong_claim_in_a_file_is_told_as_such(user_file):
    path = user_file("from sdebench import scheme\n@scheme(strong=-1)\ndef s(*a): return a[2]\n")
    with pytest.raises(sb.SdebenchError, match="'s' claims strong=-1"):
        discovery.find_scheme(f"{path}:s")


def test_a_file_that_ends_the_interpreter_is_told(user_file):
    path = user_file(SOUND + "\nraise SystemExit(0)\n")
    with pytest.raises(UserCodeRaised, match="SystemExit"):
        discovery.find_scheme(f"{path}:my_step")


def test_a_file_may_import_its_siblings(user_file):
    user_file("FACTOR = 7\n", "a_sibling_of_one.py")
    path = user_file("import a_sibling_of_one\n" + SOUND)
    assert discovery.load_file(str(path)).a_sibling_of_one.FACTOR == 7


def test_files_in_two_folders_import_each_its_own_sibling(user_file):
    """As for an old and a new version of one integrator, measured side by side."""
    text = "from a_sibling_of_two import FACTOR\n" + SOUND
    for folder, factor in (("old", 1), ("new", 2)):
        user_file(f"FACTOR = {factor}\n", f"{folder}/a_sibling_of_two.py")
        user_file(text, f"{folder}/mine.py")
    root = user_file("", "nothing.py").parent
    found = [discovery.load_file(str(root / f / "mine.py")).FACTOR for f in ("old", "new")]
    assert found == [1, 2]


def test_a_syntax_error_in_a_sibling_is_told_with_the_siblings_name(user_file):
    user_file("x = (\n", "a_broken_sibling.py")
    path = user_file("import a_broken_sibling\n")
    with pytest.raises(UserFileError, match=r"a_broken_sibling\.py' does not parse: .*line 1: x ="):
        discovery.load_file(str(path))


def test_the_path_of_imports_is_as_before_after_loading(user_file):
    before = list(sys.path)
    discovery.load_file(str(user_file(SOUND)))
    with pytest.raises(UserCodeRaised):
        discovery.load_file(str(user_file(RAISING, "other.py")))
    assert sys.path == before


def test_files_of_one_name_in_two_folders_are_two_modules(user_file):
    one = discovery.load_file(str(user_file("HERE = 1\n", "one/mine.py")))
    two = discovery.load_file(str(user_file("HERE = 2\n", "two/mine.py")))
    assert (one.HERE, two.HERE) == (1, 2)
    assert one.__name__ != two.__name__


def test_a_module_collects_its_own_schemes_only(user_file):
    path = user_file(SOUND + "from sdebench.schemes.milstein import milstein\n")
    module = discovery.load_file(str(path))
    assert [s.name for s in discovery.collect(module, sb.Scheme)] == ["my-step"]


def test_a_problem_is_found_with_its_parameters():
    found = discovery.find_problem("gbm:mu=0.5,sigma=0.25")
    assert (found.params["mu"], found.params["sigma"]) == (0.5, 0.25)
    assert found.label == "gbm:mu=0.5,sigma=0.25"


def test_spaces_around_parameters_do_no_harm():
    assert discovery.find_problem("gbm: mu = 0.5 , sigma=0.25").params["mu"] == 0.5


def test_keywords_set_parameters_after_the_text():
    found = discovery.find_problem("gbm:mu=0.5,sigma=0.25", sigma=0.75)
    assert (found.params["mu"], found.params["sigma"]) == (0.5, 0.75)
    assert found.label == "gbm:mu=0.5,sigma=0.75"


def test_a_problem_is_found_as_it_is_given():
    made = sb.problem("gbm", mu=0.9)
    assert discovery.find_problem(made) is made
    assert discovery.find_problem(made, sigma=0.7).params["mu"] == 0.9


@pytest.mark.parametrize("text", ["gbm:mu", "gbm:mu=", "gbm:mu= ", "gbm:=,mu"])
def test_a_setting_that_sets_nothing_is_told(text):
    with pytest.raises(UserFileError, match="write parameter=value"):
        discovery.find_problem(text)


@pytest.mark.parametrize(
    ("text", "error", "words"),
    [
        ("gmb", UnknownName, "Did you mean 'gbm'"),
        ("gbm:my=1", UnknownName, "Did you mean 'mu'"),
        ("gbm:mu=fast", BadParameter, "'fast'"),
        ("gbm:mu=nan", BadParameter, "finite"),
        ("gbm:sigma=0", BadParameter, "above 0"),
        ("gbm:=1", UnknownName, "''"),
        ("", UnknownName, "''"),
    ],
)
def test_a_wrong_problem_or_parameter_is_told(text, error, words):
    with pytest.raises(error, match=words):
        discovery.find_problem(text)


@pytest.mark.parametrize("functional", STANDARD, ids=lambda f: f.name)
def test_a_standard_functional_is_found_by_its_name(functional):
    assert discovery.find_functional(functional.name) is functional


def test_a_functional_in_a_file_is_found(user_file):
    typed = f"{user_file(SOUND)}:payoff"
    found = discovery.find_functional(typed)
    assert found.name == typed
    assert found.function(np.ones(1)).tolist() == [3.0]


def test_a_python_function_becomes_a_functional_of_its_name():
    def square_root(x):
        return x**0.5

    assert discovery.find_functional(square_root).name == "square-root"


def test_a_functional_is_found_as_it_is_given():
    made = sb.Functional("mine", np.tanh)
    assert discovery.find_functional(made) is made


def test_an_unknown_functional_shows_the_nearest():
    with pytest.raises(UnknownName, match=r"'means'.*Did you mean 'mean'"):
        discovery.find_functional("means")


def in_a_fresh_interpreter(folder: Path, code: str) -> subprocess.CompletedProcess:
    program = f"import sys; sys.path.insert(0, {str(folder)!r})\n{dedent(code)}"
    return subprocess.run(
        [sys.executable, "-c", program], capture_output=True, text=True, timeout=60, check=False
    )


@pytest.fixture
def distribution(tmp_path):
    """Return a function that lays out an installed distribution with an entry point."""

    def install(value: str) -> Path:
        (tmp_path / "vendor_steps.py").write_text(
            SOUND.replace("my_step", "vendor_step") + "\nOTHER = vendor_step\n"
        )
        info = tmp_path / "vendor-1.0.dist-info"
        info.mkdir()
        (info / "METADATA").write_text("Metadata-Version: 2.1\nName: vendor\nVersion: 1.0\n")
        (info / "entry_points.txt").write_text(f"[sdebench.schemes]\nvendor = {value}\n")
        return tmp_path

    return install


@pytest.mark.parametrize("value", ["vendor_steps:vendor_step", "vendor_steps"])
def test_a_scheme_of_an_installed_package_is_found_by_the_same_door(distribution, value):
    done = in_a_fresh_interpreter(
        distribution(value),
        """
        from sdebench.discovery import find_scheme
        print(find_scheme("vendor-step").module)
        """,
    )
    assert done.stdout == "vendor_steps\n", done.stderr


@pytest.mark.parametrize("value", ["vendor_steps:plain", "vendor_steps:NUMBER"])
def test_an_entry_point_that_is_no_scheme_is_told(distribution, value):
    done = in_a_fresh_interpreter(
        distribution(value),
        """
        from sdebench.discovery import schemes
        print(*schemes().faults)
        """,
    )
    assert f"The entry point 'vendor' ({value}) is no scheme" in done.stdout, done.stderr


@pytest.mark.parametrize("value", ["vendor_steps_that_are_not_there", "vendor_steps:nothing"])
def test_an_entry_point_that_cannot_be_loaded_is_told_and_takes_nothing_else_away(
    distribution, value
):
    done = in_a_fresh_interpreter(
        distribution(value),
        """
        from sdebench.discovery import schemes
        print(*schemes().faults, "milstein" in schemes())
        """,
    )
    assert f"The entry point 'vendor' ({value}) cannot be loaded" in done.stdout, done.stderr
    assert done.stdout.endswith("True\n")


def test_a_package_may_not_take_a_name_of_the_bench(distribution):
    folder = distribution("vendor_steps")
    text = (folder / "vendor_steps.py").read_text()
    (folder / "vendor_steps.py").write_text(text.replace("vendor_step", "milstein"))
    done = in_a_fresh_interpreter(
        folder,
        """
        from sdebench.discovery import schemes
        print(*schemes().faults, schemes()["milstein"].module)
        """,
    )
    assert "sdebench.schemes.milstein and vendor_steps" in done.stdout, done.stderr
    assert done.stdout.endswith("sdebench.schemes.milstein\n")


@pytest.mark.parametrize("given", [3, None, 1.5, ["milstein"]], ids=repr)
def test_what_is_neither_a_name_nor_a_scheme_nor_a_problem_is_told(given):
    with pytest.raises(UserFileError, match="is no scheme"):
        discovery.find_scheme(given)
    with pytest.raises(UserFileError, match="is no problem"):
        discovery.find_problem(given)


def test_a_file_typed_without_its_ending_is_told_what_to_type():
    with pytest.raises(UserFileError, match=r"write 'mine\.py:my_step'"):
        discovery.find_scheme("mine:my_step")


def test_a_parameter_set_twice_is_told():
    with pytest.raises(UserFileError, match="sets mu twice"):
        discovery.find_problem("gbm:mu=0.1,mu=0.2")
