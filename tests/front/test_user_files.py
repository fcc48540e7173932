"""A user's files, wherever they are and whatever they are called; and installed packages."""

import os

import pytest

QUICK = ("--on", "gbm", "--looks", "1", "--threads", "1", "--steps", "4,8,16")
STEP = '''\
@scheme(strong=0.5)
def step(sde, t, x, h, noise):
    """A step, [red]marked up[/red]."""
    return euler(sde, t, x, h, noise)
'''


@pytest.mark.parametrize(
    "name",
    ["my step.py", "schrittlänge.py", "ステップ.py", "[red]step.py", "a:b.py", "-step.py"],
)
def test_a_file_of_any_name_is_measured(typed, write, name):
    write(STEP, name)
    outcome = typed("measure", *QUICK, "--", f"{name}:step")
    assert outcome.err == ""
    assert f"{name}:step  gbm" in outcome.out


def test_a_file_is_measured_from_another_working_directory(typed, write, folder, monkeypatch):
    (folder / "elsewhere").mkdir()
    write(STEP)
    monkeypatch.chdir(folder / "elsewhere")
    assert "../my.py:step  gbm" in typed("measure", "../my.py:step", *QUICK).out


def test_a_file_may_import_its_neighbours(typed, write, folder):
    (folder / "neighbour.py").write_text("HALF = 0.5\n")
    write("from neighbour import HALF\n\n\n" + STEP.replace("strong=0.5", "strong=HALF"))
    assert "my.py:step  gbm" in typed("measure", "my.py:step", *QUICK).out


def test_two_files_with_a_neighbour_of_one_name_are_given_each_its_own(typed, write, folder):
    """An old and a new version of one integrator, side by side: the old one loses its drift."""
    for version, factor in (("old", 0), ("new", 1)):
        (folder / version).mkdir()
        (folder / version / "neighbour.py").write_text(f"FACTOR = {factor}\n")
        write(
            "from neighbour import FACTOR\n\n\n@scheme(strong=0.5)\n"
            "def step(sde, t, x, h, noise):\n"
            "    return x + FACTOR * sde.drift(t, x) * h + sde.diffusion(t, x) * noise.dw\n",
            f"{version}/my.py",
        )
    out = typed("measure", "old/my.py:step", "new/my.py:step", *QUICK).out
    assert "old/my.py:step on gbm, strong: refuted" in out
    assert "the drift is missing" in out
    assert "new/my.py:step on gbm, strong: refuted" not in out


def test_a_neighbour_that_does_not_parse_is_told_by_its_own_name(typed, write, folder):
    (folder / "neighbour.py").write_text("FACTOR = (\n")
    write("import neighbour\n\n\n" + STEP)
    outcome = typed("measure", "my.py:step", *QUICK)
    assert (outcome.code, outcome.out) == (2, "")
    assert "neighbour.py' does not parse" in outcome.err
    assert "'my.py'" not in outcome.err


def test_a_users_own_packages_of_our_folders_names_do_not_collide(in_own_process, write, folder):
    for package in ("schemes", "reports", "problems"):
        (folder / package).mkdir()
        (folder / package / "__init__.py").write_text("SIXTH = 1 / 6\n")
    write(
        "import problems\nimport reports\nimport schemes\n\n"
        "HALF = schemes.SIXTH + reports.SIXTH + problems.SIXTH\n\n\n"
        + STEP.replace("strong=0.5", "strong=HALF")
    )
    outcome = in_own_process("measure", "my.py:step", "milstein", *QUICK)
    assert outcome.err == ""
    assert "my.py:step  gbm" in outcome.out
    assert "milstein    gbm" in outcome.out


@pytest.mark.parametrize("module", ["cli", "errors", "study", "numbers", "random_walk"])
def test_a_users_file_named_like_a_module_of_ours_does_not_collide(typed, write, module):
    write(STEP, f"{module}.py")
    assert f"{module}.py:step  gbm" in typed("measure", f"{module}.py:step", *QUICK).out


def test_two_schemes_of_one_file_are_measured_together(typed, write):
    write(STEP + "\n\n" + STEP.replace("def step", "def other"))
    outcome = typed("measure", "my.py:step", "my.py:other", *QUICK)
    assert "my.py:step   gbm" in outcome.out
    assert "my.py:other  gbm" in outcome.out


def test_a_scheme_beside_registered_ones_may_have_their_name(typed, write):
    write(STEP.replace("def step", "def milstein"))
    outcome = typed("measure", "my.py:milstein", "milstein", *QUICK)
    assert "my.py:milstein  gbm" in outcome.out
    assert "\nmilstein        gbm" in outcome.out


@pytest.fixture
def installed(folder, clean_environment):
    """Return a function that installs a package offering a scheme, and the environment for it."""

    def install(content: str, target: str = "their_package") -> dict[str, str]:
        site = folder / "site"
        site.mkdir()
        (site / "their_package.py").write_text(content)
        described = site / "their_package-1.0.dist-info"
        described.mkdir()
        (described / "METADATA").write_text("Metadata-Version: 2.1\nName: x\nVersion: 1.0\n")
        (described / "entry_points.txt").write_text(f"[sdebench.schemes]\ntheirs = {target}\n")
        path = [str(site), *filter(None, [clean_environment.get("PYTHONPATH")])]
        return clean_environment | {"PYTHONPATH": os.pathsep.join(path)}

    return install


THEIRS = '''\
from sdebench import scheme


@scheme(strong=0.5, weak=1.0)
def their_step(sde, t, x, h, noise):
    """A step of theirs, [red]marked up[/red]."""
    return x + sde.drift(t, x) * h + sde.diffusion(t, x) * noise.dw
'''


@pytest.mark.parametrize("target", ["their_package", "their_package:their_step"])
def test_an_installed_package_offers_its_schemes(in_own_process, installed, target):
    outcome = in_own_process("catalogue", env=installed(THEIRS, target))
    assert outcome.err == ""
    assert "\ntheir-step " in outcome.out


def test_square_brackets_in_a_docstring_are_shown_as_they_are(in_own_process, installed):
    outcome = in_own_process("catalogue", env=installed(THEIRS))
    assert "A step of theirs, [red]marked up[/red]." in outcome.out


def test_an_installed_scheme_that_takes_a_name_of_ours_is_told(in_own_process, installed):
    taken = THEIRS.replace("their_step", "milstein")
    outcome = in_own_process("catalogue", env=installed(taken))
    assert outcome.code == 0
    assert "euler-maruyama" in outcome.out
    assert "Two schemes are named 'milstein'" in outcome.err


def test_an_entry_point_that_is_no_scheme_is_told(in_own_process, installed):
    plain = THEIRS.replace("@scheme(strong=0.5, weak=1.0)\n", "")
    outcome = in_own_process("catalogue", env=installed(plain, "their_package:their_step"))
    assert outcome.code == 0
    assert "euler-maruyama" in outcome.out
    assert outcome.err.startswith("sdebench: The entry point 'theirs'")


@pytest.mark.parametrize("target", ["their_package:absent", "absent_package"])
def test_an_entry_point_that_does_not_load_is_told_without_our_traceback(
    in_own_process, installed, target
):
    outcome = in_own_process("catalogue", env=installed(THEIRS, target))
    assert outcome.code == 0
    assert "euler-maruyama" in outcome.out
    assert outcome.err.startswith("sdebench: ")
    assert "Traceback" not in outcome.err
