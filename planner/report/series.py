"""Arrays for the figures, taken from the records, so that the figures themselves compute nothing."""

from __future__ import annotations

from collections.abc import Iterable

import numpy as np

from planner.records import Band, Bools, Floats, Forecast, Look, Measurable, Windows
from planner.units import mjd_of_date

UNIX_EPOCH_MJD = 40587.0  # MJD of 1970-01-01, where matplotlib's dates begin; from the two calendars
LIKELY = 0.5  # a feature counts as "likely measurable" in figures from this chance on; our choice


def figure_days(mjd: Floats | float) -> Floats:
    """Days since 1970-01-01, the number that a matplotlib date axis wants; same shape as ``mjd``."""
    return np.asarray(mjd, dtype=float) - UNIX_EPOCH_MJD


def night_days(nights: Iterable[str]) -> Floats:
    """Days since 1970 of the midnight that ends each evening date, (T,)."""
    return figure_days(np.array([mjd_of_date(night) + 1.0 for night in nights], dtype=float))


def night_hours(windows: Windows, target: str) -> Floats:
    """Hours in which a target can be observed, (setups, T)."""
    found = np.zeros((len(windows.setups), len(windows.nights)))
    if target in windows.targets:
        mine = windows.target == windows.targets.index(target)
        np.add.at(found, (windows.setup[mine], windows.night[mine]), windows.minutes[mine] / 60.0)
    return found


def was_considered(windows: Windows, target: str, setup: str) -> bool:
    """Tell whether the ledger holds any hour, lost or left, of a target with a setup."""
    ledger = windows.ledger
    if target not in ledger.targets or setup not in ledger.setups:
        return False
    i, j = ledger.targets.index(target), ledger.setups.index(setup)
    return bool(ledger.lost_hours[i, j].any() or ledger.left_hours[i, j].any())


def moon_by_night(nights: Iterable[str]) -> Floats:
    """Illuminated fraction of the Moon at the midnight (UTC) that ends each evening date, (T,)."""
    from planner.sky.sun_moon import moon_illumination

    mjd = np.array([mjd_of_date(night) + 1.0 for night in nights], dtype=float)
    return np.asarray(moon_illumination(mjd), dtype=float)


def moon_matters(windows: Windows, target: str) -> bool:
    """Tell whether any window of a target is an optical one."""
    if target not in windows.targets:
        return False
    mine = windows.target == windows.targets.index(target)
    return bool(np.isfinite(windows.moon_separation_deg[mine]).any())


def bands_of(forecast: Forecast, target: str, feature: str) -> tuple[Band, ...]:
    """Bands of one feature, the main observable first."""
    return tuple(b for b in forecast.target(target).bands if b.feature == feature)


def measurable_of(forecast: Forecast, target: str, feature: str) -> tuple[Measurable, ...]:
    """When one feature is measurable, one record a setup."""
    return tuple(m for m in forecast.target(target).measurable if m.feature == feature)


def features_of(forecast: Forecast) -> tuple[tuple[str, str], ...]:
    """Every (target, feature) of a forecast, in order."""
    return tuple(dict.fromkeys((t.target, band.feature) for t in forecast.targets for band in t.bands))


def likely_nights(measurable: Iterable[Measurable], count: int) -> Bools:
    """Nights on which at least one setup can measure the feature with a chance of one half or more, (T,)."""
    likely = np.zeros(count, dtype=bool)
    for m in measurable:
        likely |= np.nan_to_num(m.chance) >= LIKELY
    return likely


def looks_on_band(
    forecast: Forecast, band: Band, looks: Iterable[Look], measurable: Iterable[Measurable]
) -> list[tuple[Look, float, bool]]:
    """Each look with the median of the observable at its start, and whether it will likely measure the feature."""
    chances = {m.setup: m.chance for m in measurable}
    found = []
    for look in looks:
        if look.slot.night not in forecast.nights:
            continue
        night = forecast.nights.index(look.slot.night)
        middle = float(band.quantiles[2, night])
        chance = chances.get(look.slot.setup)
        if np.isfinite(middle):
            found.append((look, middle, chance is not None and float(chance[night]) >= LIKELY))
    return found


def setups_in(forecast: Forecast | None = None, windows: Windows | None = None) -> tuple[str, ...]:
    """Names of all setups, sorted, so that every figure gives a setup the same colour."""
    names = {m.setup for t in forecast.targets for m in t.measurable} if forecast else set()
    return tuple(sorted(names | set(windows.setups if windows else ())))
