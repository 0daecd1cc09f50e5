"""Slow, obvious twins of the families: textbook formulas in mpmath, written from the definitions.

They share no code with the package; that is their point. Each twin gives F, 1 - F and f for x and parameters as
mpmath numbers. One tail is often written as one minus the other: of 100 digits, 60 are left at probabilities of 1e-33.
"""

import mpmath as mp

DIGITS = 100


def phi(u):
    return mp.exp(-u * u / 2) / mp.sqrt(2 * mp.pi)


def Phi(u):  # noqa: N802 - the usual symbol
    return mp.erfc(-u / mp.sqrt(2)) / 2


def normal(x, location, scale):
    z = (x - location) / scale
    return Phi(z), Phi(-z), phi(z) / scale


def lognormal(x, median, log_sd):
    z = mp.log(x / median) / log_sd
    return Phi(z), Phi(-z), phi(z) / (log_sd * x)


def lognormal3(x, threshold, median, log_sd):
    return lognormal(x - threshold, median, log_sd)


def gumbel(x, location, scale):
    w = mp.exp(-(x - location) / scale)
    return mp.exp(-w), -mp.expm1(-w), w * mp.exp(-w) / scale


def gumbel_min(x, location, scale):
    cdf, sf, pdf = gumbel(-x, -location, scale)
    return sf, cdf, pdf


def weibull(x, scale, shape):
    w = (x / scale) ** shape
    return -mp.expm1(-w), mp.exp(-w), shape / x * w * mp.exp(-w)


def weibull3(x, threshold, scale, shape):
    return weibull(x - threshold, scale, shape)


def frechet(x, scale, shape):
    w = (x / scale) ** (-shape)
    return mp.exp(-w), -mp.expm1(-w), shape / x * w * mp.exp(-w)


def gamma(x, shape, scale):
    q = x / scale
    cdf = mp.gammainc(shape, 0, q, regularized=True)
    return cdf, 1 - cdf, q ** (shape - 1) * mp.exp(-q) / mp.gamma(shape) / scale


def uniform(x, lower, upper):
    width = upper - lower
    return (x - lower) / width, (upper - x) / width, 1 / width


def exponential(x, scale):
    return -mp.expm1(-x / scale), mp.exp(-x / scale), mp.exp(-x / scale) / scale


def gev(x, location, scale, shape):
    z = (x - location) / scale
    w = mp.exp(-z) if shape == 0 else (1 + shape * z) ** (-1 / shape)
    return mp.exp(-w), -mp.expm1(-w), w ** (1 + shape) * mp.exp(-w) / scale


def beta(x, shape_1, shape_2, lower, upper):
    width = upper - lower
    t, s = (x - lower) / width, (upper - x) / width
    cdf = mp.betainc(shape_1, shape_2, 0, t, regularized=True)
    return cdf, 1 - cdf, t ** (shape_1 - 1) * s ** (shape_2 - 1) / mp.beta(shape_1, shape_2) / width


def student_t(x, location, scale, freedom):
    t = (x - location) / scale
    half = freedom / 2
    tail = mp.betainc(half, mp.mpf(1) / 2, 0, freedom / (freedom + t * t), regularized=True) / 2
    pdf = (
        (1 + t * t / freedom) ** (-half - mp.mpf(1) / 2)
        / mp.beta(half, mp.mpf(1) / 2)
        / mp.sqrt(freedom)
        / scale
    )
    return (tail, 1 - tail, pdf) if t < 0 else (1 - tail, tail, pdf)


def log_student_t(x, median, log_scale, freedom):
    cdf, sf, pdf = student_t(mp.log(x / median) / log_scale, 0, 1, freedom)
    return cdf, sf, pdf / (log_scale * x)


def truncated_normal(x, location, scale, lower, upper):
    z, a, b = ((v - location) / scale for v in (x, lower, upper))
    # All three as upper tails, or all as lower ones: whichever is small, so that differences keep their digits.
    if a > 0:
        mass, cdf, sf = Phi(-a) - Phi(-b), Phi(-a) - Phi(-z), Phi(-z) - Phi(-b)
    else:
        mass, cdf, sf = Phi(b) - Phi(a), Phi(z) - Phi(a), Phi(b) - Phi(z)
        if z > 0:
            sf = Phi(-z) - Phi(-b)
    return cdf / mass, sf / mass, phi(z) / scale / mass


TWINS = {
    f.__name__: f
    for f in (
        normal, lognormal, gumbel, gumbel_min, weibull, frechet, gamma, uniform, exponential, weibull3, lognormal3,
        gev, beta, student_t, log_student_t, truncated_normal,
    )
}  # fmt: skip


POSITIVE = ("lognormal", "weibull", "frechet", "gamma", "exponential", "log_student_t")


def ends(name, parameters):
    """Return the ends of the support."""
    if name in POSITIVE:
        return mp.mpf(0), mp.inf
    if name in ("weibull3", "lognormal3"):
        return parameters[0], mp.inf
    if name in ("uniform", "beta", "truncated_normal"):
        return tuple(parameters[-2:])
    if name == "gev" and parameters[2] != 0:
        location, scale, shape = parameters
        end = location - scale / shape
        return (end, mp.inf) if shape > 0 else (-mp.inf, end)
    return -mp.inf, mp.inf


def quantile(name, u, parameters, near):
    """Return the x with F(x) = Phi(u), and f(x)."""
    return tail_quantile(name, Phi(-abs(u)), u >= 0, parameters, near)


def tail_quantile(name, target, upper, parameters, near):
    """Return the x with this probability beyond it, and f(x), by Newton's method for ln F or ln(1 - F) from ``near``.

    Towards a finite end of the support the logarithm of the distance to it is the unknown: there the logarithms are
    nearly straight, and ``near`` may have been rounded to the end itself.
    """
    sign = -1 if upper else 1
    end = ends(name, parameters)[upper]
    bounded = mp.isfinite(end)
    y = mp.mpf(near)
    if bounded:
        y = mp.log(abs(near - end) or (abs(end) or 1) * mp.mpf(10) ** -17)
    for _ in range(60):
        x = end + sign * mp.exp(y) if bounded else y
        cdf, sf, pdf = TWINS[name](x, *parameters)
        tail, slope = (sf, -pdf) if upper else (cdf, pdf)
        error = mp.log(tail / target)
        if abs(error) < mp.mpf(10) ** -30:
            return x, pdf
        y -= error * tail / slope / (sign * mp.exp(y) if bounded else 1)
    raise AssertionError(f"{name}: no quantile near {near} for {mp.nstr(target)}")


def tiny(name, parameters, x, size):
    """Return 1e-20 of ``size``, or of the distance of x to an end of the support where that is less."""
    lower, upper = ends(name, parameters)
    return min(size, x - lower, upper - x) * mp.mpf(10) ** -20


def density_slope(name, parameters, x, size):
    """Return d ln f/dx by a central difference; ``size`` is the sd or so."""
    h = tiny(name, parameters, x, size)
    up, down = (mp.log(TWINS[name](x + s * h, *parameters)[2]) for s in (1, -1))
    return (up - down) / (2 * h)


def parameter_slope(name, u, parameters, x, pdf, index):
    """Return dx/dp at fixed u, -(dF/dp)/f, with dF/dp by a central difference in the tail in which u lies."""
    p = parameters[index]
    if mp.isinf(p):
        return mp.mpf(0)
    h = tiny(name, parameters, x, abs(p) or mp.mpf(1))
    tails = []
    for s in (1, -1):
        moved = [*parameters]
        moved[index] = p + s * h
        cdf, sf, _ = TWINS[name](x, *moved)
        tails.append(cdf if u < 0 else -sf)
    return (tails[1] - tails[0]) / (2 * h) / pdf
