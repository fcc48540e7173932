"""The evidence file: its fields, its schema, and that the same command gives the same bits."""

import copy
import json
import shlex

import jsonschema
import pytest

import sdebench as sb
from tests.known.gbm_errors import gbm_errors

QUICK = ("--looks", "1", "--threads", "1", "--steps", "4,8,16")

ROW = {
    "scheme",
    "problem",
    "kind",
    "route",
    "functional",
    "claimed",
    "order",
    "low",
    "high",
    "exact",
    "verdict",
    "sentence",
    "rungs",
    "cost",
}


@pytest.fixture
def saved(typed, folder):
    """Return a function that measures, saves, and returns the evidence file's content."""

    def run(*words: str) -> dict:
        typed("measure", *words, "--save", "evidence.json")
        return json.loads((folder / "evidence.json").read_text())

    return run


@pytest.fixture
def published_schema(typed) -> dict:
    """Return what `sdebench schema` prints."""
    return json.loads(typed("schema").out)


def same_part(evidence: dict) -> dict:
    """Return what must be the same bits in every run: all but time, place and threads."""
    kept = copy.deepcopy(evidence)
    for name in ("seconds", "created", "threads", "budget", "command"):
        del kept["provenance"][name]
    for row in kept["results"]:
        del row["cost"]
    return kept


def test_the_file_names_its_format(saved):
    assert saved("milstein", "--on", "gbm", *QUICK)["format"] == "sdebench-evidence/1"


def test_every_row_has_the_published_fields(saved):
    evidence = saved("milstein", "--on", "gbm", *QUICK)
    assert [set(row) >= ROW for row in evidence["results"]] == [True] * 11


def test_a_pair_has_contract_one_step_strong_and_weak_rows(saved):
    rows = saved("milstein", "--on", "gbm", *QUICK, "--route", "sampled")["results"]
    assert [(row["kind"], row["route"], row["functional"]) for row in rows] == [
        ("contract", None, None),
        ("one-step", "quadrature", None),
        ("one-step", "quadrature", None),
        ("strong", "sampled", None),
        ("weak", "sampled", "mean"),
        ("weak", "sampled", "second-moment"),
        ("weak", "sampled", "cos"),
    ]


def test_every_propagated_row_is_followed_by_its_check(saved):
    rows = saved("milstein", "--on", "gbm", *QUICK)["results"][3:]
    assert [(r["functional"], r["route"], r["check"], r["counts"]) for r in rows] == [
        (functional, route, route == "sampled", route == "propagated")
        for functional in (None, "mean", "second-moment", "cos")
        for route in ("propagated", "sampled")
    ]


def test_a_row_that_had_to_be_sampled_says_why(saved):
    rows = saved("milstein", "--on", "ramped-noise", *QUICK)["results"][3:]
    assert [(r["route"], r["check"], r["why_sampled"]) for r in rows] == [
        ("sampled", False, "ramped-noise depends on time")
    ] * 4


@pytest.mark.parametrize("route", ["propagated", "sampled"])
def test_a_row_of_a_route_that_was_asked_for_gives_no_reason(saved, route):
    rows = saved("milstein", "--on", "gbm", *QUICK, "--route", route)["results"][3:]
    assert {(r["route"], r["check"], r["why_sampled"]) for r in rows} == {(route, False, None)}


def test_a_propagated_row_costs_no_paths_and_a_check_does(saved):
    rows = saved("milstein", "--on", "gbm", *QUICK)["results"][3:]
    costs = {r["route"]: r["cost"] for r in rows}
    assert (costs["propagated"]["paths"], costs["propagated"]["normals"]) == (0, 0)
    assert (costs["sampled"]["paths"], costs["sampled"]["normals"]) == (32768, 16 * 32768)
    assert costs["propagated"]["seconds"] > 0


def test_a_propagated_row_bounds_the_limit_of_error_over_step_size(saved):
    """Against the closed form at 10^9 steps, where error / h is within some 10^-9 of its limit."""
    rows = saved("milstein", "--on", "gbm", "--route", "propagated", "--threads", "1")["results"]
    (strong,) = [row for row in rows if row["kind"] == "strong"]
    p = sb.problem("gbm").params
    steps = 10**9
    limit = float(gbm_errors("milstein", steps, **p).mean_square.sqrt()) * steps
    constant = strong["error_constant"]
    assert constant["order"] == 1.0
    assert constant["low"] < limit < constant["high"]
    assert constant["low"] < constant["value"] < constant["high"]


def test_scheme_and_problem_are_named_as_typed(saved, traced):
    evidence = saved(traced, "--on", "gbm:sigma=0.20,mu=.3", *QUICK)
    named = {(row["scheme"], row["problem"]) for row in evidence["results"]}
    assert named == {("trace.py:traced", "gbm:sigma=0.20,mu=.3")}


def test_rungs_hold_steps_step_size_error_and_uncertainty(saved):
    evidence = saved("milstein", "--on", "gbm:horizon=2", *QUICK)
    both = [row for row in evidence["results"] if row["kind"] == "strong"]
    assert [row["route"] for row in both] == ["propagated", "sampled"]
    for strong in both:
        assert [(rung["steps"], rung["h"]) for rung in strong["rungs"]] == [
            (4, 0.5),
            (8, 0.25),
            (16, 0.125),
        ]
        assert all(0 < rung["uncertainty"] < rung["error"] for rung in strong["rungs"])


def test_a_strong_rung_holds_the_mean_absolute_error_below_the_root_mean_square(saved):
    evidence = saved("milstein", "--on", "gbm", *QUICK, "--route", "sampled")
    (strong,) = [row for row in evidence["results"] if row["kind"] == "strong"]
    assert all(0 < rung["mean_absolute"] < rung["error"] for rung in strong["rungs"])


def test_weak_errors_keep_their_sign(saved):
    # The mean of Milstein on this GBM, x0 (1 + mu h)^N, is below x0 e^mu; its cosine is above.
    # With 32768 paths each error is over a hundred of its standard errors from zero.
    evidence = saved("milstein", "--on", "gbm", *QUICK)
    signs = {
        row["functional"]: {rung["error"] > 0 for rung in row["rungs"]}
        for row in evidence["results"]
        if row["kind"] == "weak"
    }
    assert signs == {"mean": {False}, "second-moment": {False}, "cos": {True}}


def test_exact_rows_have_no_order(saved):
    evidence = saved("exact-ou", "--on", "ou", *QUICK)
    orders = [
        (row["exact"], row["order"], row["low"], row["high"])
        for row in evidence["results"]
        if row["route"] in ("propagated", "sampled")
    ]
    assert orders == [(True, None, None, None)] * 8


def test_rows_of_one_sample_carry_the_same_cost(saved):
    evidence = saved("milstein", "--on", "gbm", "--on", "ou", *QUICK)
    costs = {
        (row["problem"], json.dumps(row["cost"]))
        for row in evidence["results"]
        if row["route"] == "sampled"
    }
    assert len(costs) == 2


def test_the_grid_maximum_is_a_strong_row_of_its_own(saved):
    evidence = saved("milstein", "--on", "gbm", "--grid-maximum", *QUICK)
    strong = [row for row in evidence["results"] if row["kind"] == "strong"]
    assert [(row["at"], row["route"], row["counts"]) for row in strong] == [
        ("horizon", "propagated", True),
        ("horizon", "sampled", False),
        ("grid", "sampled", True),
    ]
    assert strong[-1]["why_sampled"] == "the largest error over a grid is no function of its end"


def test_a_functional_of_the_user_is_a_weak_row_of_its_own(saved, write):
    write("def cube(x):\n    return x**3\n", "fn.py")
    evidence = saved("milstein", "--on", "gbm", "--functional", "fn.py:cube", *QUICK)
    weak = [row for row in evidence["results"] if row["kind"] == "weak"]
    for check in (False, True):
        functionals = [row["functional"] for row in weak if row["check"] is check]
        assert functionals == ["mean", "second-moment", "cos", "fn.py:cube"]


@pytest.mark.parametrize(
    "words",
    [
        ("milstein", "--on", "gbm"),
        ("milstein", "--on", "gbm:mu=2,sigma=1"),
        ("exact-ou", "--on", "ou"),
        ("exact-ou", "--on", "gbm"),
        ("milstein", "--on", "ramped-noise"),
        ("milstein", "--on", "ramped-noise", "--route", "propagated"),
        ("my.py:idle", "--on", "ou"),
        ("my.py:bold", "--on", "gbm", "--grid-maximum"),
    ],
    ids=[
        "inexact",
        "heavy-tail",
        "exact",
        "not-applicable",
        "sampled",
        "not-propagated",
        "broken-contract",
        "refuted",
    ],
)
def test_every_kind_of_evidence_is_valid_under_the_published_schema(
    saved, write, published_schema, words
):
    write(
        "@scheme(strong=1.0)\ndef bold(sde, t, x, h, noise):\n"
        "    return euler(sde, t, x, h, noise)\n\n\n"
        "@scheme(strong=1.0)\ndef idle(sde, t, x, h, noise):\n    return x\n"
    )
    jsonschema.Draft202012Validator(published_schema).validate(saved(*words, *QUICK))


@pytest.mark.parametrize(
    ("place", "value"),
    [
        (("format",), "sdebench-evidence/0"),
        (("verdict",), "perhaps"),
        (("results", 3, "kind"), "middling"),
        (("results", 3, "rungs", 0, "steps"), 4.5),
        (("results", 3, "order"), "one"),
        (("provenance", "seed"), None),
    ],
    ids=lambda value: "-".join(map(str, value)) if isinstance(value, tuple) else "",
)
def test_the_published_schema_rejects_a_spoiled_file(saved, published_schema, place, value):
    evidence = saved("milstein", "--on", "gbm", *QUICK)
    spoiled = evidence
    for key in place[:-1]:
        spoiled = spoiled[key]
    spoiled[place[-1]] = value
    with pytest.raises(jsonschema.ValidationError):
        jsonschema.Draft202012Validator(published_schema).validate(evidence)


def test_the_published_schema_is_itself_valid_json_schema(published_schema):
    jsonschema.Draft202012Validator.check_schema(published_schema)


def test_the_same_seed_gives_the_same_bits_on_any_number_of_threads(saved):
    words = ("milstein", "--on", "gbm", "--steps", "4,8,16", "--looks", "2")
    one, two = (saved(*words, "--threads", n) for n in "12")
    assert same_part(one) == same_part(two)


def test_another_seed_gives_other_bits(saved):
    one, two = (saved("milstein", "--on", "gbm", *QUICK, "--seed", n) for n in "12")
    assert same_part(one)["results"] != same_part(two)["results"]


def test_the_same_seed_gives_the_same_bits_in_another_process(saved, in_own_process, folder):
    here = saved("milstein", "--on", "gbm", *QUICK)
    in_own_process("measure", "milstein", "--on", "gbm", *QUICK, "--save", "other.json")
    assert same_part(json.loads((folder / "other.json").read_text())) == same_part(here)


def test_a_problem_gives_the_same_bits_whatever_is_measured_beside_it(saved):
    alone = saved("milstein", "--on", "gbm", *QUICK)
    beside = saved("euler-maruyama", "milstein", "--on", "ou", "--on", "gbm", *QUICK)
    errors = [
        [
            [rung["error"] for rung in row["rungs"]]
            for row in evidence["results"]
            if row["scheme"] == "milstein" and row["problem"] == "gbm"
        ]
        for evidence in (alone, beside)
    ]
    assert errors[0] == errors[1]


@pytest.mark.parametrize(
    "words",
    [
        ("milstein", "--on", "gbm", "--looks", "2", "--steps", "4,8,16"),
        ("milstein", "--on", "gbm", "--budget", "0.3", "--steps", "4,8,16"),
        ("euler-maruyama", "exact-ou", "--on", "ou:mean=0.1", "--steps", "2,4,8,16"),
        (
            *("trace.py:traced", "--on", "gbm:sigma=0.20", "--seed", "9", "--tolerance", "0.05"),
            *("--confidence", "0.9", "--grid-maximum", "--functional", "trace.py:cube"),
            *("--looks", "1", "--steps", "4,8,16"),
        ),
    ],
    ids=["looks", "budget", "until-decided", "every-option"],
)
def test_the_recorded_command_repeats_the_run_to_the_bit(saved, traced, folder, words):
    with open(folder / "trace.py", "a") as file:
        file.write("\n\ndef cube(x):\n    return x**3\n")
    first = saved(*words, "--threads", "1")
    program, command, *again = shlex.split(first["provenance"]["command"])
    assert (program, command) == ("sdebench", "measure")
    assert same_part(saved(*again)) == same_part(first)


def test_the_recorded_command_repeats_a_run_from_python_to_the_bit(saved):
    # A parameter of 17 digits: a command that shortens it names another problem.
    problem = sb.problem("gbm", mu=1 / 3)
    first = sb.measure("milstein", on=problem, steps=(4, 8, 16), looks=1, threads=1)
    _, _, *again = shlex.split(first.provenance.command)
    errors = [rung.error for row in first.results for rung in row.rungs]
    repeated = saved(*again)
    assert [rung["error"] for row in repeated["results"] for rung in row["rungs"]] == errors


def test_a_budget_is_recorded_and_the_command_holds_the_looks_that_were_taken(saved):
    evidence = saved("milstein", "--on", "gbm", "--budget", "0.2", "--steps", "4,8,16")
    looks = evidence["provenance"]["looks"]
    assert evidence["provenance"]["budget"] == float("0.2")
    assert f"--looks {looks}" in evidence["provenance"]["command"]
    assert "--budget" not in evidence["provenance"]["command"]


def test_refuted_evidence_is_saved_too(typed, write, folder):
    write(
        "@scheme(strong=1.0)\ndef bold(sde, t, x, h, noise):\n"
        "    return euler(sde, t, x, h, noise)\n"
    )
    outcome = typed("measure", "my.py:bold", "--on", "gbm", *QUICK, "--save", "evidence.json")
    assert outcome.code == 1
    assert json.loads((folder / "evidence.json").read_text())["verdict"] == "refuted"


def test_a_run_that_fails_leaves_the_old_file_as_it_was(typed, write, folder):
    (folder / "evidence.json").write_text("old")
    write("@scheme(strong=1.0)\ndef step(sde, t, x, h, noise):\n    return x / (1 // 0)\n")
    outcome = typed("measure", "my.py:step", "--on", "gbm", *QUICK, "--save", "evidence.json")
    assert outcome.code == 2
    assert (folder / "evidence.json").read_text() == "old"
    assert sorted(p.name for p in folder.glob("evidence*")) == ["evidence.json"]


def test_a_reader_of_the_old_file_keeps_it_whole(saved, folder):
    (folder / "evidence.json").write_text("old")
    with open(folder / "evidence.json") as reader:
        saved("milstein", "--on", "gbm", *QUICK)
        assert reader.read() == "old"


def test_a_new_file_takes_the_place_of_the_old_one(saved, folder):
    (folder / "evidence.json").write_text("old" * 100_000)
    assert saved("milstein", "--on", "gbm", *QUICK)["format"] == "sdebench-evidence/1"
