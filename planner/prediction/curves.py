"""The forecast: every observable against date with bands, and when it can be measured."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np

from planner.campaign.records import SetupRef, Site, Target
from planner.prediction.look import LookErrors, look_errors
from planner.prediction.look_rings import CameraSky, fwhm_arcsec, ring_view, source_mag
from planner.prediction.model import FeatureModel, TargetModel
from planner.prediction.rings import RingModel
from planner.records import BAND_SHARES, Band, Belief, Bools, Floats, Measurable, TargetForecast, Track

SPREAD_SHARES = (0.16, 0.50, 0.84)
THIN_LIMIT = 0.02  # depth/distance above which the paraboloid is off by 1 % (z / 2D) in radius


def quantiles(values: Floats, shares: Sequence[float]) -> tuple[Floats, Floats]:
    """Quantiles (len(shares), T) of values (N, T) over the draws that are not nan, and the share that is not.

    Midpoint rule between order statistics (as numpy's default); nan where no draw has a value.
    """
    ordered = np.sort(values, axis=0)  # nan last
    count = np.isfinite(values).sum(axis=0)
    out = np.full((len(shares), values.shape[1]), np.nan)
    columns = np.arange(values.shape[1])
    for i, share in enumerate(shares):
        at = share * np.maximum(count - 1, 0)
        low = np.floor(at).astype(int)
        high = np.minimum(low + 1, np.maximum(count - 1, 0))
        part = at - low
        with np.errstate(invalid="ignore"):
            value = ordered[low, columns] * (1 - part) + ordered[high, columns] * part
        out[i] = np.where(count > 0, value, np.nan)
    return out, count / len(values)


def reference_sky(target: Target, setup: SetupRef, nights: int) -> CameraSky:
    """Conditions a forecast is made for: median seeing, dark sky, the target at its highest."""
    site, camera = setup.site, setup.camera
    assert isinstance(site, Site)
    assert camera is not None
    highest = 90.0 - abs(site.latitude_deg - target.position.dec_deg)
    airmass = np.full(nights, 1.0 / np.sin(np.radians(max(highest, camera.lowest_altitude_deg, 10.0))))
    return CameraSky(
        fwhm_arcsec(site, airmass), airmass, np.full(nights, site.sky_mag_arcsec2[camera.filter]),
        site.extinction_mag[camera.filter],
    )  # fmt: skip


def target_forecast(
    model: TargetModel,
    belief: Belief,
    nights_mjd: Floats,
    setups: Sequence[SetupRef],
    tracks: Mapping[tuple[str, str], Track],
) -> TargetForecast:
    """Forecast of one target on every night of the season."""
    theta = belief.draws
    bands = [band for feature in model.features for band in feature_bands(feature, theta, nights_mjd)]
    measurable: list[Measurable] = []
    for setup in setups:
        track = tracks.get((model.target.name, setup.name))
        if setup.is_array and (track is None or track.hours_up <= 0):
            continue
        sky = seconds = None
        if not setup.is_array:
            assert setup.camera is not None
            sky = reference_sky(model.target, setup, len(nights_mjd))
            seconds = np.full(len(nights_mjd), setup.camera.longest_look_min * 60.0)
        errors = look_errors(model, theta, nights_mjd, setup, sky=sky, seconds=seconds, track=track)
        for i, feature in enumerate(model.features):
            if isinstance(feature, RingModel) == setup.is_array:
                continue  # cameras measure rings, arrays measure knots
            span = _span(model, feature, theta, nights_mjd, setup, sky, track)
            measurable.append(_measurable(feature.name, setup.name, nights_mjd, errors, i, span))
    return TargetForecast(
        model.target.name, tuple(bands), tuple(measurable), tuple(warnings_of(model, theta, nights_mjd, setups))
    )


def feature_bands(feature: FeatureModel, theta: Floats, mjd: Floats) -> list[Band]:
    """Bands of a feature's main observables."""
    if isinstance(feature, RingModel):
        state = feature.state(theta, mjd)
        rows = [
            ("radius", "arcsec", np.where(state.exists, state.mean_radius_arcsec, np.nan)),
            (
                "surface brightness",
                f"{feature.light_filter} mag/arcsec2",
                np.where(state.exists, state.mag_arcsec2, np.nan),
            ),
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


def _measurable(
    feature: str, setup: str, mjd: Floats, errors: LookErrors, i: int, span: tuple[Floats, Floats]
) -> Measurable:
    ok = errors.measurable[:, :, i]
    some = ok.any(axis=1)
    first = np.where(some, mjd[np.argmax(ok, axis=1)], np.nan)
    last = np.where(some, mjd[len(mjd) - 1 - np.argmax(ok[:, ::-1], axis=1)], np.nan)
    return Measurable(
        feature, setup, ok.mean(axis=0),
        quantiles(first[:, None], SPREAD_SHARES)[0][:, 0], quantiles(last[:, None], SPREAD_SHARES)[0][:, 0],
        float(1.0 - some.mean()), _main_reason(feature, errors, ok), span,
    )  # fmt: skip


def _main_reason(feature: str, errors: LookErrors, ok: Bools) -> str:
    shares = {b.reason: float(b.mask.mean()) for b in errors.blocked if b.feature == feature}
    worst = max(shares, key=lambda reason: shares[reason], default="")
    return worst if worst and shares[worst] > 0 and not ok.all() else ""


def _span(
    model: TargetModel, feature: FeatureModel, theta: Floats, mjd: Floats, setup: SetupRef,
    sky: CameraSky | None, track: Track | None,
) -> tuple[Floats, Floats]:  # fmt: skip
    """Smallest and largest radius or separation that the setup could measure, medians over draws."""
    from planner.instruments import camera, interferometer

    few = theta[: min(128, len(theta))]  # a median for a figure
    if isinstance(feature, RingModel):
        assert setup.camera is not None
        assert sky is not None
        view = ring_view(feature, few, mjd, setup.camera, sky)
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
    found = []
    middle = mjd[[len(mjd) // 2]]
    for ring in model.features:
        if not isinstance(ring, RingModel):
            continue
        delay = ring.delay_days(theta, middle)
        depth = ring.depth_pc(theta, delay)
        share = float(np.nanmedian(np.abs(depth) / ring.distance.value(theta)))
        if share > THIN_LIMIT:
            found.append(
                f"{ring.name}: depth is {100 * share:.1f} % of the distance; the paraboloid's radius is "
                f"{50 * share:.1f} % small there (the exact ellipsoid is not used for sheets yet)"
            )
        state = ring.state(theta, middle)
        blur = [fwhm_arcsec(s.site, np.ones(1))[0] for s in setups if isinstance(s.site, Site)]
        width = float(np.nanmedian(state.width_arcsec))
        if blur and np.isfinite(width) and width < min(blur):
            found.append(
                f"{ring.name}: the ring is {width:.2f} arcsec wide, less than the best median image of "
                f"{min(blur):.2f} arcsec: not resolved in width, its surface brightness is diluted"
            )
        assert ring.target.outburst is not None
        with np.errstate(invalid="ignore", divide="ignore"):
            from planner.units import C_PC_PER_DAY

            path = (depth + C_PC_PER_DAY * delay) * ring.target.outburst.lasting_days / delay
            thick = float(np.nanmedian(ring.record.dust.thickness_pc / path))
        if thick > 1:
            found.append(
                f"{ring.name}: the sheet is {thick:.1f} times thicker than the layer lit at one moment; "
                "the thin-sheet surface brightness is too bright by about that factor unless anchored"
            )
    return found
