"""Speed and memory, each as a ratio of two things measured in one run.

    python tests/benchmarks/run.py

Times are medians of ratios over alternating repetitions, since machines drift. Not part of pass
or fail; the aim stands beside each figure.
"""

import statistics
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from dataclasses import replace
from pathlib import Path

import numpy as np

import sdebench as sb
from sdebench.discovery import find_problem, find_scheme
from sdebench.functional import STANDARD
from sdebench.ladder import DEFAULT, Ladder
from sdebench.sample import BLOCK, Plan, Sample

REPEATS = 7
N_BLOCKS = 16


def main() -> None:
    """Print every benchmark."""
    for name, aim in (("euler-maruyama", 2.0), ("milstein", 2.5)):
        for threads in (1, 2):
            sampled_ladder(name, aim, threads)
    sampled_ladder("euler-maruyama", 2.0, 1, Ladder((8, 16, 32, 64, 128, 256)))
    hand_written("euler-maruyama")
    hand_written("milstein")
    speed_up("euler-maruyama")
    speed_up("milstein")
    controls()
    for name in ("euler-maruyama", "milstein"):
        for problem in ("gbm", "arctan"):
            propagation(name, problem)
    default_run()
    report()
    memory()
    start_up()
    assertion()
    plugin()
    other_languages()


def sampled_ladder(name: str, aim: float, threads: int, ladder: Ladder = DEFAULT) -> None:
    """Whole time of a ladder over the time of drawing the same normals."""
    plan = replace(plan_of(name), ladder=ladder)
    still = replace(plan, scheme=replace(plan.scheme, step=_stay))
    whole, overhead = [], []
    for _ in range(REPEATS):
        normals = seconds(lambda: draw_normals(plan, threads))
        whole.append(seconds(lambda: sample(plan, threads)) / normals)
        overhead.append(seconds(lambda: sample(still, threads)) / normals - 1)
    what = f"{name} on gbm to {ladder.steps[-1]} steps, {threads} thread(s)"
    show(f"{what}: whole / normals", whole, f"at most {aim}")
    show(f"{what}: own overhead / normals", overhead, "at most 0.3")


def hand_written(name: str) -> None:
    """The bench over a vectorised script for the same rungs, paths and functionals."""
    plan = plan_of(name)
    ratios = [
        seconds(lambda: sample(plan, 1)) / seconds(lambda: script(plan, name == "milstein"))
        for _ in range(REPEATS)
    ]
    show(f"{name} on gbm, 1 thread: bench / hand-written NumPy script", ratios, "below 1")


def speed_up(name: str) -> None:
    """One thread over two."""
    plan = plan_of(name)
    ratios = [
        seconds(lambda: sample(plan, 1)) / seconds(lambda: sample(plan, 2)) for _ in range(REPEATS)
    ]
    show(f"{name} on gbm: speed-up from 1 to 2 threads", ratios, "1.8")


def controls() -> None:
    """Variance of the weak error of the mean without the controls over that with them."""
    for name in ("euler-maruyama", "milstein"):
        taken = sample(plan_of(name), 2)
        assert taken.tally is not None
        rows = taken.plan.rows
        finest = [rows.weak(0)[-1]]
        plain = taken.tally.moments.estimate(finest).covariance[0, 0]
        adjusted = taken.tally.moments.adjusted(finest, list(rows.controls)).covariance[0, 0]
        print(f"{name} on gbm, 64 steps: paths saved by the controls: {plain / adjusted:.0f} times")


def propagation(name: str, on: str) -> None:
    """Strong and weak errors to 4096 steps, propagated, over plain Monte Carlo for one weak order.

    Plain Monte Carlo estimates E X^h_T with independent paths on each of 4 … 64 steps, and compares
    with the exact mean. Its time is that for an interval of the local order at 32 and 64 steps as
    narrow as the propagated one, from the width that a run of affordable size has: a width shrinks
    with the square root of the paths.
    """
    ladder = (4, 8, 16, 32, 64, 128, 256, 512, 1024, 2048, 4096)
    options = {"on": on, "threads": 1}
    ratios = []
    for _ in range(3):
        propagated = seconds(lambda: sb.measure(name, route="propagated", steps=ladder, **options))
        evidence = sb.measure(name, route="propagated", steps=DEFAULT.steps, **options)
        row = next(r for r in evidence.results if r.functional == "mean")
        wanted = row.high - row.low
        found: list[float] = []
        plain = seconds(lambda found=found: found.extend(plain_width(name, on)))
        ratios.append(propagated / (plain * (found[0] / wanted) ** 2))
    what = (
        f"{name} on {on}: propagated, all to 4096 steps / plain Monte Carlo, one weak order to 64"
    )
    print(f"{what}: {statistics.median(ratios):.1e}   (aim: at most 1e-3)")


def plain_width(name: str, on: str) -> list[float]:
    """Return the width of the 95% interval of the weak order of the mean at 32 and 64 steps."""
    scheme, problem = find_scheme(name), find_problem(on)
    law = problem.law(problem.params)
    exact, _ = law.expectation(lambda x: x)
    rng = np.random.Generator(np.random.SFC64(1))
    n_paths = 2**18
    errors, spreads = [], []
    for steps in DEFAULT.steps:
        h, x = problem.horizon / steps, np.full(n_paths, problem.start)
        for k in range(steps):
            noise = sb.Noise(dw=rng.standard_normal(n_paths) * h**0.5)
            x = scheme(problem.sde, k * h, x, h, noise)
        errors.append(float(x.mean()) - exact)
        spreads.append(float(x.std()) / n_paths**0.5)
    # The population errors are those of a power law from the coarsest rung, whose error is seen.
    sizes = [abs(errors[0]) * DEFAULT.steps[0] / n for n in DEFAULT.steps[-2:]]
    relative = [s / size for s, size in zip(spreads[-2:], sizes, strict=True)]
    return [2 * 1.96 * float(np.hypot(*relative)) / float(np.log(2))]


def default_run() -> None:
    """All schemes on all problems by default, over sampling alone on the same and on three."""
    three = ["gbm", "ou", "ramped-noise"]
    same, before = [], []
    for _ in range(3):
        whole = seconds(lambda: sb.measure())
        same.append(whole / seconds(lambda: sb.measure(route="sampled")))
        before.append(whole / seconds(lambda: sb.measure(on=three, route="sampled")))
    show("default run / the same by sampling alone", same, "1")
    show("default run / sampling alone on gbm, ou, ramped-noise", before, "15 pairs to 7: 2.1")


def report() -> None:
    """Writing the report of the default run, over importing Matplotlib."""
    with tempfile.TemporaryDirectory() as folder:
        evidence = f"{folder}/evidence.json"
        sb.measure(looks=1).save(evidence)
        written = [sys.executable, "-m", "sdebench", "report", evidence, "--out", f"{folder}/out"]
        plain = [sys.executable, "-c", "import matplotlib.figure"]
        times = [(run(written), run(plain)) for _ in range(3)]
    show("report of the default run / import matplotlib", [a / b for a, b in times], "3 s")
    print(f"report of the default run: {min(a for a, _ in times):.1f} s   (aim: 3)")


def memory() -> None:
    """Peak memory at ten million paths over that at a hundred thousand."""
    small, large = (peak_memory(n) for n in (10**5, 10**7))
    print(f"peak memory, 1e7 paths / 1e5 paths: {large / small:.3f}   (aim: 1)")


def start_up() -> None:
    """`sdebench --help` over importing NumPy."""
    help_page = [sys.executable, "-m", "sdebench", "--help"]
    numpy = [sys.executable, "-c", "import numpy"]
    ratios = [run(help_page) / run(numpy) for _ in range(2 * REPEATS)]
    show("sdebench --help / python -c 'import numpy'", ratios, "2")


def plan_of(name: str) -> Plan:
    """Return the default plan of a scheme on GBM."""
    return Plan(find_scheme(name), find_problem("gbm"), DEFAULT, STANDARD, seed=1)


def sample(plan: Plan, threads: int) -> Sample:
    """Draw a sample of the benchmark's size."""
    taken = Sample(plan)
    taken.extend(N_BLOCKS, threads)
    return taken


def draw_normals(plan: Plan, threads: int) -> None:
    """Draw as many normals as a sample, in arrays of the same size, and nothing else."""

    def block(index: int) -> None:
        stream = np.random.Generator(np.random.SFC64(index))
        array = np.empty(BLOCK)
        for _ in range(plan.normals_per_path):
            stream.standard_normal(out=array)

    with ThreadPoolExecutor(threads) as pool:
        list(pool.map(block, range(N_BLOCKS)))


def script(plan: Plan, milstein: bool) -> list[float]:
    """What a practitioner writes: all increments at once, a loop a rung, means and slopes."""
    p = plan.problem.params
    mu, sigma, x0, horizon = p["mu"], p["sigma"], p["x0"], p["horizon"]
    n_paths, finest = N_BLOCKS * BLOCK, plan.ladder.steps[-1]
    rng = np.random.default_rng(1)
    dw = rng.normal(0.0, np.sqrt(horizon / finest), size=(finest, n_paths))
    exact = x0 * np.exp((mu - sigma**2 / 2) * horizon + sigma * dw.sum(axis=0))
    results = []
    for steps in plan.ladder.steps:
        h = horizon / steps
        coarse = dw.reshape(steps, finest // steps, n_paths).sum(axis=1)
        x = np.full(n_paths, x0)
        for w in coarse:
            b = sigma * x
            change = mu * x * h + b * w
            if milstein:
                change += 0.5 * sigma * b * (w**2 - h)
            x = x + change
        results.append(float(np.sqrt(np.mean((x - exact) ** 2))))
        for f in (lambda y: y, lambda y: y**2, np.cos):
            results.append(float(np.mean(f(x) - f(exact))))
    return results


def _stay(sde: sb.SDE, t: float, x: sb.Array, h: float, noise: sb.Noise) -> sb.Array:
    """A step that costs nothing: what is left is the bench's own work."""
    return x


def seconds(work: Callable[[], object]) -> float:
    """Return how long `work` takes."""
    begin = time.perf_counter()
    work()
    return time.perf_counter() - begin


def run(command: list[str]) -> float:
    """Return how long a command takes."""
    return seconds(lambda: subprocess.run(command, check=True, capture_output=True))


def peak_memory(n_paths: int) -> float:
    """Return the peak resident memory of a process that samples so many paths."""
    code = (
        "import resource; from tests.benchmarks.run import plan_of; "
        "from sdebench.sample import BLOCK, Sample; s = Sample(plan_of('euler-maruyama')); "
        f"s.extend(-(-{n_paths} // BLOCK), 2); "
        "print(resource.getrusage(resource.RUSAGE_SELF).ru_maxrss)"
    )
    command = [sys.executable, "-c", code]
    return float(subprocess.run(command, check=True, capture_output=True, text=True).stdout)


def show(what: str, ratios: list[float], aim: str) -> None:
    """Print the median of some ratios with their range and the aim."""
    middle = statistics.median(ratios)
    print(f"{what}: {middle:.2f} ({min(ratios):.2f} to {max(ratios):.2f})   (aim: {aim})")


def assertion() -> None:
    """One assertion on one scheme, after the imports, over importing NumPy."""
    from sdebench.testing import assert_converges

    def euler(sde, t, x, h, noise):
        return x + sde.drift(t, x) * h + sde.diffusion(t, x) * noise.dw

    def once() -> None:
        assert_converges(euler, on="gbm", strong=0.5, weak=1.0)

    once()
    times = [(seconds(once), run([sys.executable, "-c", "import numpy"])) for _ in range(REPEATS)]
    show("assert_converges on gbm / import numpy", [a / b for a, b in times], "0.3 s")
    print(f"assert_converges on gbm: {statistics.median(a for a, _ in times):.3f} s   (aim: 0.3)")


def plugin() -> None:
    """Loading the plugin in a process that has pytest, which is all that it adds to a project.

    The time of a whole collection drifts by more than that from one run to the next.
    """
    code = (
        "import pytest, time; begin = time.perf_counter(); import sdebench_pytest; "
        "print(time.perf_counter() - begin)"
    )
    words = [sys.executable, "-c", code]
    added = [
        float(subprocess.run(words, check=True, capture_output=True, text=True).stdout)
        for _ in range(REPEATS)
    ]
    plain = run([sys.executable, "-c", "import pytest"])
    show("loading the plugin / importing pytest", [each / plain for each in added], "20 ms")
    print(f"added by the plugin: {statistics.median(added) * 1e3:.2f} ms   (aim: 20)")


def other_languages() -> None:
    """Sampling Milstein on gbm in C and in a program of its own, over the same in NumPy."""
    sources = Path(__file__).parents[1] / "foreign"
    with tempfile.TemporaryDirectory() as folder:
        library = f"{folder}/libmilstein.so"
        words = ["gcc", "-O2", "-shared", "-fPIC", str(sources / "milstein.c"), "-o", library]
        subprocess.run(words, check=True)
        own = {"params": ("mu", "sigma"), "strong": 1.0, "weak": 1.0}
        in_c = sb.library(library, "milstein_path", **own)
        alone = sb.program([sys.executable, str(sources / "milstein_program.py")], **own)
        numpy = plan_of("milstein")
        ratios: dict[str, list[float]] = {"C": [], "a program": []}
        for _ in range(REPEATS):
            plain = seconds(lambda: sample(numpy, 1))
            for name, scheme in (("C", in_c), ("a program", alone)):
                other = replace(numpy, scheme=scheme)
                ratios[name].append(seconds(lambda other=other: sample(other, 1)) / plain)
    show("milstein on gbm in C / in NumPy", ratios["C"], "at most 1.2")
    show("milstein on gbm in a program / in NumPy", ratios["a program"], "at most 2")


if __name__ == "__main__":
    main()
