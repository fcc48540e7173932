"""Unchanged code is never red: accepted and gated round by round, each with a seed of its own."""

import pytest

from sdebench.gate import accept, gate
from sdebench.project import find_project
from sdebench.regression import Change

pytestmark = pytest.mark.calibration

N_ROUNDS = 6
TABLE = """\
schemes = ["milstein"]
problems = ["gbm", "ramped-noise"]
steps = [4, 8, 16, 32]
"""


@pytest.fixture
def project(tmp_path):
    """Return a function that writes the project's table with a seed and finds the project."""

    def find(seed: int):
        (tmp_path / "sdebench.toml").write_text(f"{TABLE}seed = {seed}\n")
        return find_project(tmp_path)

    return find


def test_what_was_accepted_with_a_seed_is_the_same_bits_with_it(project):
    for seed in range(N_ROUNDS):
        own = project(seed)
        accept(own, "", refuted_too=True)
        found = gate(own)
        assert found.exit_code == 0, found.sentences
        assert {each.change for each in found.rungs} == {Change.SAME_BITS}


def test_under_other_seeds_what_is_propagated_keeps_its_bits_and_no_sample_is_red(project):
    """Each gate has a false-alarm probability of 1e-6."""
    own = project(1)
    accept(own, "")
    for seed in range(2, 2 + N_ROUNDS):
        found = gate(own, seed=seed)
        assert found.exit_code == 0, found.sentences
        for each in found.rungs:
            sampled = each.row.route == "sampled"
            assert each.change is (Change.WITHIN if sampled else Change.SAME_BITS)
