"""A step that breaks its contract is refuted: the law, the input, and what to change."""

import json

import pytest

ONCE = ("--looks", "1", "--threads", "1")

BROKEN = {
    "wrong-shape": ("return euler(sde, t, x, h, noise)[:, None]", "returns shape", "the shape"),
    "wrong-length": ("return euler(sde, t, x, h, noise)[:-1]", "returns shape", "the shape"),
    "wrong-dtype": (
        "return euler(sde, t, x, h, noise).astype(np.float32)",
        "of float32",
        "dtype of x",
    ),
    "scalar": ("return float(euler(sde, t, x, h, noise)[0])", "returns a float", "return an array"),
    "list": ("return list(euler(sde, t, x, h, noise))", "returns a list", "return an array"),
    "none": ("euler(sde, t, x, h, noise)", "returns", "return an array"),
    "writes-into-x": (
        "x += sde.drift(t, x) * h + sde.diffusion(t, x) * noise.dw\n    return x",
        "writes into its input x",
        "make new arrays",
    ),
    "writes-into-dw": (
        "noise.dw *= sde.diffusion(t, x)\n    return x + sde.drift(t, x) * h + noise.dw",
        "writes into its input noise.dw",
        "make new arrays",
    ),
    "not-deterministic": (
        "return euler(sde, t, x, h, noise) + 1e-9 * np.random.standard_normal(x.shape)",
        "another result when called again",
        "draw no random numbers",
    ),
    "remembers-its-last-call": (
        "MEMORY.append(0)\n    return euler(sde, t, x, h, noise) + 1e-9 * len(MEMORY) * h",
        "another result when called again",
        "keep nothing from one call to the next",
    ),
    "shares-a-working-array": (
        "work = WORK.setdefault(x.shape, np.empty_like(x))\n"
        "    np.multiply(sde.diffusion(t, x), noise.dw, out=work)\n"
        "    time.sleep(1e-3)\n"
        "    return x + sde.drift(t, x) * h + work",
        "overwrites what another call of it has made",
        "share no working arrays",
    ),
    "mixes-paths": (
        "return euler(sde, t, x, h, noise) + 1e-9 * h * x.mean()",
        "one path depend on others",
        "element-wise",
    ),
    "mixes-neighbours": (
        "return euler(sde, t, x, h, noise) + 1e-9 * h * np.roll(x, 1)",
        "one path depend on others",
        "element-wise",
    ),
    "ignores-its-noise": (
        "return x + sde.drift(t, x) * h",
        "same result whatever its noise",
        "use the functionals in `noise`",
    ),
    "brings-its-own-noise": (
        "z = np.random.default_rng(1).standard_normal()\n"
        "    return x + sde.drift(t, x) * h + sde.diffusion(t, x) * np.sqrt(h) * z",
        "same result whatever its noise",
        "no other source of randomness",
    ),
    "nan": (
        "return euler(sde, t, x, h, noise) + 0 * np.sqrt(noise.dw)",
        "gives nan for finite input",
        "inside their domain",
    ),
    "infinity": (
        "return np.full_like(x, np.inf)",
        "gives inf for finite input",
        "inside their domain",
    ),
    "moves-in-no-time": (
        "return euler(sde, t, x, h, noise) + 1e-3",
        "moves X by 0.001",
        "vanish with h and the noise",
    ),
}


@pytest.fixture(params=BROKEN)
def broken(request, typed, write):
    """Return what a broken step gives: the outcome, the evidence, the law and the mending."""
    body, law, mend = BROKEN[request.param]
    write(
        "import time\n\nMEMORY, WORK = [], {}\n\n\n@scheme(strong=0.5, weak=1.0)\n"
        f"def step(sde, t, x, h, noise):\n    {body}\n"
    )
    words = ("--on", "gbm", *ONCE, "--save", "evidence.json")
    outcome = typed("measure", "my.py:step", *words)
    with open("evidence.json") as file:
        return outcome, json.load(file), law, mend


def test_a_broken_contract_is_a_refuted_claim_with_exit_code_1(broken):
    outcome, evidence, _, _ = broken
    assert (outcome.code, outcome.err) == (1, "")
    assert evidence["verdict"] == "refuted"


def test_a_broken_contract_is_told_in_one_sentence(broken):
    outcome, evidence, law, mend = broken
    (sentence,) = [c["sentence"] for c in evidence["claims"] if c["kind"] == "contract"]
    broken_part, mending = sentence.split("; ", 1)
    assert law in broken_part
    assert mend in mending
    assert "at t=" in broken_part
    assert "h=" in broken_part
    assert f"my.py:step on gbm, contract: refuted. {sentence}\n" in outcome.out


def test_no_order_is_measured_where_the_contract_is_broken(broken):
    _, evidence, _, _ = broken
    assert [row["kind"] for row in evidence["results"]] == ["contract"]
    orders = [c["order"] for c in evidence["claims"]]
    assert orders == [None, None, None]
