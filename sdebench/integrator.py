"""The scheme: a pure one-step map, the functionals it needs, the orders it claims."""

import inspect
import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Literal, Protocol

from sdebench.errors import BadClaim, BadOption, BadStep, UnknownName
from sdebench.sde import SDE, Array, Calculus, NoiseKind
from sdebench.wiener import FUNCTIONALS, Noise

ClaimKind = Literal["strong", "weak"]


class Step(Protocol):
    """The signature of a one-step map: X_{t+h} from X_t = x, shape `(paths,)`."""

    __name__: str

    def __call__(self, sde: SDE, t: float, x: Array, h: float, noise: Noise) -> Array:
        """Return X_{t+h}, shape `(paths,)`."""


@dataclass(frozen=True)
class Claim:
    """A claimed lower bound on the order of convergence, strong or weak."""

    kind: ClaimKind
    order: float


@dataclass(frozen=True)
class Scheme:
    """A registered step with its name, its claims and the functionals it needs.

    Calling it calls the step. `strong_additive` is the strong claim on additive noise, where it
    differs from `strong`. An integrator that runs whole paths has `path`, and its step is a path of
    one; it may need parameters of certain names, `params`, that a problem must have.
    """

    name: str
    step: Callable[[SDE, float, Array, float, Noise], Array]
    strong: float | None
    weak: float | None
    strong_additive: float | None
    noise: tuple[str, ...]
    calculus: Calculus
    module: str
    doc: str
    typed: str | None = None
    path: Callable[[SDE, float, Array, float, Noise], Array] | None = None
    params: tuple[str, ...] = ()

    def __call__(self, sde: SDE, t: float, x: Array, h: float, noise: Noise) -> Array:
        """Return the step's result."""
        return self.step(sde, t, x, h, noise)

    @property
    def label(self) -> str:
        """The name as the user typed it."""
        return self.typed or self.name

    def claims(self, noise_kind: NoiseKind) -> list[Claim]:
        """Return the claims that hold on a class of noise."""
        strong = self.strong
        if noise_kind == "additive" and self.strong_additive is not None:
            strong = self.strong_additive
        claims = [Claim("strong", strong)] if strong is not None else []
        return claims + ([Claim("weak", self.weak)] if self.weak is not None else [])


def scheme(
    step: object = None,
    /,
    *,
    strong: float | None = None,
    weak: float | None = None,
    name: str | None = None,
    strong_additive: float | None = None,
    noise: Sequence[str] = ("dw",),
    calculus: Calculus = "ito",
) -> Callable[[Step], Scheme]:
    """Return a decorator that makes a step function a scheme.

    `strong`, `weak` are claimed orders (positive numbers; one may be left out), `strong_additive`
    the strong order on additive noise if it is another one. `noise` names the functionals the
    step reads, among "dw", "dz", "decayed". `calculus` "stratonovich" asks for the converted
    drift. The name is the function's, with hyphens, unless given. Raises `BadClaim` on an order
    that is not a positive number, `UnknownName` on an unknown functional.

    >>> @scheme(strong=0.5, weak=1.0)
    ... def plain_euler(sde, t, x, h, noise):
    ...     return x + sde.drift(t, x) * h + sde.diffusion(t, x) * noise.dw
    >>> plain_euler.name
    'plain-euler'
    """

    if step is not None:
        bare = str(getattr(step, "__name__", step))
        raise BadClaim(bare, "strong", None, "write @scheme(strong=..., weak=...) above the step")

    def decorate(step: Step) -> Scheme:
        key = name or getattr(step, "__name__", type(step).__name__).replace("_", "-")
        orders = {"strong": strong, "weak": weak, "strong_additive": strong_additive}
        _check_signature(key, step)
        for claim, order in orders.items():
            _check_order(key, claim, order)
        if strong is None and weak is None and strong_additive is None:
            raise BadClaim(key, "strong", None, "it claims nothing; give strong=, weak= or both")
        wanted = (noise,) if isinstance(noise, str) else tuple(noise)
        for functional in wanted:
            if functional not in FUNCTIONALS:
                raise UnknownName("Wiener functional", str(functional), FUNCTIONALS)
        if calculus not in ("ito", "stratonovich"):
            raise BadOption("calculus", repr(calculus), "it is 'ito' or 'stratonovich'")
        return Scheme(
            name=key,
            step=step,
            strong=None if strong is None else float(strong),
            weak=None if weak is None else float(weak),
            strong_additive=None if strong_additive is None else float(strong_additive),
            noise=wanted,
            calculus=calculus,
            module=getattr(step, "__module__", "") or "",
            doc=(getattr(step, "__doc__", "") or "").strip(),
        )

    return decorate


def _check_signature(key: str, step: Callable[..., object]) -> None:
    if not callable(step):
        raise BadStep(key, f"is a {type(step).__name__}, not a function")
    try:
        signature = inspect.signature(step)
    except ValueError:  # a function without one, such as a built-in
        return
    try:
        signature.bind("sde", "t", "x", "h", "noise")
    except TypeError:
        raise BadStep(key, f"takes {signature}") from None


def _check_order(key: str, claim: str, order: object) -> None:
    if order is None:
        return
    if isinstance(order, bool) or not isinstance(order, int | float):
        raise BadClaim(key, claim, order, "an order is a number, such as 0.5 or 1.0")
    if not (math.isfinite(order) and order > 0):
        raise BadClaim(key, claim, order, "an order is a positive, finite number")
