"""The problem: an SDE plus what makes it a reference, its exact flow and its exact law."""

import math
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass, field, replace
from functools import cached_property, partial
from types import MappingProxyType

import numpy as np

from sdebench.coordinate import STATE, Coordinate
from sdebench.errors import BadParameter, UnknownName
from sdebench.integrator import Scheme
from sdebench.quadrature import normal_expectation
from sdebench.sde import SDE, Array, NoiseKind
from sdebench.wiener import FUNCTIONALS, Noise

Params = Mapping[str, float]


@dataclass(frozen=True)
class Parameter:
    """A parameter's default value and the open interval `(above, below)` that it must lie in.

    `why` completes the sentence shown for a value outside of it.
    """

    default: float
    above: float = -math.inf
    below: float = math.inf
    why: str = ""

    def check(self, problem: str, name: str, value: object) -> float:
        """Return `value` as a float, or raise `BadParameter`."""
        if isinstance(value, bool) or not isinstance(value, int | float | str | np.number):
            raise BadParameter(problem, name, repr(value), "a parameter is a number")
        try:
            number = float(value)
        except (ValueError, OverflowError):
            raise BadParameter(problem, name, repr(value), "a parameter is a number") from None
        if not math.isfinite(number):
            raise BadParameter(problem, name, value, "a parameter is a finite number")
        if not self.above < number < self.below:
            raise BadParameter(problem, name, value, self._rule())
        return number

    def _rule(self) -> str:
        bounds = []
        if self.above > -math.inf:
            bounds.append(f"above {self.above:g}")
        if self.below < math.inf:
            bounds.append(f"below {self.below:g}")
        return "it must be " + " and ".join(bounds) + (f", {self.why}" if self.why else "")


@dataclass(frozen=True)
class NormalLaw:
    """The law of X_T = transform(G) for a normal G with the given `mean` and `sd`."""

    mean: float
    sd: float
    transform: Callable[[Array], Array]

    def expectation(self, f: Callable[[Array], Array]) -> tuple[float, float]:
        """Return E f(X_T) and its numerical uncertainty.

        `f` maps an array to an array of the same shape; it may bend and jump.
        """
        with np.errstate(all="ignore"):
            return normal_expectation(lambda z: f(self.transform(self.mean + self.sd * z)))


PARAMETERS_OF_ALL = {
    "horizon": Parameter(1.0, above=0.0, why="it is the final time T"),
}


@dataclass(frozen=True)
class Problem:
    """A scalar SDE with its exact flow and law; frozen, so that `with_parameters` gives another.

    Every function takes the read-only mapping `p` of parameters first:
    `drift(p, t, x)`, `diffusion(p, t, x)`, `diffusion_dx(p, t, x)`, with x of shape `(paths,)`;
    `flow(p, t, x, h, noise)` is X_{t+h} given X_t = x and the functionals named in `flow_noise`,
    for every path; `law(p)` is the law of X_T. `decay` names the parameter that is θ of the
    decayed increment, where the problem has one. `coordinate` is where the flow is tame, and
    `autonomous` says that nothing depends on t. `parameters` holds x0; a horizon is added.
    """

    name: str
    title: str
    equation: str
    parameters: Mapping[str, Parameter]
    noise_kind: NoiseKind
    drift: Callable[[Params, float, Array], Array]
    diffusion: Callable[[Params, float, Array], Array]
    diffusion_dx: Callable[[Params, float, Array], Array]
    flow: Callable[[Params, float, Array, float, Noise], Array]
    law: Callable[[Params], NormalLaw]
    flow_noise: tuple[str, ...] = ("dw",)
    decay: str | None = None
    coordinate: Coordinate = STATE
    autonomous: bool = True
    values: Params = field(default_factory=dict)
    typed: str | None = None

    @cached_property
    def declared(self) -> Mapping[str, Parameter]:
        """The parameters with the horizon that every problem has."""
        return PARAMETERS_OF_ALL | dict(self.parameters)

    @cached_property
    def params(self) -> Params:
        """The parameters' values, read-only."""
        defaults = {name: p.default for name, p in self.declared.items()}
        return MappingProxyType(defaults | dict(self.values))

    @property
    def label(self) -> str:
        """The name as typed, parameters included; it says all that differs from the defaults."""
        if self.typed is not None:
            return self.typed
        values = ",".join(
            f"{name}={repr(value).removesuffix('.0')}" for name, value in self.values.items()
        )
        return f"{self.name}:{values}" if values else self.name

    @property
    def start(self) -> float:
        """X at time 0."""
        return self.params["x0"]

    @property
    def horizon(self) -> float:
        """The final time T."""
        return self.params["horizon"]

    @property
    def decay_rate(self) -> float:
        """θ of the decayed increment, 0 where there is none."""
        return self.params[self.decay] if self.decay else 0.0

    @property
    def functionals(self) -> tuple[str, ...]:
        """The Wiener functionals that a scheme may ask for on this problem."""
        return FUNCTIONALS if self.decay else tuple(n for n in FUNCTIONALS if n != "decayed")

    def offers(self, noise: Iterable[str]) -> bool:
        """Return whether a scheme that steps by these functionals applies to this problem."""
        return set(noise) <= set(self.functionals)

    def suits(self, scheme: Scheme) -> bool:
        """Return whether the problem has the functionals and the parameters that a scheme needs."""
        return self.offers(scheme.noise) and set(scheme.params) <= set(self.params)

    @cached_property
    def sde(self) -> SDE:
        """The Itô SDE that a scheme is given."""
        p = self.params
        return SDE(
            drift=partial(self.drift, p),
            diffusion=partial(self.diffusion, p),
            diffusion_dx=partial(self.diffusion_dx, p),
            params=MappingProxyType({n: v for n, v in p.items() if n not in ("x0", "horizon")}),
            start=self.start,
            horizon=self.horizon,
            noise_kind=self.noise_kind,
        )

    def exact_step(self, t: float, x: Array, h: float, noise: Noise) -> Array:
        """Return X_{t+h} from X_t = x, shape `(paths,)`, and the functionals of the path."""
        return self.flow(self.params, t, x, h, noise)

    def with_parameters(self, values: Mapping[str, object], typed: str | None = None) -> "Problem":
        """Return the problem with some parameters set; raises on an unknown or unusable one."""
        checked = dict(self.values)
        for name, value in values.items():
            if name not in self.declared:
                raise UnknownName(f"parameter of {self.name}", name, self.declared)
            checked[name] = self.declared[name].check(self.name, name, value)
        return replace(self, values=MappingProxyType(checked), typed=typed)
