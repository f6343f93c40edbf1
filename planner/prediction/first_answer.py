"""First answers for ``check``: measurable from when, moves how much, and what ties parameters together."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from planner.prediction.arclets import ArcletModel
from planner.prediction.model import FeatureModel, TargetModel
from planner.prediction.rings import RingModel
from planner.records import Band, Floats, Forecast, Measurable, TargetForecast
from planner.units import date_of_mjd

TIED = 0.9  # correlation above which two numbers are called tied
EPOCHS = 8  # evenly spaced epochs of the trial season
RING_SHARE, KNOT_MAS = 0.003, 0.02  # errors of the trial epochs: share of the radius; mas
ARCLET_SHARE = 0.05  # and share of an arclet's width
MAIN_OBSERVABLES = ("radius", "motion since reference", "separation", "approaching separation")


def answers_of(one: TargetForecast, whole: Forecast) -> list[tuple[str, str]]:
    """One sentence per feature: how it moves over the season, and when each setup can measure it."""
    found = []
    for band in one.bands:
        if band.observable not in MAIN_OBSERVABLES:
            continue
        text = _moves(band, whole)
        for m in one.measurable:
            if m.feature == band.feature:
                text += f"; {m.setup}: {_when(m, whole)}"
        text += _apart(one, band.feature)
        found.append((band.feature, text))
    return found


def _apart(one: TargetForecast, feature: str) -> str:
    """When two looks at an echo come apart in a difference image; "" for what is not subtracted."""
    times = [b.quantiles[2] for b in one.bands if b.feature == feature and b.observable == "separation time"]
    some = times[0][np.isfinite(times[0])] if times else np.zeros(0)
    return f"; two epochs come apart in a difference image after {float(np.median(some)):.3g} d" if len(some) else ""


def _moves(band: Band, whole: Forecast) -> str:
    there = np.flatnonzero(np.isfinite(band.quantiles[2]))
    if not len(there):
        return f"no {band.observable} in any draw: it does not appear this season"
    first, last = there[0], there[-1]
    low, mid, high = band.quantiles[1, first], band.quantiles[2, first], band.quantiles[3, first]
    change = band.quantiles[2, last] - mid
    days = max(whole.mjd[last] - whole.mjd[first], 1.0)
    return (
        f"{band.observable} {mid:.4g} {band.unit} ({low:.4g} to {high:.4g}) on {whole.nights[first]}, "
        f"moves {_short(change)} {band.unit} by {whole.nights[last]} ({_short(change / days * 30.4375)} a month)"
    )


def _when(m: Measurable, whole: Forecast) -> str:
    if m.never > 0.995:
        return f"not measurable this season ({m.reason or 'no draw allows it'})"
    first = m.first_mjd[1]
    start = "measurable from the start" if first <= whole.mjd[0] + 0.5 else f"measurable from {_night(first)}"
    if m.first_mjd[2] - m.first_mjd[0] > 1:
        start += f" ({_night(m.first_mjd[0])} to {_night(m.first_mjd[2])})"
    if m.last_mjd[1] < whole.mjd[-1] - 0.5:
        start += f" until {_night(m.last_mjd[1])}"
    if m.never >= 0.005:
        start += f", never in {100 * m.never:.0f} % of draws"
    if m.reason and m.chance.min() < 0.995:
        start += f"; in the way: {m.reason}"
    return start


def _short(value: float) -> str:
    """Signed, three digits, never in powers of ten."""
    digits = max(0, 2 - int(np.floor(np.log10(abs(value))))) if value else 0
    return f"{value:+,.{digits}f}".replace(",", "\N{NARROW NO-BREAK SPACE}")


def _night(mjd: float) -> str:
    return date_of_mjd(mjd - 1.0).isoformat()  # the forecast's moment is 24h of the evening date


def ties_of(model: TargetModel, nights_mjd: Floats, setups: Sequence[str]) -> list[str]:
    """Pairs of wanted numbers that a season of good epochs leaves tied.

    A trial season of evenly spaced epochs with small errors is added to the prior at its mean; pairs whose
    correlation stays above 0.9 are named with the combination that is learned instead.
    """
    theta = np.concatenate([block.moments()[0] for block in model.blocks])[None, :]
    mjd = nights_mjd[np.linspace(0, len(nights_mjd) - 1, EPOCHS).astype(int)]
    rows = []
    for setup in setups or [None]:  # type: ignore[list-item]
        jacobian = model.derivatives(theta, mjd, setup)[0]
        value = model.observe(theta, mjd, setup)[0]
        scale = np.concatenate(
            [
                np.abs(value[:, columns]) * RING_SHARE
                if isinstance(f, RingModel)
                else np.full_like(value[:, columns], _trial_error(f))
                for f, columns in _columns(model)
            ],
            axis=-1,
        )
        with np.errstate(invalid="ignore"):
            rows.append(np.nan_to_num(jacobian / scale[..., None]).reshape(-1, model.size))
    stacked = np.concatenate(rows)
    covariance = np.linalg.inv(np.linalg.inv(model.belief_covariance) + stacked.T @ stacked)
    names = [n for block in model.blocks for n in block.names]
    wanted = [i for i, block in _owners(model) if not block]
    found = []
    for a, i in enumerate(wanted):
        for j in wanted[a + 1 :]:
            correlation = covariance[i, j] / np.sqrt(covariance[i, i] * covariance[j, j])
            if abs(correlation) > TIED:
                kind = "move together" if correlation > 0 else "move against one another"
                text = f"{_plain(names[i])} and {_plain(names[j])} stay tied ({kind}, correlation {correlation:+.2f})"
                if "distance_pc" in names[i] + names[j] and "depth_pc" in names[i] + names[j]:
                    text += ": radii fix depth_over_distance2, not each alone"
                found.append(text + _why_tied(names[i], names[j]))
    return found


def _trial_error(feature: FeatureModel) -> float:
    return ARCLET_SHARE * feature.record.width_arcsec if isinstance(feature, ArcletModel) else KNOT_MAS


def _why_tied(one: str, other: str) -> str:
    """What stands behind a tie that experts know."""
    ends = {name.rpartition("/")[2].removeprefix("ln ") for name in (one, other)}
    if ends == {"age_yr", "slope"}:
        return ": an age from place and motion alone is wrong by what the dust is inclined"
    if ends == {"distance_pc", "shell_radius_pc"}:
        return ": a young ring fixes radius/distance2; the day it stands still fixes the radius"
    if ends == {"distance_pc", "dust_distance_pc"}:
        return ": radii fix 1/dust distance - 1/source distance, not each alone"
    return ""


def _plain(name: str) -> str:
    return name.removeprefix("ln ")


def _columns(model: TargetModel) -> list[tuple[FeatureModel, slice]]:
    found: list[tuple[FeatureModel, slice]] = []
    at = 0
    for feature in model.features:
        found.append((feature, slice(at, at + len(feature.observables))))
        at += len(feature.observables)
    return found


def _owners(model: TargetModel) -> list[tuple[int, bool]]:
    """Index and whether it is a nuisance, of every coordinate."""
    flags = [block.nuisance for block in model.blocks for _ in block.names]
    return list(enumerate(flags))
