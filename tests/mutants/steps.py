"""The steps that mutants distort: each coefficient times a factor, 1 in the honest step."""


def euler(sde, t, x, h, dw, drift=1.0, noise=1.0):
    return x + drift * sde.drift(t, x) * h + noise * sde.diffusion(t, x) * dw


def milstein(sde, t, x, h, dw, drift=1.0, noise=1.0, correction=1.0):
    c = 0.5 * sde.diffusion(t, x) * sde.diffusion_dx(t, x)
    return euler(sde, t, x, h, dw, drift, noise) + correction * c * (dw**2 - h)


def taylor_gbm(sde, x, h, dw, dz):
    """Order 1.5 on GBM, a = μx, b = σx, from the increment and the time integral."""
    mu, sigma = sde.params["mu"], sde.params["sigma"]
    a, b = mu * x, sigma * x
    return (
        x
        + a * h
        + b * dw
        + 0.5 * b * sigma * (dw**2 - h)
        + mu * b * dz
        + 0.5 * a * mu * h**2
        + a * sigma * (dw * h - dz)
        + 0.5 * b * sigma**2 * (dw**2 / 3 - h) * dw
    )


def in_x(f, t, x, d=1e-5):
    """The derivative in x by a central difference: it errs by some 1e-10."""
    d = d * (1 + abs(x))
    return (f(t, x + d) - f(t, x - d)) / (2 * d)


def in_t(f, t, x, d=1e-5):
    return (f(t + d, x) - f(t - d, x)) / (2 * d)


def twice_in_x(f, t, x, d=1e-3):
    """The second derivative: it errs by some 1e-8, a part of a term of order h²."""
    d = d * (1 + abs(x))
    return (f(t, x + d) + f(t, x - d) - 2 * f(t, x)) / d**2


def taylor(sde, t, x, h, dw, dz, exchanged=False):
    """Order 1.5 on any SDE of one dimension: Kloeden & Platen (1992), section 10.4 (from memory).

    The mixed terms are L1 a dz and L0 b (dw h - dz), with L0 = ∂t + a ∂x + ½ b² ∂xx and
    L1 = b ∂x; `exchanged` gives each the other's integral.
    """
    a, b, b_x = sde.drift(t, x), sde.diffusion(t, x), sde.diffusion_dx(t, x)
    a_t, a_x, a_xx = (of(sde.drift, t, x) for of in (in_t, in_x, twice_in_x))
    b_t, b_xx = in_t(sde.diffusion, t, x), in_x(sde.diffusion_dx, t, x)
    after, before = (dw * h - dz, dz) if exchanged else (dz, dw * h - dz)
    return (
        milstein(sde, t, x, h, dw)
        + b * a_x * after
        + (b_t + a * b_x + 0.5 * b**2 * b_xx) * before
        + 0.5 * (a_t + a * a_x + 0.5 * b**2 * a_xx) * h**2
        + 0.5 * b * (b * b_xx + b_x**2) * (dw**2 / 3 - h) * dw
    )
