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
