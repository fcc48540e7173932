"""The pytest plugin of sdebench; light, since sdebench itself is imported when it is used.

It stands beside the package: to import a module of a package imports the package first.
"""

from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest


def pytest_addoption(parser: pytest.Parser) -> None:
    """Add the option that collects what a project guards."""
    parser.getgroup("sdebench").addoption(
        "--guarded-claims",
        action="store_true",
        help="also test each claim of the schemes that [tool.sdebench] lists",
    )


@pytest.fixture(scope="session")
def guarded_options(pytestconfig: pytest.Config) -> dict[str, Any]:
    """The options of the project's [tool.sdebench] that `sdebench.measure` takes."""
    from sdebench.project import find_project

    return find_project(pytestconfig.rootpath).options


@pytest.fixture
def assert_converges(request: pytest.FixtureRequest) -> Callable[..., Any]:
    """`sdebench.testing.assert_converges`, with the project's options if it has a table."""
    from sdebench.errors import NoProject
    from sdebench.testing import assert_converges

    try:
        options = request.getfixturevalue("guarded_options")
    except NoProject:
        options = {}

    def assert_with_options(*arguments: Any, **own: Any) -> Any:
        __tracebackhide__ = True
        return assert_converges(*arguments, **{**options, **own})

    return assert_with_options


@pytest.hookimpl(tryfirst=True)
def pytest_collection_modifyitems(
    session: pytest.Session, config: pytest.Config, items: list[pytest.Item]
) -> None:
    """Add an item for each claim that the project guards, if asked to."""
    if config.getoption("guarded_claims"):
        from sdebench.errors import SdebenchError
        from sdebench.project import find_project

        try:
            project = find_project(config.rootpath)
            place = GuardedProject.from_parent(session, path=project.file, project=project)
            items.extend(place.collect())
        except SdebenchError as fault:
            raise pytest.UsageError(f"sdebench: {fault}") from None


class GuardedProject(pytest.File):
    """The file of a project whose claims are tested."""

    def __init__(self, *arguments: Any, project: Any, **more: Any) -> None:
        super().__init__(*arguments, **more)
        self.project = project
        self.measured: dict[tuple[str, str], Any] = {}

    def collect(self) -> "list[GuardedClaim]":
        """Return an item for each claim that applies."""
        return [
            GuardedClaim.from_parent(
                self, name=f"{s.label} on {p.label}, {kind}", pair=(s, p, kind)
            )
            for s, p, kind in self.project.claims()
        ]

    def evidence(self, scheme: Any, problem: Any) -> Any:
        """Return the evidence on a scheme and a problem, measured once a worker."""
        from sdebench import measure

        key = scheme.label, problem.label
        if key not in self.measured:
            self.measured[key] = measure(scheme, on=problem, **self.project.options)
        return self.measured[key]


class GuardedClaim(pytest.Item):
    """One claim of one scheme on one problem."""

    def __init__(self, *arguments: Any, pair: Any, **more: Any) -> None:
        super().__init__(*arguments, **more)
        self.pair = pair

    def runtest(self) -> None:
        """Fail with the bench's sentence and tables unless the claim is supported."""
        from sdebench.testing import explained

        scheme, problem, kind = self.pair
        parent = self.parent
        assert isinstance(parent, GuardedProject)
        evidence = parent.evidence(scheme, problem)
        for claim in evidence.claims:
            if claim.kind in (kind, "contract") and claim.verdict.value != "supported":
                raise NotSupported(explained(evidence, claim))

    def repr_failure(self, excinfo: pytest.ExceptionInfo[BaseException], style: Any = None) -> Any:
        """Return the sentence and the tables alone, where that is what failed."""
        if isinstance(excinfo.value, NotSupported):
            return str(excinfo.value)
        return super().repr_failure(excinfo, style)

    def reportinfo(self) -> tuple[Path, int | None, str]:
        """Return where the item stands, and its name."""
        return self.path, None, self.name


class NotSupported(AssertionError):
    """A claim that its evidence does not support."""
