"""Time scales, earth orientation, and working offline."""

from __future__ import annotations

import socket
import subprocess
import sys
import warnings
from importlib.metadata import version
from typing import Any

import numpy as np
import pytest

from planner.errors import DomainError
from planner.sky import clock

TODAY_MJD = 61375.0  # 2026-12-01
BUNDLE = "0.2026.11.2"  # release of the earth-orientation data for which literal values are known


def test_mean_sidereal_time_of_meeus_example_12_is_met() -> None:
    # Meeus, Astronomical Algorithms, examples 12.a and 12.b (through an open-source port): 13h10m46.3668s at 0h UT
    # of 1987-04-10 and 8h34m57.0896s at 19h21m UT. Tolerance 5 ms: IAU 1982 against IAU 2006 precession, 2.6 ms
    # in 1987 (0.3 arcsec per century).
    import erfa

    for ut_days, expected in ((0.0, 13 + 10 / 60 + 46.3668 / 3600), (19.35 / 24, 8 + 34 / 60 + 57.0896 / 3600)):
        utc = 46895.0 + ut_days - float(clock.ut1_minus_utc(46895.0)) / 86400
        tt = float(clock.tt_mjd(utc))
        angle = float(clock.earth_rotation_angle(utc)) - erfa.eo06a(2400000.5, tt) - erfa.ee06a(2400000.5, tt)
        hours = np.degrees(angle) / 15 % 24
        assert hours * 3600 == pytest.approx(expected * 3600, abs=0.005)


def test_apparent_sidereal_time_of_meeus_example_12a_is_met() -> None:
    # Meeus example 12.a (through an open-source port): 13h10m46.1351s; 5 ms as above
    import erfa

    utc = 46895.0 - float(clock.ut1_minus_utc(46895.0)) / 86400
    angle = float(clock.earth_rotation_angle(utc)) - erfa.eo06a(2400000.5, float(clock.tt_mjd(utc)))
    assert np.degrees(angle) / 15 % 24 * 3600 == pytest.approx((13 * 60 + 10) * 60 + 46.1351, abs=0.005)


def test_ut1_and_pole_agree_with_the_readers_of_astropy() -> None:
    """Another reader of the same file gives the same numbers; with the final series put in, nearly the same."""
    table = clock.earth_orientation()
    with clock.offline_astropy():
        from astropy.time import Time
        from astropy.utils import iers

        # 0.5 ms (0.01 arcsec of hour angle) and 3 mas: the final series has been revised since the daily file's
        # own columns were written, by up to 0.26 ms and 1.6 mas since 1995
        for other, first, ut1_s, pole in (
            (iers.IERS_A.open(iers.IERS_A_FILE), table.mjd[0], 1e-9, 1e-9),
            (iers.earth_orientation_table.get(), 49_700.0, 5e-4, 3e-3),
        ):
            mjd = np.arange(first, table.last_mjd - 1, 4.0) + 0.37
            times = Time(mjd, format="mjd", scale="utc")
            x, y = (p.to_value("arcsec") for p in other.pm_xy(times))
            ours = clock.polar_motion_arcsec(mjd)
            assert np.abs(clock.ut1_minus_utc(mjd) - other.ut1_utc(times).to_value("s")).max() < ut1_s
            assert max(np.abs(ours[0] - x).max(), np.abs(ours[1] - y).max()) < pole


@pytest.mark.skipif(not version("astropy-iers-data").startswith(BUNDLE), reason="values of one data release")
def test_ut1_of_the_known_data_release() -> None:
    # UT1-UTC of 2026-12-01 0h in finals2000A of the 2026-11-02 release
    assert float(clock.ut1_minus_utc(TODAY_MJD)) == pytest.approx(-0.0906001, abs=1e-6)
    assert float(clock.ut1_minus_utc(61923.0)) == pytest.approx(-0.2081431, abs=1e-6)  # 2028-06-01: held


def test_ut1_is_held_past_the_end_of_the_table() -> None:
    last = clock.earth_orientation().last_mjd
    assert float(clock.ut1_minus_utc(last + 5000)) == pytest.approx(float(clock.ut1_minus_utc(last)), abs=1e-9)


def test_tt_minus_utc_steps_with_the_leap_second_of_2017() -> None:
    # TAI-UTC was 36 s until 2016-12-31 and 37 s after (IERS Bulletin C 52); TT-TAI = 32.184 s
    assert clock.tt_minus_utc_s([57753.5, 57754.5]).tolist() == pytest.approx([68.184, 69.184], abs=1e-9)


def test_arrays_scalars_and_empty_arrays_keep_their_shape() -> None:
    for function in (clock.ut1_minus_utc, clock.tt_mjd, clock.earth_rotation_angle, clock.tt_minus_utc_s):
        assert np.shape(function(TODAY_MJD)) == ()
        assert np.shape(function(np.full(3, TODAY_MJD))) == (3,)
        assert np.shape(function(np.zeros(0))) == (0,)


def test_dates_outside_the_ephemeris_and_nan_are_named() -> None:
    with pytest.raises(DomainError, match=r"mjd_utc: got 90000.0, needs MJD 15020 to 88069 \(1900-2100\)"):
        clock.checked_mjd([TODAY_MJD, 90000.0])
    with pytest.raises(DomainError, match="mjd_utc: got nan"):
        clock.checked_mjd(float("nan"))


# ------------------------------------------------------------------ the end of the tables


def test_dates_within_both_tables_say_nothing() -> None:
    table = clock.earth_orientation()
    assert clock.beyond_tables(min(table.last_mjd, table.leap_expires_mjd) - 1) is None
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        clock.warn_beyond_tables(table.leap_expires_mjd - 400)


def test_one_warning_states_the_size_of_the_effect_past_the_tables() -> None:
    table = clock.earth_orientation()
    last = max(table.last_mjd, table.leap_expires_mjd) + 1000
    with pytest.warns(clock.EarthOrientationWarning, match=r"\d\.\d arcsec of hour angle") as caught:
        clock.warn_beyond_tables(last)
    assert len(caught) == 1
    text = str(caught[0].message)
    assert "leap second announced later shifts times by 1 s" in text
    assert "astropy-iers-data" in text


def test_the_stated_effect_grows_with_the_distance_and_stays_below_twice_the_leap_second_limit() -> None:
    last = clock.earth_orientation().last_mjd

    def seconds(days: float) -> float:
        text = clock.beyond_tables(last + days)
        assert text is not None
        return float(text.split("wrong by about ")[1].split(" s")[0])

    assert seconds(30) < seconds(1500) <= seconds(20000) <= 1.8


# ------------------------------------------------------------------ astropy without a network


def test_astropy_refuses_todays_dates_without_the_offline_setting_and_works_with_it() -> None:
    """The age limit counts from the start of the predictions, so an old bundle refuses every newer date."""
    with clock.offline_astropy():
        from astropy.time import Time
        from astropy.utils import iers

        first_predicted = float(iers.earth_orientation_table.get().meta["predictive_mjd"])
        age = Time.now().mjd - first_predicted
        date = Time(first_predicted + 60.0, format="mjd", scale="utc")
        assert np.isfinite(date.ut1.mjd)
    if age <= 10:
        pytest.skip("the installed earth-orientation data is younger than the least age limit of astropy")
    with (
        iers.conf.set_temp("auto_download", False),
        iers.conf.set_temp("auto_max_age", 10),
        pytest.raises(ValueError, match="interpolating from IERS_Auto using predictive values"),
    ):
        Time(date.mjd, format="mjd", scale="utc").ut1  # noqa: B018  the access is what raises


@pytest.mark.parametrize("mjd", [TODAY_MJD, 61500.0, 62000.0, 62400.0, 64500.0])  # to 2035
def test_astropy_transforms_any_date_offline_with_warnings_as_errors(
    mjd: float, monkeypatch: pytest.MonkeyPatch
) -> None:
    def refuse(*args: Any) -> None:
        raise AssertionError("something tried the network")

    monkeypatch.setattr(socket.socket, "connect", refuse)
    monkeypatch.setattr(socket, "getaddrinfo", refuse)
    with clock.offline_astropy():
        import astropy.units as u
        from astropy.coordinates import AltAz, EarthLocation, SkyCoord
        from astropy.time import Time

        place = EarthLocation.from_geodetic(10 * u.deg, 50 * u.deg)
        star = SkyCoord(10 * u.deg, 20 * u.deg)
        altitude = star.transform_to(AltAz(obstime=Time(mjd, format="mjd"), location=place)).alt.deg
    assert -90 <= altitude <= 90


def test_the_offline_setting_returns_what_it_changed() -> None:
    from astropy.utils import data, iers

    before = (iers.conf.auto_download, iers.conf.auto_max_age, data.conf.allow_internet)
    with clock.offline_astropy():
        assert (iers.conf.auto_download, iers.conf.auto_max_age, data.conf.allow_internet) == (False, None, False)
    assert (iers.conf.auto_download, iers.conf.auto_max_age, data.conf.allow_internet) == before


def test_importing_the_room_loads_no_heavy_library() -> None:
    code = (
        "import sys, planner.sky.windows, planner.sky.mask; "
        "print([m for m in ('astropy', 'erfa', 'scipy', 'astroplan', 'pandas') if m in sys.modules])"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True, cwd=".")
    assert done.stdout.strip() == "[]"


def test_a_pinned_table_refuses_dates_past_its_end_and_the_kernel_goes_on() -> None:
    """astropy with a pinned table and strict accuracy raises; the kernel holds UT1-UTC, and agrees before the end."""
    with clock.offline_astropy():
        from astropy.time import Time
        from astropy.utils import iers

        table = iers.IERS_A.open(iers.IERS_A_FILE)
        last = float(table["MJD"][-1].to_value("d"))
        with (
            iers.earth_orientation_table.set(table),
            iers.conf.set_temp("iers_degraded_accuracy", "error"),
        ):
            with pytest.raises(iers.IERSRangeError, match="outside of range covered by IERS table"):
                _ = Time(last + 60.0, format="mjd").ut1
            inside = float(Time(last - 60.0, format="mjd").delta_ut1_utc)
    assert float(clock.ut1_minus_utc(last - 60.0)) == pytest.approx(inside, abs=2e-4)  # daily tides are left out
    assert float(clock.ut1_minus_utc(last + 60.0)) == float(clock.ut1_minus_utc(clock.earth_orientation().last_mjd))
    text = clock.beyond_tables(last + 60.0)
    assert text is not None
    assert "the earth-orientation table ends on" in text
