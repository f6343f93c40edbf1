"""First answers about jets for ``check``: how often to look at a knot, and the angles that a stated speed allows."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np

from planner.campaign.records import KnotMotion, SetupRef
from planner.physics import jet
from planner.prediction.knots import KnotModel, PairModel
from planner.prediction.look import look_errors
from planner.prediction.model import TargetModel
from planner.prediction.quantities import QUANTITIES
from planner.records import Floats, Track
from planner.units import YEAR_DAYS

SMEARED_BEAMS = 0.5  # motion within one look, in beams, above which an image is smeared; common practice, no source
FEW = 64  # draws: these answers are medians
EVERY = 12  # nights: and they change slowly


def jet_answers(
    model: TargetModel, theta: Floats, nights_mjd: Floats, setups: Sequence[SetupRef],
    tracks: Mapping[tuple[str, str], Track],
) -> list[tuple[str, str]]:  # fmt: skip
    """Sentences (feature, text) about the moving jets of a target, at draws (N, P)."""
    few = theta[:FEW]
    found: list[tuple[str, str]] = []
    for feature in model.features:
        if isinstance(feature, KnotModel) and isinstance(feature.record.motion, KnotMotion):
            found += [(feature.name, text) for text in _roots(model, feature, few)]
    for setup in setups:
        track = tracks.get((model.target.name, setup.name))
        if not setup.is_array or track is None or track.hours_up <= 0:
            continue
        errors = along_mas(model, few, nights_mjd[::EVERY], setup, track)
        for name, sigma in errors.items():
            found.append((name, spacing_words(model, name, few, sigma, setup.name)))
            smear = smear_words(model, name, few, track, setup.name)
            if smear:
                found.append((name, smear))
    return found


def along_mas(model: TargetModel, theta: Floats, mjd: Floats, setup: SetupRef, track: Track) -> dict[str, float]:
    """Median error along the motion of each moving jet against the core, wander included; nan if never measured."""
    look = look_errors(model, theta, mjd, setup, track=track)
    beam = np.sqrt(track.beam_major_mas * track.beam_minor_mas)
    wander = model.target.nuisances.core_wander_beam * beam
    found, at = {}, 0
    for i, feature in enumerate(model.features):
        width = len(feature.observables)
        if isinstance(feature, KnotModel | PairModel) and not feature.stationary:
            offset = feature.offset_mas(theta, mjd[[0, -1]])[..., :2]
            toward = offset[:, 1] - offset[:, 0]
            toward = toward / np.hypot(toward[:, :1], toward[:, 1:])
            turned = toward @ look.rotation[at : at + 2, at : at + 2].T  # (B, 2) along the beam's axes
            ok = look.measurable[:, :, i]
            each = np.sqrt(((turned[:, None, :] * look.sigma[:, :, at : at + 2]) ** 2).sum(axis=-1))
            found[feature.name] = float(np.hypot(np.median(each[ok]), wander)) if ok.any() else float("nan")
        at += width
    return found


def spacing_words(model: TargetModel, name: str, theta: Floats, sigma_mas: float, setup: str) -> str:
    """Smallest useful and largest safe time between epochs: 2 sigma / mu, and spacing / (2 mu)."""
    feature = model.feature(name)
    assert isinstance(feature, KnotModel | PairModel)
    if not np.isfinite(sigma_mas):
        return f"{setup}: not measured, so no spacing of epochs is told"
    speed = float(np.median(feature.speed_mas_yr(theta))) / YEAR_DAYS
    least = 2.0 * sigma_mas / speed
    text = f"{setup}: it moves 2 sigma (2 x {sigma_mas:.2g} mas) in {days_words(least)}, the least useful spacing"
    most = safe_gap_days(feature, theta)
    if not np.isfinite(most):
        return text
    assert isinstance(feature, KnotModel)
    assert feature.record.neighbours is not None
    away = feature.record.neighbours.spacing_mas
    text += f"; beyond {days_words(most)} it can be taken for its neighbour {away:g} mas away"
    if least > most:
        text += ": no spacing is both useful and safe; a finer beam or a higher frequency is needed"
    return text


def safe_gap_days(feature: KnotModel | PairModel, theta: Floats) -> float:
    """Longest safe time between epochs, half a knot spacing of motion at the median speed; inf without neighbours."""
    neighbours = feature.record.neighbours if isinstance(feature, KnotModel) else None
    if neighbours is None:
        return float("inf")
    return neighbours.spacing_mas / (2.0 * float(np.median(feature.speed_mas_yr(theta))) / YEAR_DAYS)


def smear_words(model: TargetModel, name: str, theta: Floats, track: Track, setup: str) -> str:
    """Say when a knot moves by more than half a beam within one look ("" if it does not).

    The error model lowers the peak and widens the knot accordingly (``look_knots``); fitting the motion within the
    look, as Wood et al. 2021 do (from memory), would recover most of it and is not assumed.
    """
    feature = model.feature(name)
    assert isinstance(feature, KnotModel | PairModel)
    moved = float(np.median(feature.speed_mas_yr(theta))) / YEAR_DAYS * track.look_hours / 24.0
    beam = float(np.sqrt(track.beam_major_mas * track.beam_minor_mas))
    if moved <= SMEARED_BEAMS * beam:
        return ""
    longest = track.look_hours * SMEARED_BEAMS * beam / moved
    return (
        f"{setup}: it moves {moved:.2g} mas, {moved / beam:.2g} beams, within a look of {track.look_hours:.3g} h: the "
        f"image smears it and the errors count that; look for less than {longest:.2g} h, or fit its motion in the look"
    )


def days_words(value: float) -> str:
    """A number of days, two digits, never in powers of ten."""
    return f"{value:.0f} d" if value >= 10 else f"{value:.2g} d"


def _roots(model: TargetModel, feature: KnotModel, theta: Floats) -> list[str]:
    """Both angles at which the stated true speed shows the believed apparent speed."""
    motion = feature.record.motion
    assert isinstance(motion, KnotMotion)
    if motion.beta is None:
        return []
    apparent = QUANTITIES[("knot", "apparent_speed_c")](model, feature, theta)
    beta, middle = motion.beta.median(), float(np.median(apparent))
    small, large = (float(a) for a in jet.angles_deg(beta, middle))
    if np.isnan(small):
        return [f"beta {beta:g}: {jet.why_no_angle(beta, middle)}"]
    # every draw of the speed with a beta of its own law, in an order that has nothing to do with the speeds
    shares = np.random.default_rng(0).permutation((np.arange(len(theta)) + 0.5) / len(theta))
    none = float(np.isnan(jet.angles_deg(motion.beta.quantile(shares), apparent)[0]).mean())
    text = f"beta {beta:g} shows {middle:.3g} c at an angle of {small:.3g} or of {large:.3g} deg; both stay possible"
    return [text + (f" ({100 * none:.0f} % of draws allow none)" if none >= 0.005 else "")]
