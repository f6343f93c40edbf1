"""How much a set of looks tells about one wanted quantity.

The information about a quantity with gradient c is I(F) = 1 / (c' F^-1 c), F the information matrix (inverse
covariance) of the parameters. It equals the least v'Fv over all v with c'v = 1 (Lagrange multipliers; also the
Cramer-Rao bound of the quantity turned over): a minimum of functions linear in F, hence concave and increasing in
F, and defined for singular F too (0 where c points along a direction that nothing has measured).
"""

from __future__ import annotations

import numpy as np

from planner.records import Floats

_RESIDUAL = 1e-6  # relative misfit of v'Fv against 1/(c'F^-1 c) above which the careful path is taken; our choice
_NULL = 1e-12  # eigenvalues of the unit-diagonal F below this share of the largest are zero; near round-off
_IN_NULL = 1e-16  # squared share of c in the null space that counts as "not measured"; square of ~1e-8
_CANCELLED = 1e-9  # Woodbury results below this share of the start lost too many digits; recomputed plainly


def information(precision: Floats, gradient: Floats) -> Floats:
    """Return I = 1 / (c' F^-1 c).

    ``precision``: (..., P, P), symmetric, positive semi-definite; ``gradient``: (..., P). Returns (...), in units
    of 1 / quantity^2; 0 where the quantity is not measured at all, inf where the gradient is zero (the quantity
    does not depend on any parameter).
    """
    return _solve(precision, gradient)[0]


def least_direction(precision: Floats, gradient: Floats) -> Floats:
    """Return the v with c'v = 1 that makes v'Fv least, (..., P); zeros where the gradient is zero.

    For every other F' >= 0: I(F') <= v'F'v, with equality at F' = F: the tangent of I at F.
    """
    return _solve(precision, gradient)[1]


def gathered(prior: Floats, rows: Floats, weights: Floats) -> Floats:
    """Return prior + sum over looks of weight x rows' rows.

    ``prior``: (P, P) or (B, P, P); ``rows``: (B, n, M, P) whitened derivatives; ``weights``: (n,), not negative.
    Returns (B, P, P).
    """
    draws, looks, observables, size = rows.shape
    flat = (rows * np.sqrt(weights)[None, :, None, None]).reshape(draws, looks * observables, size)
    return np.asarray(prior + flat.transpose(0, 2, 1) @ flat)


def information_after(precision: Floats, gradients: Floats, rows: Floats) -> Floats:
    """Return the information about each quantity after adding each candidate alone, all candidates at once.

    ``precision``: (B, P, P); ``gradients``: (G, B, P); ``rows``: (B, K, M, P), already scaled by the square root
    of the chance of each candidate. Returns (G, B, K). Low-rank update of the inverse (Woodbury identity): only
    M x M systems are solved for a candidate, never P x P.
    """
    draws, count, observables, size = rows.shape
    if count == 0 or gradients.shape[0] == 0:
        return np.zeros((gradients.shape[0], draws, count))
    try:
        inverse = np.linalg.inv(precision)
    except np.linalg.LinAlgError:
        return _information_after_plain(precision, gradients, rows)
    pointed = inverse @ gradients.transpose(1, 2, 0)  # (B, P, G)
    start = np.einsum("gbp,bpg->bg", gradients, pointed)
    flat = rows.reshape(draws, count * observables, size)
    spread = (flat @ inverse).reshape(draws, count, observables, size)
    inner = spread @ rows.transpose(0, 1, 3, 2) + np.eye(observables)  # (B, K, M, M)
    seen = (flat @ pointed).reshape(draws, count, observables, -1)  # (B, K, M, G)
    drop = np.sum(seen * np.linalg.solve(inner, seen), axis=2)  # (B, K, G)
    left = start[:, None, :] - drop
    moved = np.any(gradients != 0.0, axis=2).T[:, None, :]  # (B, 1, G): the quantity depends on something
    if not np.all((left > _CANCELLED * np.abs(start[:, None, :])) | ~moved):
        return _information_after_plain(precision, gradients, rows)
    with np.errstate(divide="ignore"):
        return np.asarray(np.where(moved, 1.0 / left, np.inf).transpose(2, 0, 1))


def learned_directions(prior: Floats, everything: Floats) -> tuple[Floats, Floats]:
    """Return how much better each combination of parameters is known with everything than before.

    ``prior`` and ``everything``: (P, P) information matrices, ``prior`` positive definite. Solves
    F_all e = gain F_prior e. Returns gains (P,), ascending (1: nothing learned; the standard deviation of that
    combination shrinks by sqrt(gain)), and the combinations as columns (P, P), scaled to e'F_prior e = 1.
    """
    factor = np.linalg.cholesky(prior)
    half = np.linalg.solve(factor, np.linalg.solve(factor, everything).T)
    gains, vectors = np.linalg.eigh(0.5 * (half + half.T))
    return gains, np.linalg.solve(factor.T, vectors)


def _information_after_plain(precision: Floats, gradients: Floats, rows: Floats) -> Floats:
    result = np.empty((gradients.shape[0], rows.shape[0], rows.shape[1]))
    for k in range(rows.shape[1]):
        together = precision + rows[:, k].transpose(0, 2, 1) @ rows[:, k]
        result[:, :, k] = information(together[None], gradients)
    return result


def _solve(precision: Floats, gradient: Floats) -> tuple[Floats, Floats]:
    f = np.asarray(precision, dtype=float)
    c = np.asarray(gradient, dtype=float)
    shape = np.broadcast_shapes(f.shape[:-1], c.shape)
    f = np.broadcast_to(f, (*shape, shape[-1]))
    c = np.broadcast_to(c, shape)
    try:
        x = np.linalg.solve(f, c[..., None])[..., 0]
    except np.linalg.LinAlgError:
        x = np.full(shape, np.nan)
    with np.errstate(all="ignore"):
        q = np.sum(c * x, axis=-1)
        value = np.array(1.0 / q)  # an array even for one matrix, so that single places can be mended
        v = x / q[..., None]
        check = np.sum(v * (f @ v[..., None])[..., 0], axis=-1)
        good = np.isfinite(value) & (value > 0.0) & (np.abs(check - value) <= _RESIDUAL * value)
    for where in np.argwhere(~good):
        at = tuple(where)
        value[at], v[at] = _solve_carefully(f[at], c[at])
    return value, v


def _solve_carefully(f: Floats, c: Floats) -> tuple[float, Floats]:
    """One matrix, by eigenvectors of the unit-diagonal form, so that units of the parameters do not matter."""
    if not np.any(c):
        return np.inf, np.zeros_like(c)
    diagonal = np.diag(f)
    scale = 1.0 / np.sqrt(np.where(diagonal > 0.0, diagonal, 1.0))
    values, vectors = np.linalg.eigh(f * scale[:, None] * scale[None, :])
    part = vectors.T @ (c * scale)
    null = values <= _NULL * max(float(values[-1]), np.finfo(float).tiny)
    hidden = float(np.sum(part[null] ** 2))
    if hidden > _IN_NULL * float(np.sum(part**2)):
        return 0.0, scale * (vectors[:, null] @ part[null]) / hidden
    share = part[~null] / values[~null]
    q = float(np.sum(part[~null] * share))
    return 1.0 / q, scale * (vectors[:, ~null] @ share) / q
