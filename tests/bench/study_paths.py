"""Paths for the studies: many at once, by a code of its own; exact laws, or Euler's scheme in small parts of a step.

Paths have shape (paths, n + 1); `steps` is one step for all, or shape (n,).
"""

import numpy as np

DAY = 1 / 252
SUBSTEPS = 10
GARCH = 0.10, 0.85  # what a squared shock and the variance before it add to the next variance


def calendar(rng, n):
    """Steps of days on which there are prices, in years of 365 days: weekends, and some holidays."""
    return rng.choice([1.0, 2.0, 3.0, 4.0], n, p=[0.78, 0.02, 0.19, 0.01]) / 365


def scattered(rng, n):
    """Steps of very different lengths, of a day in the mean."""
    return DAY * (0.02 + 0.98 * rng.standard_exponential(n))


def shocks(rng, kind, n, paths):
    """Shocks of mean 0 and unit variance in the long run, and the root mean square of what they were drawn with."""
    if kind == "gaussian":
        return rng.standard_normal((paths, n)), np.ones(paths)
    if kind == "student5":
        return rng.standard_t(5, (paths, n)) / np.sqrt(5 / 3), np.ones(paths)
    of_shock, of_before = GARCH
    variance, found, total = np.ones(paths), np.empty((paths, n)), np.zeros(paths)
    for k in range(-100, n):
        shock = np.sqrt(variance / 1.5) * rng.standard_t(6, paths)
        if k >= 0:
            found[:, k] = shock
            total += variance
        variance = 1 - of_shock - of_before + of_shock * shock**2 + of_before * variance
    return found, np.sqrt(total / n)


def steps_of(n, steps):
    return np.broadcast_to(steps, (n,))


def brownian(noise, steps, mu, sigma):
    steps = steps_of(noise.shape[1], steps)
    path = np.zeros((len(noise), noise.shape[1] + 1))
    np.cumsum(mu * steps + sigma * np.sqrt(steps) * noise, axis=1, out=path[:, 1:])
    return path


def pulled(rng, noise, steps, kappa, theta, sigma, start=None):
    """The Ornstein–Uhlenbeck process from its stationary law, or from `start` of its standard deviations."""
    paths, n = noise.shape
    steps = steps_of(n, steps)
    path = np.empty((n + 1, paths))
    if kappa == 0:
        path[0] = 0.0
    else:
        path[0] = sigma / np.sqrt(2 * kappa) * (rng.standard_normal(paths) if start is None else start)
    decay = np.exp(-kappa * steps)
    sd = sigma * np.sqrt(steps if kappa == 0 else -np.expm1(-2 * kappa * steps) / (2 * kappa))
    for k in range(n):
        path[k + 1] = decay[k] * path[k] + sd[k] * noise[:, k]
    return theta + path.T


def square_root(rng, paths, n, steps, a, kappa, sigma, first=None):
    """dX = (a − kappa X) dt + sigma √X dW by its exact law, from the stationary one or from `first`."""
    steps, variance = steps_of(n, steps), sigma**2
    path = np.empty((n + 1, paths))
    path[0] = rng.gamma(2 * a / variance, variance / (2 * kappa), paths) if first is None else first
    for k in range(n):
        decay = np.exp(-kappa * steps[k])
        size = variance * (steps[k] if kappa == 0 else -np.expm1(-kappa * steps[k]) / kappa) / 4
        path[k + 1] = size * rng.noncentral_chisquare(4 * a / variance, decay * path[k] / size)
    return path.T


def square_root_with(noise, steps, kappa, theta, sigma):
    """The square-root process with other shocks: the right mean and variance a step, from theta on."""
    paths, n = noise.shape
    steps = steps_of(n, steps)
    path = np.empty((n + 1, paths))
    path[0] = theta
    for k in range(n):
        decay = np.exp(-kappa * steps[k])
        variance = sigma**2 * (1 - decay) / kappa * (path[k] * decay + theta / 2 * (1 - decay))
        path[k + 1] = np.abs(theta + (path[k] - theta) * decay + np.sqrt(variance) * noise[:, k])
    return path.T


def elastic(rng, paths, n, steps, kappa, theta, sigma, gamma, burn_in=252):
    """dX = kappa (theta − X) dt + sigma X^gamma dW by Milstein's scheme for ln X, from theta through a burn-in."""
    steps = steps_of(n, steps)
    path, y = np.empty((n + 1, paths)), np.full(paths, np.log(theta))
    for k in range(-burn_in, n):
        part = (steps[k] if k >= 0 else DAY) / SUBSTEPS
        if k >= 0:
            path[k] = y
        for _ in range(SUBSTEPS):
            spread = sigma * np.exp((gamma - 1) * y)
            dw = np.sqrt(part) * rng.standard_normal(paths)
            drift = kappa * (theta * np.exp(-y) - 1) - 0.5 * spread**2
            y = y + drift * part + spread * dw + 0.5 * (gamma - 1) * spread**2 * (dw**2 - part)
    path[n] = y
    return np.exp(path.T)


def cubic(rng, noise, steps, drift, sigma, first):
    """dX = (d0 + d1 X + d2 X² + d3 X³) dt + sigma dW, from draws near `first` through a year."""
    paths, n = noise.shape
    steps = steps_of(n, steps)
    path = np.empty((n + 1, paths))
    x = first * rng.choice([-1.0, 1.0], paths)
    for k in range(-252, n):
        length = steps[k] if k >= 0 else DAY
        part = length / SUBSTEPS
        if k >= 0:
            path[k] = x
        inner = rng.standard_normal((SUBSTEPS, paths))
        if k >= 0:
            inner += (noise[:, k] - inner.sum(axis=0) / np.sqrt(SUBSTEPS)) / np.sqrt(SUBSTEPS)
        for dw in inner:
            slope = drift[0] + x * (drift[1] + x * (drift[2] + x * drift[3]))
            x = x + slope * part + sigma * np.sqrt(part) * dw
    path[n] = x
    return path.T


def with_jumps(rng, noise, steps, b, sigma, rate, mean, sd):
    """ln X with Poisson jumps, exact."""
    paths, n = noise.shape
    steps = steps_of(n, steps)
    count = rng.poisson(rate * steps, (paths, n))
    jumps = mean * count + sd * np.sqrt(count) * rng.standard_normal((paths, n))
    return brownian(noise, steps, b, sigma) + np.concatenate([np.zeros((paths, 1)), jumps.cumsum(axis=1)], axis=1)


def step_law(damping, stiffness, dt):
    """Transition and covariance of (X, V) over a step, for eta = 1."""
    rate = np.sqrt(complex(damping * damping / 4 - stiffness))
    a, b = -damping / 2 + rate, -damping / 2 - rate
    ea, eb = np.exp(a * dt), np.exp(b * dt)
    h, dh = ((ea - eb) / (a - b)).real, ((a * ea - b * eb) / (a - b)).real
    q22 = (1 - dh * dh - stiffness * h * h) / (2 * damping)
    q11 = (q22 - 0.5 * damping * h * h - h * dh) / stiffness
    q12 = 0.5 * h * h
    return np.array([[dh + damping * h, h], [-stiffness * h, dh]]), np.linalg.cholesky([[q11, q12], [q12, q22]])


def swinging(rng, paths, n, steps, damping, stiffness, eta):
    """A damped oscillator from its stationary law."""
    steps = steps_of(n, steps)
    laws = {dt: step_law(damping, stiffness, dt) for dt in np.unique(steps)}
    sd = eta / np.sqrt(2 * damping)
    state = sd * rng.standard_normal((2, paths)) * np.array([[1 / np.sqrt(stiffness)], [1.0]])
    path = np.empty((n + 1, paths))
    path[0] = state[0]
    for k, dt in enumerate(steps):
        transition, root = laws[dt]
        state = transition @ state + eta * root @ rng.standard_normal((2, paths))
        path[k + 1] = state[0]
    return path.T
