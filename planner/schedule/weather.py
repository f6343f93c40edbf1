"""Clear and lost nights of one site: a two-state chain with given monthly shares and one-night correlation.

With p_n the share of clear nights at night n, q_n = 1 - p_n and r the correlation of a night with the one before,

    P(clear | clear before)  = p_n + r sqrt(p_n q_n q_(n-1) / p_(n-1))
    P(clear | cloudy before) = p_n - r sqrt(p_n q_n p_(n-1) / q_(n-1))

so that p_(n-1) P(clear|clear) + q_(n-1) P(clear|cloudy) = p_n exactly (the share is kept whatever r), and the
covariance of neighbouring nights is r sqrt(p_n q_n p_(n-1) q_(n-1)), i.e. their correlation is r.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np

from planner.errors import DomainError
from planner.records import Bools, Floats, Ints

_CERTAIN = 1e-12  # near round-off of a share


def nightly_shares(month_shares: Sequence[float], months: Ints) -> Floats:
    """Share of clear nights at each night, (T,), from twelve monthly shares and each night's month (1 to 12)."""
    shares = np.asarray(month_shares, dtype=float)
    if shares.shape != (12,):
        raise DomainError("month_shares", f"{shares.size} values", "twelve, January first")
    _check_shares(shares)
    return np.asarray(shares[np.asarray(months, dtype=np.int64) - 1])


def chain(shares: Floats, persistence: float) -> tuple[Floats, Floats]:
    """Chance that a night is clear after a clear night, and after a cloudy one, (T,) each.

    ``shares``: (T,) in [0, 1]; ``persistence``: one-night correlation in [0, 1). Where the correlation would push
    a chance out of [0, 1] (neighbouring months of very different shares) it is reduced to what is possible. The
    first night has no night before it: both chances are its share.
    """
    p = np.asarray(shares, dtype=float)
    _check_shares(p)
    if not 0.0 <= persistence < 1.0:
        raise DomainError("persistence", persistence, "0 <= persistence < 1")
    after_clear, after_cloudy = p.copy(), p.copy()
    if p.size < 2:
        return after_clear, after_cloudy
    # a night that is certain (to round-off) has no correlation with its neighbours
    certain = np.minimum(p, 1.0 - p) < _CERTAIN
    certain = certain[1:] | certain[:-1]
    now, before = np.where(certain, 0.5, p[1:]), np.where(certain, 0.5, p[:-1])
    up = np.sqrt(now * (1.0 - now) * (1.0 - before) / before)
    down = np.sqrt(now * (1.0 - now) * before / (1.0 - before))
    most = np.minimum((1.0 - now) / up, now / down)  # r at which a chance reaches 1 or 0
    r = np.where(certain, 0.0, np.minimum(persistence, most))
    after_clear[1:] = np.clip(p[1:] + r * up, 0.0, 1.0)
    after_cloudy[1:] = np.clip(p[1:] - r * down, 0.0, 1.0)
    return after_clear, after_cloudy


def simulate_weather(shares: Floats, persistence: float, seasons: int, rng: np.random.Generator) -> Bools:
    """Return clear (True) or cloudy nights, (seasons, T), for many seasons at once."""
    after_clear, after_cloudy = chain(shares, persistence)
    luck = rng.random((seasons, after_clear.size))
    clear = np.empty(luck.shape, dtype=bool)
    before = np.zeros(seasons, dtype=bool)
    for night in range(after_clear.size):
        before = luck[:, night] < np.where(before, after_clear[night], after_cloudy[night])
        clear[:, night] = before
    return clear


def weather_roots(links: Mapping[str, str | None]) -> dict[str, str]:
    """Site whose random numbers each site takes: the first by name of those that are linked, directly or in a chain.

    ``links``: site -> the site it says it has the weather with; names that are not among the sites link as well.
    """
    group = {name: {name} for pair in links.items() for name in pair if name is not None}
    for one, other in links.items():
        if other is not None and group[one] is not group[other]:
            group[one] |= group[other]
            for name in group[other]:
                group[name] = group[one]
    return {name: min(n for n in group[name] if n in links) for name in links}


def _check_shares(shares: Floats) -> None:
    bad = ~((shares >= 0.0) & (shares <= 1.0))
    if np.any(bad):
        raise DomainError("clear", float(shares[bad][0]), "a share from 0 to 1")
