"""Maximum likelihood for many samples of one size at once, by Newton steps on exact derivatives."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

from calibrate.fitting.jets import Jet, Number, Part, pairs, seed
from calibrate.fitting.model import Data, Model, Rule

Array = NDArray[np.float64]

MAX_STEPS = 40
LONGEST = 1.0
DECREMENT = 1e-10
BLOCK = 8_000


def fit_rows(
    model: Model,
    fixed: Mapping[str, float],
    free: tuple[str, ...],
    start: Mapping[str, float],
    x: Array,
) -> dict[str, Array]:
    """Return all parameters of every row of x, shape (B,) each; NaN where no maximum was found.

    Parameters
    ----------
    model : Model
        One whose log-density takes arrays of parameters, without a free threshold.
    fixed : mapping
    free : tuple of str
    start : mapping
        Where every row begins: the parameters that made the samples.
    x : array, shape (B, n)
    """
    rules = {rule.name: rule for rule in model.rules}
    unit = float(np.std(x[0])) or 1.0
    data = Data(x[0], float(np.mean(x[0])) if model.origin != "zero" else 0.0, unit)
    z = ((x - data.shift) / unit).T.copy()
    inner = {name: data.inward(rules[name].kind, value) for name, value in fixed.items()}
    t = np.empty((len(free), x.shape[0]))
    for i, name in enumerate(free):
        value = data.inward(rules[name].kind, start[name])
        t[i] = np.log(value) if rules[name].positive else value
    search = _Rows(model, inner, [rules[name] for name in free])
    # Blocks that stay in the cache; every column is for itself, so that blocks change no result.
    width = max(1, BLOCK // z.shape[0])
    with np.errstate(all="ignore"):
        done = np.concatenate(
            [search.climb(z[:, at : at + width], t[:, at : at + width]) for at in range(0, z.shape[1], width)]
        )
    done &= search.allowed(z, t)
    found: dict[str, Array] = {name: np.asarray(float(value)) for name, value in fixed.items()}
    for i, name in enumerate(free):
        value = np.exp(t[i]) if rules[name].positive else t[i]
        kind = rules[name].kind
        outward = value if kind == "shape" else value * unit + (data.shift if kind == "location" else 0.0)
        found[name] = np.where(done, outward, np.nan)
    return found


class _Rows:
    """Value, gradient and Hessian of the mean log-likelihood of every column of z."""

    def __init__(self, model: Model, fixed: Mapping[str, float], free: list[Rule]) -> None:
        self.model, self.fixed, self.free = model, fixed, free

    def climb(self, z: Array, t: Array) -> NDArray[np.bool_]:
        """Move ``t`` to the maxima; return where that succeeded."""
        done = np.zeros(t.shape[1], dtype=np.bool_)
        active = np.arange(t.shape[1])
        value, gradient, hessian = self(z, t)
        for _ in range(MAX_STEPS):
            step, decrement = _steps(gradient, hessian)
            ended = decrement <= DECREMENT
            done[active[ended]] = True
            t[:, active[ended]] += step[:, ended]
            keep = ~ended & np.isfinite(decrement)
            active, step, z = active[keep], step[:, keep], z[:, keep]
            if not active.size:
                break
            before = value[keep]
            here = t[:, active]
            share = np.ones(active.size)
            for _ in range(12):
                value, gradient, hessian = self(z, here + share * step)
                worse = ~(value >= before - 1e-12 * (1.0 + np.abs(before)))
                if not worse.any():
                    break
                share = np.where(worse, 0.4 * share, share)
            t[:, active] = here + share * step
        return done

    def allowed(self, z: Array, t: Array) -> NDArray[np.bool_]:
        """Return for every column whether it ended where the search of a single sample may go."""
        own = [(rule.name, np.exp(t[i]) if rule.positive else t[i]) for i, rule in enumerate(self.free)]
        return np.array(
            [
                self.model.allowed(column, {**self.fixed, **{name: float(v[k]) for name, v in own}})
                for k, column in enumerate(z.T)
            ],
            dtype=np.bool_,
        )

    def __call__(self, z: Array, t: Array) -> tuple[Array, Array, Array]:
        p = len(self.free)
        seeded: dict[str, Number] = dict(self.fixed)
        for i, rule in enumerate(self.free):
            if rule.positive:
                value = np.exp(t[i])
                seeded[rule.name] = seed(i, p, value, value, value)
            else:
                seeded[rule.name] = seed(i, p, t[i], 1.0, 0.0)
        density: Jet = self.model.log_density(z, seeded)
        value = _column_mean(density.value, z.shape)
        gradient = np.array([_column_mean(s, z.shape) for s in density.slope])
        hessian = np.empty((p, p, z.shape[1]))
        for k, (i, j) in enumerate(pairs(p)):
            hessian[i, j] = hessian[j, i] = _column_mean(density.curve[k], z.shape)
        return np.where(np.isfinite(value), value, -np.inf), gradient, hessian


def _column_mean(part: Part, shape: tuple[int, ...]) -> Array:
    if part is None:
        return np.zeros(shape[1])
    array = np.asarray(part, dtype=np.float64)
    if array.ndim < 2:
        return np.broadcast_to(array, (shape[1],))
    return np.asarray(array.mean(axis=0))


def _steps(gradient: Array, hessian: Array) -> tuple[Array, Array]:
    """Return Newton steps uphill, at most LONGEST long, and decrements (infinite away from a top)."""
    h = np.moveaxis(-hessian, 2, 0)
    g = gradient.T
    bad = ~np.asarray(np.isfinite(h).all(axis=(1, 2)) & np.isfinite(g).all(axis=1))
    h = np.where(bad[:, None, None], np.eye(h.shape[1]), h)
    g = np.where(bad[:, None], 0.0, g)
    eigenvalues, vectors = np.linalg.eigh(h)
    size = np.maximum(np.abs(eigenvalues), 1e-10 * np.abs(eigenvalues).max(axis=1, keepdims=True) + 1e-300)
    along = np.einsum("bij,bi->bj", vectors, g)
    step = np.einsum("bij,bj->bi", vectors, along / size)
    definite = eigenvalues[:, 0] > 0.0
    decrement = np.where(definite, np.sum(along**2 / size, axis=1), 1.0)
    decrement = np.where(bad, np.inf, decrement)
    longest = np.maximum(np.max(np.abs(step), axis=1), 1e-300)
    return (step * np.minimum(1.0, LONGEST / longest)[:, None]).T, decrement
