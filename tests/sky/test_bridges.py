"""Bridges to astropy and astroplan, and limits made with astroplan inside the windows."""

from __future__ import annotations

import contextlib
import warnings
from collections.abc import Callable
from types import SimpleNamespace
from typing import Any

import numpy as np
import pytest

import planner
from planner.campaign.records import SpacecraftSite
from planner.errors import InputError, UnknownName
from planner.records import LIMITS
from planner.sky import bridges, clock
from planner.sky.directions import altaz_deg, moved_position
from planner.sky.windows import find_windows

STAR = ("Equator", 110.0, -3.0)


def test_places_and_positions_come_over_unchanged(invented: SimpleNamespace) -> None:
    site, target = invented.site(), invented.target(*STAR)
    place = bridges.earth_location(site)
    assert place.lon.deg == pytest.approx(-70.4, abs=1e-9)
    assert place.lat.deg == pytest.approx(-24.6, abs=1e-9)
    assert place.height.to_value("m") == pytest.approx(2600.0, abs=1e-3)
    where = bridges.sky_coord(target)
    assert (where.ra.deg, where.dec.deg) == pytest.approx((110.0, -3.0))
    who, star = bridges.observer(site), bridges.fixed_target(target)
    assert (who.name, str(who.timezone), star.name) == ("Test Ridge", "America/Santiago", "Equator")
    station = invented.array().stations[0]
    assert bridges.observer(station).name == "A"


def test_an_observer_sees_a_target_where_the_kernel_does(invented: SimpleNamespace) -> None:
    site, target = invented.site(), invented.target(*STAR)
    with clock.offline_astropy():
        from astropy.time import Time

        seen = bridges.observer(site).altaz(Time(61480.1, format="mjd"), bridges.fixed_target(target))
        ours = altaz_deg(110.0, -3.0, 61480.1, -70.4, -24.6, 2600.0)
    assert seen.alt.deg == pytest.approx(ours[0][0, 0], abs=0.2 / 3600)
    assert seen.az.deg == pytest.approx(ours[1][0, 0], abs=0.3 / 3600)


def test_proper_motion_comes_over(invented: SimpleNamespace) -> None:
    target = invented.target("Fast", 110.0, 20.0, pm_ra_mas_yr=1000.0, pm_dec_mas_yr=-500.0, epoch=2016.0)
    moved = bridges.sky_coord(target, 61480.0)
    assert (moved.ra.deg, moved.dec.deg) == pytest.approx(moved_position(110.0, 20.0, 1000.0, -500.0, 2016.0, 61480.0))
    with clock.offline_astropy():
        from astropy.time import Time

        with warnings.catch_warnings():  # without a distance ERFA assumes one far away, and says so
            warnings.filterwarnings("ignore", message=".*distance overridden.*")
            theirs = bridges.sky_coord(target).apply_space_motion(new_obstime=Time(61480.0, format="mjd"))
    assert theirs.separation(moved).arcsec < 0.01  # 11 arcsec of motion; epochs differ by the second


@pytest.mark.parametrize("kind", ["array", "spacecraft"])
def test_what_is_no_place_on_the_ground_is_refused(kind: str, invented: SimpleNamespace) -> None:
    craft = SpacecraftSite.model_validate(
        {"spacecraft": "Lark", "sun_angle_deg": [85, 135], "setups": {"c": {"aperture_m": 1, "image_fwhm_arcsec": 0.2}}}
    )
    with pytest.raises(InputError, match=rf"is no single place on the ground but an? {kind}"):
        bridges.earth_location(invented.array() if kind == "array" else craft)


# ------------------------------------------------------------------ further limits


def campaign_of(invented: SimpleNamespace, **camera: Any) -> Any:
    site = invented.site(camera=camera)
    return invented.campaign({"ridge": site}, [invented.target(*STAR)], "2027-03-09", "2027-03-14")


def test_a_limit_made_with_astroplan_equals_our_own_within_its_step(invented: SimpleNamespace) -> None:
    with clock.offline_astropy():
        import astropy.units as u
        from astroplan import AltitudeConstraint

        high = AltitudeConstraint(min=50 * u.deg)
    own = find_windows(campaign_of(invented, lowest_altitude_deg=50.0))
    with pytest.warns(bridges.ExtraLimitsWarning, match=r"ridge/cam: 1 extra constraint\(s\) .* 1 targets x 577 times"):
        found = find_windows(campaign_of(invented), extra={"ridge/cam": [high]})
    assert found.minutes.size == own.minutes.size
    assert np.abs(found.start_mjd - own.start_mjd).max() * 1440 <= 7.6  # half of 15 minutes
    assert np.abs(found.end_mjd - own.end_mjd).max() * 1440 <= 7.6
    k = LIMITS.index("extra constraints")
    assert found.ledger.lost_hours[..., k].sum() == pytest.approx(
        own.ledger.lost_hours[..., LIMITS.index("altitude")].sum()
        - found.ledger.lost_hours[..., LIMITS.index("altitude")].sum(),
        abs=0.25 * own.minutes.size,
    )  # an edge is off by at most 7.5 minutes at both ends
    assert own.ledger.lost_hours[..., k].sum() == 0.0


def test_a_moon_limit_of_astroplan_raises_no_other_warning_and_needs_no_network(
    invented: SimpleNamespace, socket_guard: Callable[[], contextlib.AbstractContextManager[list[str]]]
) -> None:
    """Warnings are errors in the tests: astropy's note on separations from the Moon must not escape."""
    with clock.offline_astropy():
        import astropy.units as u
        from astroplan import MoonSeparationConstraint

        far = MoonSeparationConstraint(min=60 * u.deg)
    with socket_guard() as asked, pytest.warns(bridges.ExtraLimitsWarning) as told:
        found = planner.windows(campaign_of(invented), extra={"ridge/cam": [far]})
    assert len(told) == 1
    assert asked == []
    inside = found.moon_separation_deg[found.minutes > 20]
    assert inside.min() > 59.0
    assert found.ledger.lost_hours[..., LIMITS.index("extra constraints")].sum() > 1.0


def test_two_limits_must_both_hold(invented: SimpleNamespace) -> None:
    class From:
        def __init__(self, first: float, last: float) -> None:
            self.first, self.last = first, last

        def __call__(self, observer: Any, targets: Any, times: Any, grid_times_targets: bool) -> np.ndarray:
            return np.broadcast_to((times.mjd > self.first) & (times.mjd < self.last), (len(targets), len(times)))

    with pytest.warns(bridges.ExtraLimitsWarning):
        found = find_windows(campaign_of(invented), extra={"ridge/cam": [From(0, 61476.05), From(61474.05, 99999)]})
    assert found.start_mjd.min() > 61474.05 - 0.006
    assert found.end_mjd.max() < 61476.05 + 0.006


def test_an_answer_of_another_shape_is_refused(invented: SimpleNamespace) -> None:
    def flat(observer: Any, targets: Any, times: Any, grid_times_targets: bool) -> np.ndarray:
        return np.ones(len(times), dtype=bool)

    with (
        pytest.warns(bridges.ExtraLimitsWarning),
        pytest.raises(
            InputError, match=r"extra constraint 1 \(function\) answers with shape \(577,\), needs .*\(1, 577\)"
        ),
    ):
        find_windows(campaign_of(invented), extra={"ridge/cam": [flat]})


def test_extra_limits_name_optical_setups_that_exist(invented: SimpleNamespace) -> None:
    with pytest.raises(UnknownName, match=r"unknown setup 'ridge/cm'; did you mean 'ridge/cam'\?"):
        find_windows(campaign_of(invented), extra={"ridge/cm": [object()]})
    camp = invented.campaign(
        {"net": invented.array()}, [invented.target(*STAR)], "2027-03-09", "2027-03-10", [("net/q", "all")]
    )
    with pytest.raises(InputError, match="optical setups on the ground only"):
        find_windows(camp, extra={"net/q": [object()]})
