"""The sampled route: every rung of a ladder on the same paths, against the exact solution.

The functionals are drawn on the finest rung and concatenated upward; the exact end point is one
flow over [0, T] from the fully concatenated functionals. Paths come in blocks, each with random
streams of its own (one a functional) made from the seed, the problem and the block's number, and
are reduced in block order: the bits depend on nothing else, least of all on threads.
"""

import hashlib
import threading
import time
from collections.abc import Callable, Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from sdebench.blame import blamed
from sdebench.errors import BadPath
from sdebench.functional import Functional
from sdebench.integrator import Scheme
from sdebench.ladder import Ladder
from sdebench.moments import Moments
from sdebench.problem import Problem
from sdebench.rows import Rows
from sdebench.sde import SDE, Array
from sdebench.wiener import FUNCTIONALS, Noise, Stack, StepLaw, concatenate, in_order

# Paths a block: long enough that two threads seldom wait for the interpreter between two array
# operations, short enough that the arrays of one step stay in a second-level cache.
BLOCK = 16384
BATCH = 512  # paths a batch mean
PARTS = BLOCK // BATCH  # equal parts of a sample, each with its own means
WINDOW = 16  # blocks in flight, so that memory does not grow with the number of paths


@dataclass(frozen=True)
class Plan:
    """What is sampled: a scheme on a problem, over a ladder, from a seed.

    `drawn_for` are functionals that another scheme on the same paths steps by.
    """

    scheme: Scheme
    problem: Problem
    ladder: Ladder
    functionals: tuple[Functional, ...]
    seed: int
    grid_maximum: bool = False
    drawn_for: tuple[str, ...] = ()

    @cached_property
    def names(self) -> tuple[str, ...]:
        """The Wiener functionals that are drawn."""
        return in_order((*self.scheme.noise, *self.problem.flow_noise, *self.drawn_for))

    @cached_property
    def rows(self) -> Rows:
        """Where each averaged quantity stands."""
        return Rows(len(self.ladder.steps), len(self.functionals), self.grid_maximum)

    @cached_property
    def streams(self) -> tuple[int, ...]:
        """The problem's part of every block's seed: equal problems share their paths."""
        p = self.problem
        text = p.name + "".join(f";{n}={p.params[n].hex()}" for n in sorted(p.params))
        digest = hashlib.sha256(text.encode()).digest()
        return tuple(int.from_bytes(digest[i : i + 4], "little") for i in (0, 4))

    @cached_property
    def normals_per_path(self) -> int:
        """Standard normals drawn for one path."""
        return self.ladder.steps[-1] * len(self.names)


@dataclass(frozen=True)
class Tally:
    """What paths add up to: batch moments, and per row the largest and the sum of squares.

    `parts`, shape `(rows, PARTS)`, are sums over blocks of the means of equal parts of a block.
    """

    moments: Moments
    parts: Array
    largest: Array
    squares: Array
    non_finite: Array

    def __add__(self, other: "Tally") -> "Tally":
        return Tally(
            self.moments + other.moments,
            self.parts + other.parts,
            np.maximum(self.largest, other.largest),
            self.squares + other.squares,
            self.non_finite + other.non_finite,
        )


class Sample:
    """A growing sample of a plan; `extend` adds blocks, `tally` is what they add up to."""

    def __init__(self, plan: Plan) -> None:
        self.plan = plan
        self.n_blocks = 0
        self.seconds = 0.0
        self.tally: Tally | None = None
        self._local = threading.local()

    @property
    def n_paths(self) -> int:
        """Paths drawn so far."""
        return self.n_blocks * BLOCK

    def extend(
        self, n_blocks: int, threads: int, on_block: Callable[[], None] = lambda: None
    ) -> None:
        """Draw `n_blocks` more blocks on `threads` threads and add them up in block order."""
        begin = time.perf_counter()
        last = self.n_blocks + n_blocks
        with ThreadPoolExecutor(threads) as pool:
            while self.n_blocks < last:
                window = range(self.n_blocks, min(self.n_blocks + WINDOW, last))
                for tally in pool.map(self._block, window):
                    self.tally = tally if self.tally is None else self.tally + tally
                    self.n_blocks += 1
                    on_block()
        self.seconds += time.perf_counter() - begin

    def _block(self, index: int) -> Tally:
        if not hasattr(self._local, "walk"):
            self._local.walk = Walk(self.plan)
        walk: Walk = self._local.walk
        with np.errstate(all="ignore"):
            return walk.block(index)


class Walk:
    """The working arrays of one thread, and the walk of one block of paths over the ladder."""

    def __init__(self, plan: Plan) -> None:
        self.plan = plan
        steps, problem = plan.ladder.steps, plan.problem
        self.sde = problem.sde.in_calculus(plan.scheme.calculus)
        self.finest = StepLaw(plan.names, problem.horizon / steps[-1], problem.decay_rate)
        self.ratios = (steps[0], *plan.ladder.ratios)
        self.scratch = np.empty(BLOCK)
        self.streams: list[np.random.Generator] = []
        self.rungs: list[RungState] = []

    def block(self, index: int) -> Tally:
        """Return what block `index` adds up to."""
        return self.gathered(index).of([rung.x for rung in self.rungs])

    def gathered(self, index: int) -> "Gathered":
        """Return the batch means of block `index`."""
        plan = self.plan
        seeds = [
            np.random.SeedSequence(
                plan.seed, spawn_key=(*plan.streams, index, FUNCTIONALS.index(name))
            )
            for name in plan.names
        ]
        self.streams = [np.random.Generator(np.random.SFC64(seed)) for seed in seeds]
        self.rungs = [RungState(plan, n) for n in plan.ladder.steps]
        scheme = plan.scheme
        with blamed(f"Scheme '{scheme.label}'", scheme.step, "while sampling"):
            whole = self._join(0)
        return self._gather(whole)

    def _join(self, rung: int) -> Stack:
        """Walk as many steps of `rung` as make one of the rung before, and return that one."""
        joined = self._step(rung)
        for _ in range(1, self.ratios[rung]):
            piece, h = self._step(rung), self.rungs[rung].h
            joined = concatenate(joined, piece, h, self.plan.problem.decay_rate, out=joined)
        return joined

    def _step(self, rung: int) -> Stack:
        """Take one step of `rung`, after the finer steps it is joined from; return its noise."""
        if rung + 1 < len(self.rungs):
            noise = self._join(rung + 1)
        else:
            noise = self.finest.from_normals([s.standard_normal(BLOCK) for s in self.streams])
        self.rungs[rung].advance(self.plan, self.sde, noise, self.scratch)
        return noise

    def _gather(self, whole: Stack) -> "Gathered":
        plan, problem, rows = self.plan, self.plan.problem, self.plan.rows
        start = np.full(BLOCK, problem.start)
        end = problem.exact_step(0.0, start, problem.horizon, Noise(**whole))
        states = [rung.x for rung in self.rungs]
        worst = [rung.worst for rung in self.rungs]
        quadratic = [rung.quadratic for rung in self.rungs]
        functions = [_guarded(f) for f in plan.functionals]
        gathered = Gathered(rows.count, rows.n_measured)
        for row in rows.error_rows(states, worst, end):
            gathered.add(row)
        for row in rows.weak_rows(states, end, functions):
            gathered.add(row)
        for row in rows.control_rows(whole["dw"], quadratic, problem.horizon, plan.ladder.steps):
            gathered.add(row)
        return gathered


class Gathered:
    """Batch means of rows that come one by one, and the tails of the measured ones."""

    def __init__(self, n_rows: int, n_measured: int) -> None:
        self.n_done = 0
        self.batches = np.empty((n_rows, PARTS))
        self.largest = np.empty(n_measured)
        self.squares = np.empty(n_measured)

    def add(self, row: Array) -> None:
        """Add the next row, shape `(paths,)`."""
        np.sum(row.reshape(-1, BATCH), axis=1, out=self.batches[self.n_done])
        if self.n_done < len(self.largest):
            self.largest[self.n_done] = max(row.max(), -row.min()) ** 2
            self.squares[self.n_done] = np.einsum("i,i->", row, row)
        self.n_done += 1

    def of(self, states: Sequence[Array]) -> Tally:
        """Return the tally of a block, with the paths lost on each rung."""
        lost = np.zeros(len(states))
        if not np.all(np.isfinite(self.batches)):
            lost += [BLOCK - np.count_nonzero(np.isfinite(x)) for x in states]
        means = self.batches / BATCH
        return Tally(Moments.of(means), means, self.largest, self.squares, lost)


def stream_digest(seed: int) -> str:
    """Return a digest of the first normals that a seed gives, to tell streams apart."""
    normals = np.random.Generator(np.random.SFC64(np.random.SeedSequence(seed)))
    return hashlib.sha256(normals.standard_normal(64).tobytes()).hexdigest()[:16]


def _guarded(functional: Functional) -> Callable[[Array], Array]:
    """Return a functional whose exceptions are told as its own."""

    def values(x: Array) -> Array:
        with blamed(f"Functional '{functional.name}'", functional.function, "while sampling"):
            return functional(x)

    return values


class RungState:
    """Where a block of paths stands on one rung.

    An integrator that runs whole paths is given all the noise of the rung once it is drawn.
    """

    def __init__(self, plan: Plan, steps: int) -> None:
        self.h = plan.problem.horizon / steps
        whole = plan.scheme.noise if plan.scheme.path is not None else ()
        self.kept = {name: np.empty((steps, BLOCK)) for name in whole}
        self.n_taken = 0
        self.x = np.full(BLOCK, plan.problem.start)
        self.exact = self.x.copy() if plan.grid_maximum else None
        self.worst = np.zeros(BLOCK)
        self.quadratic = np.zeros(BLOCK)

    def advance(self, plan: Plan, sde: SDE, noise: Stack, scratch: Array) -> None:
        """Take the scheme, and on request the exact solution, one step further."""
        t = self.n_taken * self.h
        if plan.scheme.path is None:
            own = Noise(**{name: noise[name] for name in plan.scheme.noise})
            self.x = plan.scheme.step(sde, t, self.x, self.h, own)
        else:
            self._keep(plan.scheme, sde, noise)
        if self.exact is not None:
            self.exact = plan.problem.exact_step(t, self.exact, self.h, Noise(**noise))
            np.maximum(self.worst, np.abs(self.x - self.exact), out=self.worst)
        np.multiply(noise["dw"], noise["dw"], out=scratch)
        self.quadratic += scratch
        self.n_taken += 1

    def _keep(self, scheme: Scheme, sde: SDE, noise: Stack) -> None:
        """Keep the noise of a step, and run the whole path once all of it is there."""
        for name, kept in self.kept.items():
            kept[self.n_taken] = noise[name]
        if self.n_taken + 1 == len(next(iter(self.kept.values()))):
            assert scheme.path is not None
            end = scheme.path(sde, 0.0, self.x, self.h, Noise(**self.kept))
            if getattr(end, "shape", None) != self.x.shape or end.dtype != np.float64:
                raise BadPath(scheme.label, f"{getattr(end, 'shape', type(end).__name__)}")
            self.x = end
