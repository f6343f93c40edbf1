"""Records of an invented campaign, made by hand: a ring, a knot, two cameras and an array."""

from __future__ import annotations

import datetime as dt

import numpy as np

from planner.records import (
    LIMITS,
    Account,
    Band,
    Forecast,
    GoalResult,
    Ledger,
    Look,
    Measurable,
    Mode,
    Outcome,
    Plan,
    Slot,
    State,
    TargetForecast,
    Windows,
)
from planner.units import mjd_of_date

NIGHTS = tuple((dt.date(2027, 2, 1) + dt.timedelta(days=i)).isoformat() for i in range(120))
MJD = np.array([mjd_of_date(night) + 1.0 for night in NIGHTS])
CAMERA, IMAGER, ARRAY = "north-hill/wide-camera", "south-plain/imager", "long-array/43ghz"
SETUPS = (CAMERA, IMAGER, ARRAY)
RING, KNOT = "Reed ring", "Heron K1"


def band(feature: str, observable: str, unit: str, middle: np.ndarray, width: np.ndarray, exists: float = 1.0) -> Band:
    """A band whose quantiles lie where a normal law puts them (1 and 1.645 standard deviations)."""
    steps = np.array([-1.645, -1.0, 0.0, 1.0, 1.645])[:, None]
    return Band(feature, observable, unit, middle + steps * width, np.full(middle.shape, exists))


def make_forecast() -> Forecast:
    t = MJD - MJD[0]
    ring = (
        band(RING, "radius", "arcsec", 24.0 + 0.030 * t, 0.9 + 0.004 * t),
        band(RING, "surface brightness", "V mag/arcsec2", 25.3 + 0.003 * t, 0.15 + 0.002 * t),
    )
    knot = (
        band(KNOT, "separation", "mas", 0.18 + 0.00085 * t, 0.03 + 0.0002 * t, exists=0.97),
        band(KNOT, "flux", "mJy", 140.0 * np.exp(-t / 260.0), 25.0 + 0.0 * t, exists=0.97),
    )
    rising = 1.0 / (1.0 + np.exp(-(t - 30.0) / 8.0))
    falling = np.clip(1.05 - t / 150.0, 0.0, 1.0)
    glare = (np.full(t.shape, 22.6), np.full(t.shape, np.nan))
    beam = (np.full(t.shape, 0.16), np.full(t.shape, np.nan))
    ends = np.full(3, MJD[-1])
    measurable_ring = (
        Measurable(RING, CAMERA, rising, MJD[[18, 30, 44]], ends, 0.08, "glare of the source", glare),
        Measurable(RING, IMAGER, falling, MJD[[0, 0, 0]], MJD[[60, 83, 110]], 0.02, "too faint", None),
    )
    measurable_knot = (Measurable(KNOT, ARRAY, rising, MJD[[10, 28, 50]], ends, 0.11, "inside half a beam", beam),)
    return Forecast(
        "Reed and Heron",
        NIGHTS,
        MJD,
        (
            TargetForecast("Reed", ring, measurable_ring, ("sheet is 0.31 of its depth thick, above 0.2",)),
            TargetForecast("Heron", knot, measurable_knot, ()),
        ),
    )


def make_windows() -> Windows:
    rows = []
    for n, mjd in enumerate(MJD):
        rows.append((0, 0, n, mjd + 0.05, mjd + 0.05 + max(0.01, (6.0 - 0.04 * n) / 24.0)))
        if n < 100:
            rows.append((0, 1, n, mjd - 0.02, mjd - 0.02 + max(0.01, (5.0 - 0.045 * n) / 24.0)))
        rows.append((1, 2, n, mjd - 0.2, mjd + 0.2))
    target, setup, night = (np.array([row[i] for row in rows]) for i in range(3))
    start, end = (np.array([row[i] for row in rows]) for i in (3, 4))
    count = len(rows)
    months = ("2027-02", "2027-03", "2027-04", "2027-05")
    lost = np.zeros((2, 3, 4, len(LIMITS)))
    lost[0, :2, :, 0] = 430.0
    lost[0, :2, :, LIMITS.index("altitude")] = 170.0
    lost[0, 0, 2, LIMITS.index("shutdown")] = 44.5
    lost[0, :2, :, LIMITS.index("Moon distance")] = 12.25
    lost[1, 2, :, LIMITS.index("altitude")] = 410.0
    left = np.zeros((2, 3, 4))
    left[0, :2] = 81.5
    left[1, 2] = 288.0
    return Windows(
        targets=("Reed", "Heron"),
        setups=SETUPS,
        nights=NIGHTS,
        target=target,
        setup=setup,
        night=night,
        start_mjd=start,
        end_mjd=end,
        best_mjd=(start + end) / 2,
        airmass=np.where(setup == 2, np.nan, 1.3),
        moon_separation_deg=np.where(setup == 2, np.nan, 80.0),
        moon_altitude_deg=np.full(count, -5.0),
        moon_illumination=np.full(count, 0.4),
        sun_separation_deg=np.full(count, 110.0),
        sky_class=np.zeros(count, dtype=np.int64),
        sky_mag_arcsec2=np.full(count, 21.2),
        tracks={},
        ledger=Ledger(("Reed", "Heron"), SETUPS, months, LIMITS, lost, left),
    )


def make_look(
    number: int,
    night_index: int,
    target: str = "Reed",
    setup: str = CAMERA,
    *,
    state: State = State.PROPOSED,
    mode: str = "60 min",
) -> Look:
    optical = setup != ARRAY
    start = MJD[night_index] + 0.0625  # 01:30 UTC
    filters = {CAMERA: "V", IMAGER: "R", ARRAY: "43ghz"}
    slot = Slot(
        number=100 + number,
        target=target,
        setup=setup,
        telescope={CAMERA: "north-hill/one-eight", IMAGER: "south-plain/four-metre"}.get(setup, "long-array"),
        night=NIGHTS[night_index],
        night_index=night_index,
        allocation=0,
        mode=Mode(mode, filters.get(setup, "V"), 3600.0, 75.0, 12),
        earliest_start_mjd=start - 0.02,
        latest_end_mjd=start + 0.2,
        best_mjd=start + 0.05,
        chance_clear=0.71 if optical else 0.95,
        chance_measurable=0.93,
        expected_snr=14.2,
        airmass=1.27 if optical else float("nan"),
        moon_separation_deg=84.0 if optical else float("nan"),
        sky_class=0,
    )
    return Look(number, slot, start, state)


def make_goal(**changes: object) -> GoalResult:
    facts: dict[str, object] = {
        "target": "Reed",
        "feature": RING,
        "goal": "depth_over_distance2 to 2 %",
        "wanted": 2.0,
        "unit": "%",
        "prior": 26.1,
        "expected": 1.62,
        "everything": 0.71,
        "odds": 0.872,
        "odds_error": 0.011,
        "odds_wanted": 0.8,
        "utility": 0.94,
        "data_share": 0.996,
        "remark": "",
    }
    return GoalResult(**(facts | changes))  # type: ignore[arg-type]


def make_plan(**changes: object) -> Plan:
    looks = (
        make_look(1, 6, setup=IMAGER, mode="45 min"),
        make_look(2, 21, setup=IMAGER, mode="45 min"),
        make_look(3, 38),
        make_look(4, 41, "Heron", ARRAY, mode="4 h track"),
        make_look(5, 66, state=State.FIXED),
        make_look(6, 80, "Heron", ARRAY, mode="4 h track"),
        make_look(7, 97),
        make_look(8, 115, "Heron", ARRAY, mode="4 h track"),
    )
    goals = (
        make_goal(),
        make_goal(
            target="Heron", feature=KNOT, goal="apparent_speed_c to 15 %", wanted=15.0, prior=24.0, expected=13.1,
            everything=8.8, odds=0.66, odds_error=0.015, data_share=0.81,
        ),
        make_goal(
            goal="distance_pc to 6 %", wanted=6.0, prior=12.0, expected=11.8, everything=11.6, odds=0.0,
            odds_error=0.0, data_share=0.04,
            remark="nothing you can schedule reaches 6 %: radii alone leave depth and distance tied",
        ),
    )  # fmt: skip
    facts: dict[str, object] = {
        "campaign": "Reed and Heron",
        "looks": looks,
        "value": 3.412,
        "value_realised": 2.958,
        "best_possible": 3.468,
        "proof_value": 3.452,
        "accounts": (
            Account(CAMERA, "echoes", "dark", 14.0, 3.75),
            Account(IMAGER, "echoes", "grey", 6.0, 2.5),
            Account(ARRAY, "knots", "any", 16.0, 12.0),
        ),
        "goals": goals,
        "reasons": {
            "Plover": "never above 30 deg in the dark from north-hill in this season; June to October would do"
        },
        "outcome": Outcome.GOOD,
        "notes": ("an hour more on north-hill/wide-camera adds 0.04",),
        "seconds": 4.2,
    }
    return Plan(**(facts | changes))  # type: ignore[arg-type]
