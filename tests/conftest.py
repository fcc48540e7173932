"""Nothing is shared but the registries: what is registered is what is tested."""

import pytest

import sdebench as sb
from sdebench import discovery

collect_ignore = ["foreign"]  # integrators that tests run: a program reads its standard input


def pytest_generate_tests(metafunc: pytest.Metafunc) -> None:
    """Give tests that ask for `scheme` or `problem` every registered one, by name."""
    registries = {"scheme": discovery.schemes, "problem": discovery.problems}
    for name, registry in registries.items():
        if name in metafunc.fixturenames:
            found = registry()
            metafunc.parametrize(name, list(found.values()), ids=list(found))


@pytest.fixture
def pair_applies():
    """Return whether a problem offers every functional that a scheme steps by."""

    def applies(scheme: sb.Scheme, problem: sb.Problem) -> bool:
        return set(scheme.noise) <= set(problem.functionals)

    return applies
