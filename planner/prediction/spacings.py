"""How far apart epochs should be: far enough to see motion, near enough to know what one looks at.

Rings: a look measures a radius to sigma; motion is sure after K_ERRORS of them. Knots: see ``jet_answers``; where the
Sun takes a target away for longer than the safe gap, that is said too.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from functools import lru_cache

import numpy as np

from planner.campaign.records import SetupRef, Target
from planner.prediction.curves import reference_sky
from planner.prediction.jet_answers import FEW, days_words, jet_answers, safe_gap_days
from planner.prediction.knots import KnotModel
from planner.prediction.look import look_errors
from planner.prediction.model import TargetModel
from planner.prediction.rings import RingModel
from planner.records import Floats, Track
from planner.units import date_of_mjd

K_ERRORS = 5.0  # motion of this many errors of one look is sure; common practice, no source


def spacing_answers(
    model: TargetModel, theta: Floats, nights_mjd: Floats, setups: Sequence[SetupRef],
    tracks: Mapping[tuple[str, str], Track],
) -> list[tuple[str, str]]:  # fmt: skip
    """Sentences (feature, text) about the time between epochs of every feature, at draws (N, P)."""
    found = ring_gaps(model, theta[:FEW], nights_mjd, setups)
    found += jet_answers(model, theta, nights_mjd, setups, tracks)
    found += sun_gaps(model, theta[:FEW], nights_mjd, setups)
    return found


def ring_gaps(
    model: TargetModel, theta: Floats, nights_mjd: Floats, setups: Sequence[SetupRef]
) -> list[tuple[str, str]]:
    """Days in which the mean radius moves by ``K_ERRORS`` errors of one look, median over draws at mid-season."""
    middle = nights_mjd[[len(nights_mjd) // 2]]
    found = []
    for setup in setups:
        if setup.camera is None or not any(isinstance(f, RingModel) for f in model.features):
            continue
        sky = reference_sky(model.target, setup, 1)
        seconds = np.array([setup.camera.longest_look_min * 60.0])
        errors = look_errors(model, theta, middle, setup, sky=sky, seconds=seconds)
        at = 0
        for i, feature in enumerate(model.features):
            width = len(feature.observables)
            if isinstance(feature, RingModel):
                sigma = errors.sigma[:, 0, at : at + width]
                ok = errors.measurable[:, 0, i]
                gap = _ring_gap(feature, theta, float(middle[0]), sigma, ok)
                if np.isfinite(gap):
                    text = f"{setup.name}: its radius moves {K_ERRORS:g} errors of one look in {days_words(gap)}"
                    found.append((feature.name, text))
            at += width
    return found


def _ring_gap(ring: RingModel, theta: Floats, mjd: float, sigma: Floats, ok: np.ndarray) -> float:
    with np.errstate(invalid="ignore", divide="ignore"):
        mean_error = 1.0 / np.sqrt((sigma**-2.0).sum(axis=-1))
        radii = ring.state(theta, np.array([mjd - 5.0, mjd + 5.0])).mean_radius_arcsec
        days = K_ERRORS * mean_error / (np.abs(radii[:, 1] - radii[:, 0]) / 10.0)
    some = days[ok & np.isfinite(days)]
    return float(np.median(some)) if len(some) else float("nan")


def sun_gaps(
    model: TargetModel, theta: Floats, nights_mjd: Floats, setups: Sequence[SetupRef]
) -> list[tuple[str, str]]:
    """Say when the Sun keeps a knot away for longer than it can safely go unseen, from the season's start on."""
    found = []
    for feature in model.features:
        safe = safe_gap_days(feature, theta) if isinstance(feature, KnotModel) else np.inf
        if not np.isfinite(safe):
            continue
        for setup in setups:
            limit = setup.receiver.sun_no_closer_deg if setup.receiver is not None else 0.0
            first, days = longest_near_sun(model.target, limit, float(nights_mjd[0]))
            if days > safe:
                text = (
                    f"{setup.name}: the Sun is within {limit:g} deg for {days} d from {date_of_mjd(first)}, longer "
                    f"than the {safe:.0f} d after which it can be taken for its neighbour"
                )
                found.append((feature.name, text))
    return found


def longest_near_sun(target: Target, limit_deg: float, from_mjd: float) -> tuple[float, int]:
    """First day and length in days of the longest run, in a year from ``from_mjd``, nearer the Sun than the limit."""
    days = from_mjd + np.arange(366.0)
    ra, dec = np.radians([target.position.ra_deg, target.position.dec_deg])
    place = np.array([np.cos(dec) * np.cos(ra), np.cos(dec) * np.sin(ra), np.sin(dec)])
    near = _sun_of_a_year(from_mjd) @ place > np.cos(np.radians(limit_deg))
    edges = np.flatnonzero(np.diff(np.concatenate([[0], near.astype(np.int8), [0]])))
    starts, ends = edges[::2], edges[1::2]
    if not len(starts):
        return from_mjd, 0
    k = int(np.argmax(ends - starts))
    return float(days[starts[k]]), int(ends[k] - starts[k])


@lru_cache(maxsize=8)  # every target of a campaign asks for the same year
def _sun_of_a_year(from_mjd: float) -> Floats:
    """Unit vectors to the Sun on 366 days, (366, 3)."""
    from planner.sky.sun_moon import vectors_km

    sun = vectors_km("sun", from_mjd + np.arange(366.0))
    unit = sun / np.linalg.norm(sun, axis=1, keepdims=True)
    unit.setflags(write=False)
    return np.asarray(unit)
