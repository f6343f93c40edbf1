"""The forecast: every observable against date with bands, and when it can be measured."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np

from planner.campaign.records import ArraySite, SetupRef, Site, Target
from planner.prediction.arclets import ArcletModel
from planner.prediction.conditions import CameraSky, conditions, fwhm_arcsec
from planner.prediction.derived import derived_of
from planner.prediction.in_time import over_nights
from planner.prediction.look import look_errors
from planner.prediction.look_rings import apart_days, echo_view, source_mag
from planner.prediction.model import FeatureModel, TargetModel
from planner.prediction.nightly import every_night, judged_nights, new_months
from planner.prediction.once import remember, remembering
from planner.prediction.ring_shapes import FilledShape
from planner.prediction.ring_warnings import arclet_warnings, ring_warnings
from planner.prediction.rings import RingModel, RingState
from planner.records import BAND_SHARES, Band, Belief, Bools, Floats, Ints, Measurable, TargetForecast, Track
from planner.units import date_of_mjd, mjd_of_date

SPREAD_SHARES = (0.16, 0.50, 0.84)
FEW = 32  # draws for a median that only a figure shows
FIGURE_NIGHTS = 15  # nights between the points of such a line
SHARP_ARCSEC = 1.0  # image FWHM taken for the separation time where a target has no camera


def quantiles(values: Floats, shares: Sequence[float]) -> tuple[Floats, Floats]:
    """Quantiles (len(shares), T) of values (N, T) over the draws that are not nan, and the share that is not.

    Midpoint rule between order statistics (as numpy's default); nan where no draw has a value.
    """
    # sorted along rows of contiguous memory, which is several times faster than down columns
    ordered = np.sort(np.ascontiguousarray(values.T), axis=-1)  # (T, N), nan last
    last = ordered[:, -1]
    if np.isfinite(last).all() and np.isfinite(ordered[:, 0]).all():
        count = np.full(len(ordered), values.shape[0])
    else:
        count = np.isfinite(ordered).sum(axis=-1)
    out = np.full((len(shares), len(ordered)), np.nan)
    rows = np.arange(len(ordered))
    for i, share in enumerate(shares):
        at = share * np.maximum(count - 1, 0)
        low = np.floor(at).astype(int)
        high = np.minimum(low + 1, np.maximum(count - 1, 0))
        part = at - low
        with np.errstate(invalid="ignore"):
            value = ordered[rows, low] * (1 - part) + ordered[rows, high] * part
        out[i] = np.where(count > 0, value, np.nan)
    return out, count / len(values)


def reference_sky(target: Target, setup: SetupRef, nights: int, nights_mjd: Floats | None = None) -> CameraSky:
    """Conditions a forecast is made for: median seeing of the month, dark sky, the target at its highest.

    ``nights_mjd``: 24h UTC of each evening date; left out, the first month's seeing stands for all of ``nights``.
    """
    site, camera = setup.site, setup.camera
    assert not isinstance(site, ArraySite)
    assert camera is not None
    airmass = np.ones(nights)
    if isinstance(site, Site):
        highest = 90.0 - abs(site.latitude_deg - target.position.dec_deg)
        airmass = np.full(nights, 1.0 / np.sin(np.radians(max(highest, camera.lowest_altitude_deg, 10.0))))
    months = np.ones(nights, dtype=np.int64)
    if nights_mjd is not None:
        months = np.array([date_of_mjd(mjd - 1.0).month for mjd in nights_mjd], dtype=np.int64)
    return conditions(setup, months, airmass, np.full(nights, site.sky_mag_arcsec2[camera.filter]))


def target_forecast(
    model: TargetModel,
    belief: Belief,
    nights_mjd: Floats,
    setups: Sequence[SetupRef],
    tracks: Mapping[tuple[str, str], Track],
) -> TargetForecast:
    """Forecast of one target on every night of the season."""
    with remembering():
        return _forecast(model, belief.draws, locked(nights_mjd), setups, tracks)


def locked(values: Floats) -> Floats:
    """A read-only copy."""
    copy = np.array(values)
    copy.setflags(write=False)
    return copy


def _forecast(
    model: TargetModel, theta: Floats, nights_mjd: Floats, setups: Sequence[SetupRef],
    tracks: Mapping[tuple[str, str], Track],
) -> TargetForecast:  # fmt: skip
    few = theta[:FEW]
    for feature in model.features:
        if isinstance(feature, RingModel):
            share_state(feature, theta, nights_mjd)
    images = [float(fwhm_arcsec(s.site, np.ones(1))[0]) for s in setups if isinstance(s.site, Site)]
    images += [s.camera.image_fwhm_arcsec for s in setups if s.camera is not None and s.camera.image_fwhm_arcsec]
    sharp = min(images, default=SHARP_ARCSEC)
    bands = [band for feature in model.features for band in feature_bands(feature, theta, nights_mjd, sharp)]
    measurable: list[Measurable] = []
    for setup in setups:
        track = tracks.get((model.target.name, setup.name))
        if setup.is_array and (track is None or track.hours_up <= 0):
            continue
        ok, reasons = measurable_nights(model, theta, nights_mjd, setup, track)
        for i, feature in enumerate(model.features):
            if isinstance(feature, RingModel | ArcletModel) == setup.is_array:
                continue  # cameras measure rings, arrays measure knots
            span = _span_of_figure(model, feature, few, nights_mjd, setup, track)
            measurable.append(
                _measurable(feature.name, setup.name, nights_mjd, ok[:, :, i], reasons.get(feature.name, ""), span)
            )
    return TargetForecast(
        model.target.name,
        tuple(bands),
        tuple(measurable),
        tuple(warnings_of(model, theta, nights_mjd, setups)),
        derived_of(model, theta),
    )


def share_state(ring: RingModel, theta: Floats, mjd: Floats) -> None:
    """Find the state of a ring on all nights once, from a few moments, for the steps of this forecast."""

    def compute(draws: Floats, moments: Floats) -> tuple[Floats, ...]:
        state = ring.state(draws, moments)
        shown = np.where(state.exists, state.mean_radius_arcsec, np.nan)
        growth = ring.growth_arcsec_day(draws, moments)
        return shown, state.radius_arcsec, state.width_arcsec, state.mag_arcsec2, growth

    mean, radius, width, mag, growth = over_nights(compute, theta, mjd)
    remember(RingModel.state, ring, theta, mjd, RingState(np.isfinite(mean), radius, mean, width, mag))
    remember(RingModel.width_then, ring, theta, mjd, width)
    remember(RingModel.growth_arcsec_day, ring, theta, mjd, growth)


def share_part(
    ring: RingModel, whole: tuple[Floats, Floats], at: tuple[Ints, Ints], part: tuple[Floats, Floats]
) -> None:
    """Hand some draws and nights (``at``) of a ring's known state on to the steps that work on that ``part``."""
    cut = np.ix_(*at)
    state = ring.state(*whole)
    taken = RingState(
        exists=state.exists[cut], radius_arcsec=state.radius_arcsec[cut],
        mean_radius_arcsec=state.mean_radius_arcsec[cut], width_arcsec=state.width_arcsec[cut],
        mag_arcsec2=state.mag_arcsec2[cut],
    )  # fmt: skip
    remember(RingModel.state, ring, *part, taken)
    remember(RingModel.width_then, ring, *part, ring.width_then(*whole)[cut])
    remember(RingModel.growth_arcsec_day, ring, *part, ring.growth_arcsec_day(*whole)[cut])


def feature_bands(feature: FeatureModel, theta: Floats, mjd: Floats, fwhm: float = SHARP_ARCSEC) -> list[Band]:
    """Bands of a feature's main observables; ``fwhm``: of the image, for the separation time in a difference."""
    if isinstance(feature, RingModel):
        rows = _ring_rows(feature, theta, mjd, fwhm)
    elif isinstance(feature, ArcletModel):
        apart = apart_days(feature, theta, mjd, np.full(len(mjd), fwhm))
        rows = [
            ("motion since reference", "arcsec", feature.moved_arcsec(theta, mjd)),
            ("separation time", "d", np.where(np.isfinite(apart), apart, np.nan)),
        ]
    else:
        rows = []
        for name, spot in zip(feature.spots, feature.spot_states(theta, mjd), strict=True):
            label = f"{name} " if name else ""
            rows.append((f"{label}separation", "mas", spot.separation_mas))
            rows.append((f"{label}flux at {feature.record.flux.ghz:g} GHz", "mJy", spot.flux_mjy))
    found = []
    for observable, unit, values in rows:
        q, exists = quantiles(values, BAND_SHARES)
        found.append(Band(feature.name, observable, unit, q, exists))
    return found


def _ring_rows(ring: RingModel, theta: Floats, mjd: Floats, fwhm: float) -> list[tuple[str, str, Floats]]:
    state = ring.state(theta, mjd)
    rows = [
        ("radius", "arcsec", state.mean_radius_arcsec),
        ("surface brightness", f"{ring.light_filter} mag/arcsec2", state.mag_arcsec2),
    ]
    if not isinstance(ring.shape, FilledShape):
        apart = apart_days(ring, theta, mjd, np.full(len(mjd), fwhm))
        rows.append(("whole-ring brightness", f"{ring.light_filter} mag", ring.whole_mag(state)))
        rows.append(("separation time", "d", np.where(np.isfinite(apart), apart, np.nan)))
    return [(name, unit, np.where(state.exists, values, np.nan)) for name, unit, values in rows]


def measurable_nights(
    model: TargetModel, theta: Floats, nights_mjd: Floats, setup: SetupRef, track: Track | None
) -> tuple[Bools, dict[str, str]]:
    """What is measurable in each draw and night, (B, T, F), and what most often stops each feature that is stopped."""
    reasons: dict[str, dict[str, float]] = {}

    def judge(draws: Ints, nights: Ints) -> Bools:
        some, mjd = locked(theta[draws]), locked(nights_mjd[nights])
        sky = seconds = None
        if setup.camera is not None:
            for feature in model.features:
                if isinstance(feature, RingModel):
                    share_part(feature, (theta, nights_mjd), (draws, nights), (some, mjd))
            sky = reference_sky(model.target, setup, len(mjd), mjd)
            seconds = np.full(len(mjd), setup.camera.longest_look_min * 60.0)
        errors = look_errors(model, some, mjd, setup, sky=sky, seconds=seconds, track=track, with_sigma=False)
        if not reasons:  # the first call sees all draws
            for block in errors.blocked:
                reasons.setdefault(block.feature, {})[block.reason] = float(block.mask.mean())
        return errors.measurable

    jumps = _jumps(model, nights_mjd, setup, track)
    ok = every_night(judge, len(theta), judged_nights(len(nights_mjd), jumps), len(nights_mjd))
    worst = {}
    for i, feature in enumerate(model.features):
        shares = reasons.get(feature.name, {})
        top = max(shares, key=lambda reason: shares[reason], default="")
        worst[feature.name] = top if top and shares[top] > 0 and not ok[:, :, i].all() else ""
    return ok, worst


def _jumps(model: TargetModel, nights_mjd: Floats, setup: SetupRef, track: Track | None) -> list[int]:
    """Nights at which what a look measures may jump: months of other seeing, cloud or opacity, and templates."""
    templates = [mjd_of_date(t.on) + 1.0 for f in model.features for t in getattr(f.record, "templates", ())]
    found = [int(i) for i in np.searchsorted(nights_mjd, templates)]
    if setup.camera is None:
        return found + (new_months(nights_mjd).tolist() if track is not None and track.noise_by_month_jy else [])
    sky = reference_sky(model.target, setup, len(nights_mjd), nights_mjd)
    for values in (sky.fwhm_arcsec, np.broadcast_to(sky.extinction_mag, nights_mjd.shape)):
        found += (np.flatnonzero(np.diff(values)) + 1).tolist()
    return found


def _measurable(
    feature: str, setup: str, mjd: Floats, ok: Bools, reason: str, span: tuple[Floats, Floats]
) -> Measurable:
    some = ok.any(axis=1)
    first = np.where(some, mjd[np.argmax(ok, axis=1)], np.nan)
    last = np.where(some, mjd[len(mjd) - 1 - np.argmax(ok[:, ::-1], axis=1)], np.nan)
    return Measurable(
        feature, setup, ok.mean(axis=0),
        quantiles(first[:, None], SPREAD_SHARES)[0][:, 0], quantiles(last[:, None], SPREAD_SHARES)[0][:, 0],
        float(1.0 - some.mean()), reason, span,
    )  # fmt: skip


def _span_of_figure(
    model: TargetModel, feature: FeatureModel, few: Floats, mjd: Floats, setup: SetupRef, track: Track | None
) -> tuple[Floats, Floats]:
    """``_span`` on every night from a few: it is a smooth line of a figure."""
    at = np.unique(np.append(np.arange(0, len(mjd), FIGURE_NIGHTS), len(mjd) - 1))
    sky = None if setup.is_array else reference_sky(model.target, setup, len(at), mjd[at])
    low, high = _span(model, feature, few, mjd[at], setup, sky, track)
    return np.interp(mjd, mjd[at], low), np.interp(mjd, mjd[at], high)


def _span(
    model: TargetModel, feature: FeatureModel, few: Floats, mjd: Floats, setup: SetupRef,
    sky: CameraSky | None, track: Track | None,
) -> tuple[Floats, Floats]:  # fmt: skip
    """Smallest and largest radius or separation that the setup could measure, medians over draws."""
    from planner.instruments import camera, interferometer

    if isinstance(feature, RingModel | ArcletModel):
        assert setup.camera is not None
        assert sky is not None
        if isinstance(feature, ArcletModel):  # its main observable is a shift, which nothing limits
            return np.full(len(mjd), np.nan), np.full(len(mjd), np.nan)
        view = echo_view(feature, few, mjd, setup.camera, sky)
        glare = camera.glare_radius_arcsec(
            setup.camera, source_mag(model, setup.camera.filter), view.mag_arcsec2, sky.fwhm_arcsec
        )
        low = quantiles(glare + view.width_arcsec / 2, (0.5,))[0][0]
        return low, np.full(len(mjd), setup.camera.field_arcmin * 30.0)
    assert track is not None
    spot = feature.spot_states(few, mjd)[0]
    pa = quantiles(spot.pa_deg, (0.5,))[0][0]
    cut = interferometer.cut_fwhm(
        track.beam_major_mas, track.beam_minor_mas, track.beam_pa_deg, np.nan_to_num(pa, nan=0.0)
    )
    return 0.5 * np.asarray(cut) * np.ones(len(mjd)), np.full(len(mjd), np.nan)


def warnings_of(model: TargetModel, theta: Floats, mjd: Floats, setups: Sequence[SetupRef]) -> list[str]:
    """Assumptions of the model that fail in the median draw at mid-season, each with its number."""
    found: list[str] = []
    middle = mjd[[len(mjd) // 2]]
    for feature in model.features:
        if isinstance(feature, RingModel):
            found += ring_warnings(feature, theta, middle, setups)
        elif isinstance(feature, ArcletModel):
            found += arclet_warnings(feature, theta, middle, setups)
    return found
