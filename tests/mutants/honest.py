"""Sound relatives of the mutants, from the plain to the unusual, each with claims it keeps.

The derivative-free scheme of strong order 1, the Taylor schemes of strong order 1.5 and weak
order 2, and the weak schemes of two- and three-point noise follow Kloeden & Platen (1992),
sections 10.4, 11.1 and 14.1 to 14.2 (from memory).
"""

import math

import numpy as np

import sdebench as sb
from tests.mutants.steps import euler, milstein, taylor


@sb.scheme(strong=1.0, weak=1.0)
def derivative_free(sde, t, x, h, noise):
    b, root = sde.diffusion(t, x), math.sqrt(h)
    gain = sde.diffusion(t, x + sde.drift(t, x) * h + b * root) - b
    return euler(sde, t, x, h, noise.dw) + gain * (noise.dw**2 - h) / (2 * root)


@sb.scheme(strong=1.0, weak=1.0, calculus="stratonovich")
def stratonovich_heun(sde, t, x, h, noise):
    ahead = euler(sde, t, x, h, noise.dw)
    return 0.5 * (x + euler(sde, t + h, ahead, h, noise.dw))


@sb.scheme(strong=1.0, weak=1.0, calculus="stratonovich")
def stratonovich_heun_on_half_steps(sde, t, x, h, noise):
    for begin in (t, t + h / 2):
        x = stratonovich_heun.step(sde, begin, x, h / 2, sb.Noise(dw=noise.dw / 2))
    return x


@sb.scheme(strong=0.5, strong_additive=1.0, weak=1.0)
def euler_maruyama_on_half_steps(sde, t, x, h, noise):
    middle = euler(sde, t, x, h / 2, noise.dw / 2)
    return euler(sde, t + h / 2, middle, h / 2, noise.dw / 2)


@sb.scheme(strong=0.5, strong_additive=1.0, weak=1.0)
def implicit_on_ornstein_uhlenbeck(sde, t, x, h, noise):
    theta, mean, sigma = (sde.params[name] for name in ("theta", "mean", "sigma"))
    return (x + theta * mean * h + sigma * noise.dw) / (1 + theta * h)


@sb.scheme(strong=0.5, weak=1.0)
def implicit_on_geometric_brownian_motion(sde, t, x, h, noise):
    return x * (1 + sde.params["sigma"] * noise.dw) / (1 - sde.params["mu"] * h)


@sb.scheme(strong=1.0, weak=1.0)
def implicit_milstein_on_geometric_brownian_motion(sde, t, x, h, noise):
    growth = sde.params["mu"] * h
    explicit = milstein(sde, t, x, h, noise.dw, drift=0.0)
    return explicit / (1 - growth)


@sb.scheme(strong=0.5, strong_additive=1.0, weak=1.0)
def tamed(sde, t, x, h, noise):
    a = sde.drift(t, x)
    return x + a * h / (1 + h * np.abs(a)) + sde.diffusion(t, x) * noise.dw


@sb.scheme(strong=0.5, weak=0.5)
def tamed_by_root_h(sde, t, x, h, noise):
    a = sde.drift(t, x)
    return x + a * h / (1 + math.sqrt(h) * np.abs(a)) + sde.diffusion(t, x) * noise.dw


@sb.scheme(strong=0.5, strong_additive=1.0, weak=1.0)
def coefficients_at_the_end_of_the_step(sde, t, x, h, noise):
    return euler(sde, t + h, x, h, noise.dw)


@sb.scheme(strong=0.5, strong_additive=1.0, weak=1.0)
def drift_first_then_noise(sde, t, x, h, noise):
    moved = x + sde.drift(t, x) * h
    return moved + sde.diffusion(t + h, moved) * noise.dw


@sb.scheme(strong=1.0, weak=1.0)
def milstein_kept_positive(sde, t, x, h, noise):
    return np.maximum(milstein(sde, t, x, h, noise.dw), 0.0)


@sb.scheme(strong=1.0, weak=1.0)
def milstein_by_broadcasting(sde, t, x, h, noise):
    b, slope = sde.diffusion(t, x), sde.diffusion_dx(t, x)
    weights = np.array([[h], [1.0], [0.5]])
    terms = np.stack([sde.drift(t, x), b * noise.dw, b * slope * (noise.dw**2 - h)])
    return x + (weights * terms).sum(axis=0)


@sb.scheme(strong=1.0, weak=1.0)
def exact_geometric_brownian_motion(sde, t, x, h, noise):
    mu, sigma = sde.params["mu"], sde.params["sigma"]
    return x * np.exp((mu - sigma**2 / 2) * h + sigma * noise.dw)


@sb.scheme(strong=0.5, strong_additive=1.0, weak=1.0)
def drift_averaged_over_the_step(sde, t, x, h, noise):
    ahead = euler(sde, t, x, h, noise.dw)
    a = 0.5 * (sde.drift(t, x) + sde.drift(t + h, ahead))
    return x + a * h + sde.diffusion(t, x) * noise.dw


@sb.scheme(strong=1.5, weak=2.0, noise=("dw", "dz"))
def taylor_of_strong_order_15(sde, t, x, h, noise):
    return taylor(sde, t, x, h, noise.dw, noise.dz)


@sb.scheme(strong=1.0, weak=2.0)
def taylor_of_weak_order_2(sde, t, x, h, noise):
    mu, sigma = sde.params["mu"], sde.params["sigma"]
    mixed = mu * sigma * x * noise.dw * h
    return milstein(sde, t, x, h, noise.dw) + mixed + 0.5 * mu**2 * x * h**2


@sb.scheme(strong=1.0, weak=2.0)
def exact_law_on_ornstein_uhlenbeck(sde, t, x, h, noise):
    theta, mean, sigma = (sde.params[name] for name in ("theta", "mean", "sigma"))
    spread = math.sqrt(-math.expm1(-2 * theta * h) / (2 * theta * h))
    return mean + (x - mean) * math.exp(-theta * h) + sigma * spread * noise.dw


@sb.scheme(strong=4.0, weak=4.0, noise="decayed")
def decay_to_the_fourth_power_on_ornstein_uhlenbeck(sde, t, x, h, noise):
    theta, mean, sigma = (sde.params[name] for name in ("theta", "mean", "sigma"))
    u = theta * h
    kept = 1 - u + u**2 / 2 - u**3 / 6 + u**4 / 24
    return mean + (x - mean) * kept + sigma * noise.decayed


@sb.scheme(weak=1.0)
def two_point_noise(sde, t, x, h, noise):
    return euler(sde, t, x, h, np.sign(noise.dw) * math.sqrt(h))


@sb.scheme(weak=1.0)
def two_point_noise_by_a_choice(sde, t, x, h, noise):
    root = math.sqrt(h)
    return euler(sde, t, x, h, np.where(noise.dw > 0, root, -root))


@sb.scheme(weak=1.0)
def three_point_noise(sde, t, x, h, noise):
    # A standard normal lies beyond 0.9674 in size with probability 1/3.
    far = np.abs(noise.dw) > 0.967421566101701 * math.sqrt(h)
    return euler(sde, t, x, h, np.sign(noise.dw) * math.sqrt(3 * h) * far)


@sb.scheme(strong=0.5, weak=1.0)
def noise_cut_off_ever_farther_out(sde, t, x, h, noise):
    farthest = math.sqrt(2 * abs(math.log(h)) * h)
    return euler(sde, t, x, h, np.clip(noise.dw, -farthest, farthest))
