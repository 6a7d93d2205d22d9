"""Tails and quantiles at 52 digits, in mpmath, by means that the code under test does not use or uses otherwise."""

import numpy as np
from mpmath import mp, mpf
from scipy import special

mp.dps = 52


def noncentral_t_tail(side, t, nu, delta):
    """P(T <= t) for a side below 0, else P(T > t): the integral of a normal tail over u = log S, S the chi variable over
    root nu, by the trapezoidal rule, its step halved until nothing changes."""
    if t < 0:
        return noncentral_t_tail(-side, -t, nu, -delta)
    sign = -side
    # Where the integrand exceeds 10^-60 of its peak, in doubles.
    u = np.linspace(-150 / min(nu, 40.0) - 1, 5, 400_001)
    s = np.exp(u)
    log = nu * (u - (s * s - 1) / 2) + special.log_ndtr(sign * (float(t) * s - delta))
    inside = u[log > log.max() - 140]
    low, high = mpf(inside[0]) - mpf(10) ** -4, mpf(inside[-1]) + mpf(10) ** -4
    t, nu, delta = mpf(t), mpf(nu), mpf(delta)
    factor = mp.exp(mp.log(2) + nu / 2 * mp.log(nu / 2) - mp.loggamma(nu / 2))
    root_half = 1 / mp.sqrt(2)

    def integrand(u):
        s = mp.exp(u)
        return mp.exp(nu * (u - s * s / 2)) * mp.erfc(sign * (delta - t * s) * root_half) / 2

    panels = 64
    step = (high - low) / panels
    total = mp.fsum(integrand(low + k * step) for k in range(panels + 1))
    while True:
        added = mp.fsum(integrand(low + (k + mpf(1) / 2) * step) for k in range(panels))
        # The new midpoints alone are a rule as good as the old one: their agreement is its error, and the square root
        # of what the two have together.
        agree = abs(added / total - 1)
        total, panels, step = total + added, 2 * panels, step / 2
        if agree < mpf(10) ** -24:
            return total * step * factor


def noncentral_t_quantile(side, tail, nu, delta, near):
    """The t with `tail` below (side < 0) or above it, from a double near it: secants on the logarithm of the tail."""
    return _secant(lambda t: mp.log(noncentral_t_tail(side, t, nu, delta)) - mp.log(mpf(tail)), near)


def chi_square_tail(side, x, nu):
    """P(X <= x) or P(X > x)."""
    half, a = mpf(x) / 2, mpf(nu) / 2
    ends = (0, half) if side < 0 else (half, mp.inf)
    return mp.gammainc(a, *ends, regularized=True)


def chi_square_quantile(side, tail, nu, near):
    """The x with `tail` below (side < 0) or above it, from a double near it."""
    return _secant(lambda x: mp.log(chi_square_tail(side, x, nu)) - mp.log(mpf(tail)), near)


def _secant(miss, near):
    x0 = mpf(near)
    x1 = x0 * (1 + mpf(10) ** -12)
    f0, f1 = miss(x0), miss(x1)
    for _ in range(8):
        if f1 == f0 or abs(x1 - x0) < abs(x1) * mpf(10) ** -20:
            break
        x0, f0, x1 = x1, f1, x1 - f1 * (x1 - x0) / (f1 - f0)
        f1 = miss(x1)
    return x1
