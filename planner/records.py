"""The computed records that cross rooms. Frozen dataclasses over read-only arrays.

Index conventions: N draws, T nights of the season (time last), W windows, K slots, P parameters of a target,
M observables of a target. Times are MJD (UTC); a night is named by the civil date at its evening (for an
array by the UTC date at the middle of the transit).
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, fields
from enum import Enum
from typing import TYPE_CHECKING, Any, Protocol

import numpy as np
from numpy.typing import NDArray

if TYPE_CHECKING:
    import pandas as pd

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]
Bools = NDArray[np.bool_]

SKY_CLASSES = ("dark", "grey", "bright")  # codes 0, 1, 2


class Progress(Protocol):
    """How long work reports where it is; ``share`` runs from 0 to 1 within ``stage``."""

    def __call__(self, stage: str, share: float) -> None:
        """Take note of progress."""


def silent(stage: str, share: float) -> None:
    """A ``Progress`` that says nothing."""


def lock(record: Any) -> None:
    """Make every array of a dataclass read-only (call from ``__post_init__``)."""
    for f in fields(record):
        value = getattr(record, f.name)
        if isinstance(value, np.ndarray):
            value.setflags(write=False)


# ------------------------------------------------------------------ belief and forecast


@dataclass(frozen=True)
class Parameter:
    """One coordinate of a target's belief, in the well-behaved form that is sampled."""

    name: str  # e.g. "Sallow ring/ln depth_pc"
    unit: str
    sigma: float  # prior standard deviation of the coordinate
    nuisance: bool
    why: str  # where the width comes from


@dataclass(frozen=True)
class Belief:
    """Weighted draws of a target's parameters, nuisances included."""

    target: str
    parameters: tuple[Parameter, ...]  # P
    draws: Floats  # (N, P) coordinates
    weights: Floats  # (N,), sum 1
    covariance: Floats  # (P, P) of the coordinates

    def __post_init__(self) -> None:
        lock(self)
        n, p = self.draws.shape
        if p != len(self.parameters) or self.weights.shape != (n,) or self.covariance.shape != (p, p):
            raise ValueError(f"belief of {self.target}: shapes do not fit ({n} draws, {p} coordinates)")


@dataclass(frozen=True)
class Band:
    """Quantiles of one observable against date."""

    feature: str
    observable: str  # e.g. "radius", "separation"
    unit: str
    quantiles: Floats  # (5, T): 5, 16, 50, 84, 95 % over draws in which it exists
    exists: Floats  # (T,) share of draws in which it exists

    def __post_init__(self) -> None:
        lock(self)


BAND_SHARES = (0.05, 0.16, 0.50, 0.84, 0.95)


@dataclass(frozen=True)
class Measurable:
    """When one feature can be measured with one setup."""

    feature: str
    setup: str
    chance: Floats  # (T,) over draws, weather left out
    first_mjd: Floats  # (3,) 16, 50, 84 % of the first measurable night, over draws that have one (nan if none)
    last_mjd: Floats  # (3,) same for the last one in the season
    never: float  # share of draws with no measurable night in the season
    reason: str  # what most often stands in the way while it is not measurable ("" if nothing)
    span: tuple[Floats, Floats] | None = None  # (T,), (T,): lowest and highest value of the main observable
    # that the setup could measure (for the figures), nan where unlimited

    def __post_init__(self) -> None:
        lock(self)


@dataclass(frozen=True)
class Derived:
    """What is believed of one quantity that follows from the parameters, such as an apparent speed."""

    feature: str
    quantity: str  # the word by which a goal asks for it
    unit: str  # "MJD" for dates
    quantiles: Floats  # (5,) 5, 16, 50, 84, 95 % over draws in which it exists
    exists: float = 1.0  # share of draws in which it exists

    def __post_init__(self) -> None:
        lock(self)


@dataclass(frozen=True)
class TargetForecast:
    """Forecast of one target."""

    target: str
    bands: tuple[Band, ...]
    measurable: tuple[Measurable, ...]
    warnings: tuple[str, ...]  # model assumptions that fail, each with its number
    derived: tuple[Derived, ...] = ()
    spacings: tuple[tuple[str, str], ...] = ()  # (feature, what is known of the time between its epochs)


@dataclass(frozen=True)
class Forecast:
    """Forecast of a campaign."""

    campaign: str
    nights: tuple[str, ...]  # T ISO dates
    mjd: Floats  # (T,) 24h UTC of each evening date, the moment the forecast is made for
    targets: tuple[TargetForecast, ...]

    def __post_init__(self) -> None:
        lock(self)

    def target(self, name: str) -> TargetForecast:
        """Return the forecast of one target."""
        return next(t for t in self.targets if t.target == name)


# ------------------------------------------------------------------ windows


@dataclass(frozen=True)
class Track:
    """What an array gives for one target in one look (the same every sidereal day)."""

    hours_up: float  # length of the stretch with enough stations together; 0 if none
    look_hours: float  # length used, at most ``hours_up``
    start_from_transit_hours: float  # best start of the look, sidereal hours after the meridian passage
    #   at the array's reference longitude 0 (Greenwich hour angle of the target at the start)
    stations: int  # most stations up together during the look
    beam_major_mas: float  # FWHM, nan if the target is never up
    beam_minor_mas: float
    beam_pa_deg: float
    noise_jy: float  # image noise of the look, with the stations that may be expected to take part
    chance_stations: float = 1.0  # expected share of the look in which enough stations take part
    noise_by_month_jy: tuple[float, ...] = ()  # 12 (January first) where the months' opacities differ, else none


@dataclass(frozen=True)
class Ledger:
    """Where the hours of the season went: for each target, setup and month, in a fixed order of limits."""

    targets: tuple[str, ...]
    setups: tuple[str, ...]
    months: tuple[str, ...]  # "2027-02", ...
    limits: tuple[str, ...]  # the order in which an hour is charged to the first limit that forbids it
    lost_hours: Floats  # (targets, setups, months, limits)
    left_hours: Floats  # (targets, setups, months)

    def __post_init__(self) -> None:
        lock(self)


LIMITS = (
    "daylight and twilight", "shutdown", "not mounted", "busy", "altitude", "airmass", "zenith blind spot",
    "hour angle", "declination", "parallactic angle", "template match", "Sun keep-out", "Sun angle", "Moon distance",
    "Moon up", "Moon light", "extra constraints",
)  # fmt: skip


@dataclass(frozen=True)
class Windows:
    """Every interval in which a target can be observed with a setup; one row each, W rows.

    Rows are sorted by target, setup, night, start. An interval never spans a change of the Moon's being up
    (so it has one sky class). Optical columns are nan for arrays where they mean nothing.
    """

    targets: tuple[str, ...]
    setups: tuple[str, ...]
    nights: tuple[str, ...]
    target: Ints  # (W,) index into targets
    setup: Ints  # (W,)
    night: Ints  # (W,)
    start_mjd: Floats  # (W,)
    end_mjd: Floats  # (W,)
    best_mjd: Floats  # (W,) moment of highest altitude inside the interval (arrays: middle)
    airmass: Floats  # (W,) at best_mjd (nan for arrays)
    moon_separation_deg: Floats  # (W,) at best_mjd (nan for arrays)
    moon_altitude_deg: Floats  # (W,)
    moon_illumination: Floats  # (W,)
    sun_separation_deg: Floats  # (W,)
    sky_class: Ints  # (W,) 0 dark, 1 grey, 2 bright (arrays: 0)
    sky_mag_arcsec2: Floats  # (W,) at the target in the setup's filter, moonlight included (nan for arrays)
    tracks: Mapping[tuple[str, str], Track]  # (target, setup) of every array
    ledger: Ledger

    def __post_init__(self) -> None:
        lock(self)

    @property
    def minutes(self) -> Floats:
        """Length of each interval, (W,)."""
        return (self.end_mjd - self.start_mjd) * 1440.0

    def rows(self, target: str, setup: str) -> Ints:
        """Row numbers of one target with one setup."""
        t, s = self.targets.index(target), self.setups.index(setup)
        return np.flatnonzero((self.target == t) & (self.setup == s))


# ------------------------------------------------------------------ slots and the plan


@dataclass(frozen=True)
class Mode:
    """How a look is taken."""

    name: str
    filter: str  # filter, or band of an array
    exposure_s: float  # shutter open (or on source), the whole look
    minutes: float  # of the telescope, overheads included
    frames: int
    share: float = 1.0  # length, as a multiple of the setup's plain look


@dataclass(frozen=True)
class Slot:
    """One possible look at a target: what it costs, and when it may start.

    What it teaches is kept beside it by the scheduler (whitened derivatives of every feature in the field).
    """

    number: int
    target: str
    setup: str
    telescope: str
    night: str
    night_index: int
    allocation: int  # index into the campaign's allocations
    mode: Mode
    earliest_start_mjd: float
    latest_end_mjd: float
    best_mjd: float
    chance_clear: float  # weather and equipment
    chance_measurable: float  # of at least one feature, over draws
    expected_snr: float  # median over draws of the brightest feature
    airmass: float
    moon_separation_deg: float
    sky_class: int
    fixed_look: int | None = None  # index into the campaign's fixed looks
    chance_stations: float = 1.0  # part of ``chance_clear`` that is not weather


class State(Enum):
    """State of a look."""

    PROPOSED = "proposed"
    SENT = "sent"
    FIXED = "fixed"
    OBSERVED = "observed"
    MEASURED = "measured"
    PART = "part"
    VOID = "void"


class Outcome(Enum):
    """How the solver ended."""

    PROVEN = "proven best"  # shortfall at or below the stated tolerance
    GOOD = "good, not proven best"
    IMPOSSIBLE = "impossible"
    STOPPED = "stopped early"


@dataclass(frozen=True)
class Look:
    """A slot that the plan took, with its start."""

    number: int
    slot: Slot
    start_mjd: float
    state: State

    @property
    def end_mjd(self) -> float:
        """End of the look, overheads included."""
        return self.start_mjd + self.slot.mode.minutes / 1440.0


@dataclass(frozen=True)
class GoalResult:
    """What the plan does for one goal."""

    target: str
    feature: str
    goal: str  # in the user's words, e.g. "depth_over_distance2 to 2 %"
    wanted: float  # one standard deviation, or the number of looks
    unit: str
    prior: float  # standard deviation now (or looks already there)
    expected: float  # median standard deviation over simulated seasons (or mean number of usable looks)
    everything: float  # what all slots of the season together could reach
    odds: float  # share of simulated seasons that reach it
    odds_error: float  # standard error of the odds
    odds_wanted: float
    utility: float  # in expected information, 0..1
    data_share: float  # share of the stated precision that is data, not prior
    remark: str  # said when nothing can reach the goal, with what would help

    @property
    def reached(self) -> bool:
        """True when the simulated odds meet the odds the goal asks for."""
        return self.odds >= self.odds_wanted


@dataclass(frozen=True)
class Account:
    """Hours of one allocation."""

    setup: str
    programme: str
    sky: str
    granted_hours: float
    planned_hours: float

    @property
    def left_hours(self) -> float:
        """Hours granted and not planned."""
        return self.granted_hours - self.planned_hours


@dataclass(frozen=True)
class Plan:
    """A plan that passed its recount."""

    campaign: str
    looks: tuple[Look, ...]
    value: float  # expected-information value, above that of no looks
    value_realised: float  # expected realised value of the same looks
    best_possible: float
    proof_value: float  # value of the best plan by expected information
    accounts: tuple[Account, ...]
    goals: tuple[GoalResult, ...]
    reasons: Mapping[str, str]  # target without a look -> why
    outcome: Outcome
    notes: tuple[str, ...] = ()
    seconds: float = 0.0

    @property
    def shortfall(self) -> float:
        """How far the plan is below the best possible, as a fraction; 0 if nothing is left to gain."""
        return _shortfall(self.value, self.best_possible)

    @property
    def proof_shortfall(self) -> float:
        """The same for the plan that is best by expected information."""
        return _shortfall(self.proof_value, self.best_possible)

    @property
    def odds(self) -> dict[str, float]:
        """Odds of each goal, by "target: goal"."""
        return {f"{g.target} / {g.feature}: {g.goal}": g.odds for g in self.goals}

    def table(self) -> pd.DataFrame:
        """One row a look, in order of start."""
        import pandas as pd

        from planner.units import iso_of_mjd

        rows = [
            {
                "look": k.number,
                "target": k.slot.target,
                "setup": k.slot.setup,
                "mode": k.slot.mode.name,
                "night": k.slot.night,
                "start_utc": iso_of_mjd(k.start_mjd),
                "end_utc": iso_of_mjd(k.end_mjd),
                "exposure_s": k.slot.mode.exposure_s,
                "airmass": k.slot.airmass,
                "moon_separation_deg": k.slot.moon_separation_deg,
                "expected_snr": k.slot.expected_snr,
                "chance_clear": k.slot.chance_clear,
                "chance_measurable": k.slot.chance_measurable,
                "earliest_night": k.slot.night,
                "latest_night": k.slot.night,
                "state": k.state.value,
            }
            for k in self.looks
        ]
        return pd.DataFrame(rows, columns=list(PLAN_COLUMNS))


PLAN_COLUMNS = (
    "look", "target", "setup", "mode", "night", "start_utc", "end_utc", "exposure_s", "airmass",
    "moon_separation_deg", "expected_snr", "chance_clear", "chance_measurable", "earliest_night",
    "latest_night", "state",
)  # fmt: skip


def _shortfall(value: float, best: float) -> float:
    return max(0.0, 1.0 - value / best) if best > 1e-12 else 0.0
