"""From an array's stations to the beam and noise of a look: reliability, opacity, stints, modes, months."""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from planner.campaign.records import ArraySite, SetupRef, Target
from planner.instruments import interferometer
from planner.prediction.look import noise_jy
from planner.prediction.tracks import enough_chance, own_scans, track_of
from planner.records import Track
from planner.sky.stations import STEP_HOURS, STEPS, station_track, uv_wavelengths
from planner.units import mjd_of_date

# A ten-station continental array as published (WGS84 latitude north, longitude west, height m; VLBA, node5 of its
# observational status summary)
TEN = {
    "SC": ("17:45:23.68", "64:35:01.07", 16), "HN": ("42:56:00.99", "71:59:11.69", 296),
    "NL": ("41:46:17.13", "91:34:26.88", 222), "FD": ("30:38:06.11", "103:56:41.34", 1606),
    "LA": ("35:46:30.45", "106:14:44.15", 1962), "PT": ("34:18:03.61", "108:07:09.06", 2365),
    "KP": ("31:57:22.70", "111:36:44.72", 1902), "OV": ("37:13:53.95", "118:16:37.37", 1196),
    "BR": ("48:07:52.42", "119:40:59.80", 250), "MK": ("19:48:04.97", "155:27:19.81", 3763),
}  # fmt: skip


def degrees(text: str) -> float:
    d, m, s = map(float, text.split(":"))
    return d + m / 60 + s / 3600


def published(**station: Any) -> list[dict[str, Any]]:
    return [
        {
            "station": name, "longitude_deg": -degrees(west), "latitude_deg": degrees(north), "height_m": height,
            "lowest_elevation_deg": 10.0, "sefd_jy": {"u": 500.0}, "reliability": 1.0,
        } | station
        for name, (north, west, height) in TEN.items()
    ]  # fmt: skip


def circle(
    sefd_jy: Sequence[float], reliability: float | Sequence[float] = 1.0, latitude: float = 60.0
) -> list[dict[str, Any]]:
    """Stations a few kilometres apart that see a far northern target all day."""
    chances = [reliability] * len(sefd_jy) if isinstance(reliability, float) else reliability
    return [
        {
            "station": f"S{i}", "longitude_deg": 10.0 + 0.05 * i * (1 + 0.1 * i), "latitude_deg": latitude + 0.03 * i,
            "height_m": 100, "lowest_elevation_deg": 10.0, "sefd_jy": {"u": sefd}, "reliability": chance,
        }
        for i, (sefd, chance) in enumerate(zip(sefd_jy, chances, strict=True))
    ]  # fmt: skip


def setup_of(stations: list[dict[str, Any]], least: int = 2, **receiver: Any) -> SetupRef:
    """One receiver of an invented array, without air unless asked for."""
    fields = {"ghz": 15.35, "bandwidth_mhz": 128, "look_hours": 1.0, "on_source": 1.0, "opacity": 0.0, **receiver}
    site = ArraySite.model_validate(
        {
            "array": "Invented", "invented": True, "stations": stations, "least_stations": least,
            "receivers": {"u": fields}, "months": {"clear": [0.8] * 12},
        }
    )  # fmt: skip
    return SetupRef("dishes/u", "dishes", site, "dishes", receiver=site.receivers["u"], receiver_name="u")


def target_at(dec: float) -> Target:
    knot = {
        "knot": "K1", "flux": {"mjy": 100, "on": "2026-10-01", "ghz": 43, "fades": {"exponential_days": 300}},
        "motion": {
            "core_crossing": {"date": "2026-06-10", "sigma_days": 60, "at_ghz": 43},
            "speed_mas_yr": {"lognormal": {"median": 0.3, "sigma_fraction": 0.2}}, "pa_deg": 10,
        },
    }  # fmt: skip
    return Target.model_validate(
        {"target": "T", "invented": True, "position": {"ra": 80.0, "dec": dec}, "redshift": 0.3, "features": [knot]}
    )


NORTH = target_at(80.0)

# ------------------------------------------------------------------ published and worked out elsewhere


def test_noise_of_ten_equal_stations_is_the_one_worked_out_elsewhere() -> None:
    # SEFD 500 Jy, efficiency 0.7, 128 MHz, 1 h, one polarisation: 110.916 uJy (formula of two observatories'
    # handbooks, value by another hand); three decimals printed
    setup = setup_of(circle([500.0] * 10), polarisations=1, efficiency=0.7)
    assert track_of(NORTH, setup).noise_jy * 1e6 == pytest.approx(110.916, abs=1e-3)


def test_a_hundred_metre_dish_brings_the_noise_down_as_worked_out_elsewhere() -> None:
    # the same with one dish of 18 Jy beside the ten: 41.414 uJy, a gain of 2.678
    setup = setup_of(circle([500.0] * 10 + [18.0]), polarisations=1, efficiency=0.7)
    assert track_of(NORTH, setup).noise_jy * 1e6 == pytest.approx(41.414, abs=1e-3)


@pytest.mark.parametrize(
    ("dec", "major", "minor", "pa"),  # natural beams of full tracks above 10 deg, separate code: 1 %
    [(-5.79, 1.294, 0.571, -1.6), (2.05, 1.221, 0.583, -2.1), (38.0, 0.839, 0.651, -6.1)],
)
def test_full_tracks_have_the_beams_worked_out_elsewhere(dec: float, major: float, minor: float, pa: float) -> None:
    track = track_of(target_at(dec), setup_of(published(), look_hours=24.0))
    assert track.look_hours == track.hours_up  # every moment with a baseline
    assert (track.beam_major_mas, track.beam_minor_mas) == pytest.approx((major, minor), rel=0.01)
    assert track.beam_pa_deg == pytest.approx(pa, abs=0.3)
    assert track.stations == 10


def test_the_longest_published_baseline_at_8_4_ghz_gives_the_published_beam() -> None:
    # 8611 km (MK-SC), 8.4 GHz: 2063 lambda/B = 0.855 mas; printed 0.85 for "4 cm" in the observatory's table
    both = [s for s in published(lowest_elevation_deg=0.0) if s["station"] in ("SC", "MK")]
    site = setup_of(both).site
    assert isinstance(site, ArraySite)
    places = station_track(site, "u", 20.0).place_m
    length_km = float(np.linalg.norm(places[0] - places[1])) / 1e3
    assert np.floor(length_km) == 8611
    assert interferometer.resolution_mas(8.4, length_km) == pytest.approx(0.85, abs=0.01)


# ------------------------------------------------------------------ reliability


def plain_twin(target: Target, setup: SetupRef) -> tuple[float, float, float, float]:
    """Beam and noise of sure stations without air: each baseline counts its seconds."""
    site, receiver = setup.site, setup.receiver
    assert isinstance(site, ArraySite)
    assert receiver is not None
    track = station_track(site, "u", target.position.dec_deg)
    points = uv_wavelengths(track)
    beam = interferometer.beam_from_uv(*points.flat())
    seconds = (points.weights > 0).sum(axis=1) * STEP_HOURS * 3600.0 * receiver.on_source
    noise = interferometer.image_noise_by_baseline_jy(
        track.sefd_jy, receiver.efficiency, receiver.bandwidth_mhz * 1e6, seconds, receiver.polarisations
    )
    return float(beam.major_mas), float(beam.minor_mas), float(beam.pa_deg), float(noise)


@pytest.mark.parametrize("dec", [-20.0, 15.0, 60.0])
def test_sure_stations_without_air_are_the_plain_array_bit_for_bit(dec: float) -> None:
    setup = setup_of(published(), look_hours=5.0, on_source=0.6, least=5)
    track = track_of(target_at(dec), setup)
    got = (track.beam_major_mas, track.beam_minor_mas, track.beam_pa_deg, track.noise_jy)
    assert got == plain_twin(target_at(dec), setup)
    assert track.chance_stations == 1.0
    assert track.noise_by_month_jy == ()


def test_expected_baselines_set_the_noise() -> None:
    """Closed form: all baselines weighted with r^2, so the noise rises by 1/r."""
    sure = track_of(NORTH, setup_of(circle([300.0] * 6)))
    likely = track_of(NORTH, setup_of(circle([300.0] * 6, 0.8)))
    assert likely.noise_jy / sure.noise_jy == pytest.approx(1 / 0.8, rel=1e-12)
    assert likely.beam_major_mas == pytest.approx(sure.beam_major_mas, rel=1e-12)  # equal weights: the same beam


def test_a_station_that_never_comes_drops_out_of_beam_and_noise() -> None:
    stations = published()
    for station in stations:
        if station["station"] in ("MK", "SC"):
            station["reliability"] = 1e-9
    some = track_of(target_at(38.0), setup_of(stations, look_hours=6.0))
    without = [s for s in published() if s["station"] not in ("MK", "SC")]
    rest = track_of(target_at(38.0), setup_of(without, look_hours=6.0))
    assert some.noise_jy > rest.noise_jy * 0.9  # the look itself may be placed for stations that do not come
    assert some.beam_minor_mas == pytest.approx(rest.beam_minor_mas, rel=0.05)
    assert some.beam_minor_mas > 1.5 * track_of(target_at(38.0), setup_of(published(), look_hours=6.0)).beam_minor_mas


def test_chance_of_enough_stations_is_binomial_for_equal_ones() -> None:
    # 10 stations at 0.95, 9 needed: 0.95^10 + 10 x 0.95^9 x 0.05 = 0.913862 (closed form)
    track = track_of(NORTH, setup_of(circle([500.0] * 10, 0.95), least=9))
    assert track.chance_stations == pytest.approx(0.95**10 + 10 * 0.95**9 * 0.05, rel=1e-12)


@settings(max_examples=40, deadline=None)
@given(st.lists(st.floats(0.0, 1.0), min_size=2, max_size=7), st.data())
def test_chance_of_enough_stations_is_the_sum_over_all_outcomes(chances: list[float], data: st.DataObject) -> None:
    """Plain twin: every set of stations with its probability, at every moment."""
    least = data.draw(st.integers(1, len(chances)))
    up = np.array(data.draw(st.lists(st.lists(st.booleans(), min_size=4, max_size=4), min_size=len(chances),
                                     max_size=len(chances))))  # fmt: skip
    total = 0.0
    for moment in up.T:
        for come in itertools.product((False, True), repeat=len(chances)):
            p = np.prod([c if here else 1 - c for c, here in zip(chances, come, strict=True)])
            total += p * (sum(a and b for a, b in zip(come, moment, strict=True)) >= least)
    assert enough_chance(up, chances, least) == pytest.approx(total / 4, abs=1e-12)


@settings(max_examples=25, deadline=None)
@given(
    st.lists(st.floats(50.0, 5000.0), min_size=2, max_size=6), st.floats(50.0, 5000.0), st.floats(0.05, 1.0),
    st.floats(0.0, 0.5),
)  # fmt: skip
def test_adding_a_station_never_raises_the_noise(
    sefds: list[float], more: float, reliability: float, opacity: float
) -> None:
    """Stations that all see the target: one more baseline set can only add weight."""
    chances = [0.9] * len(sefds)
    few = track_of(NORTH, setup_of(circle(sefds, chances), opacity=opacity))
    many = track_of(NORTH, setup_of(circle([*sefds, more], [*chances, reliability]), opacity=opacity))
    assert many.noise_jy <= few.noise_jy * (1 + 1e-12)
    assert many.chance_stations >= few.chance_stations - 1e-12


# ------------------------------------------------------------------ air


def test_opacity_raises_the_noise_as_the_sefd_of_every_moment() -> None:
    """Stations on one spot: the noise is that of equal SEFDs with the mean of 1/factor^2 over the look."""
    setup = setup_of(circle([400.0] * 4, latitude=45.0), look_hours=24.0, opacity=0.1, system_k=70.0)
    clear = replace(setup, receiver=setup.receiver.model_copy(update={"opacity": 0.0}))  # type: ignore[union-attr]
    assert isinstance(setup.site, ArraySite)
    track = station_track(setup.site, "u", 80.0)
    factor = interferometer.sefd_factor(track.elevation_deg, 0.1, 70.0)
    assert track.up.all()
    expected = 1 / np.sqrt((1 / factor[0] ** 2).mean())  # four stations a few km apart have one elevation
    ratio = track_of(NORTH, setup).noise_jy / track_of(NORTH, clear).noise_jy
    assert ratio == pytest.approx(expected, rel=2e-3)
    assert ratio > 1.05


def test_months_of_their_own_opacity_have_noises_of_their_own() -> None:
    taus = [0.02] * 6 + [0.3] * 6
    track = track_of(NORTH, setup_of(circle([400.0] * 4), opacity=taus))
    dry = track_of(NORTH, setup_of(circle([400.0] * 4), opacity=0.02))
    wet = track_of(NORTH, setup_of(circle([400.0] * 4), opacity=0.3))
    assert track.noise_by_month_jy == pytest.approx([dry.noise_jy] * 6 + [wet.noise_jy] * 6, rel=1e-12)
    assert dry.noise_jy < track.noise_jy < wet.noise_jy  # the mean opacity's
    days = np.array([mjd_of_date("2027-06-30") + 0.9, mjd_of_date("2027-07-01") + 0.1])
    assert noise_jy(track, days) == pytest.approx([dry.noise_jy, wet.noise_jy], rel=1e-12)
    assert noise_jy(dry, days) == dry.noise_jy
    same = track_of(NORTH, setup_of(circle([400.0] * 4), opacity=[0.02] * 12))
    assert same == dry  # twelve equal months are one number


# ------------------------------------------------------------------ stints and modes


def test_a_stint_of_n_members_gives_each_its_share_of_time_and_the_whole_track() -> None:
    alone = track_of(target_at(38.0), setup_of(published(), look_hours=6.0))
    member = track_of(target_at(38.0), setup_of(published(), look_hours=6.0, interleaved_with=4, scan_min=5.0))
    short = track_of(target_at(38.0), setup_of(published(), look_hours=1.5))
    assert member.noise_jy == pytest.approx(2.0 * alone.noise_jy, rel=0.02)  # a quarter of the time
    # 5-minute scans every 20 minutes: gaps of 5 deg of hour angle move the moments by about a percent
    assert member.beam_major_mas == pytest.approx(alone.beam_major_mas, rel=0.02)
    assert member.beam_minor_mas == pytest.approx(alone.beam_minor_mas, rel=0.02)
    ratio = [t.beam_major_mas / t.beam_minor_mas for t in (member, short)]
    assert ratio[0] < ratio[1]  # the same time in one piece leaves a longer beam
    assert member.look_hours == alone.look_hours


@settings(max_examples=30, deadline=None)
@given(st.integers(1, 6), st.floats(1.0, 30.0), st.integers(60, 700))
def test_a_members_scans_are_its_share_of_the_stint(members: int, scan_min: float, length: int) -> None:
    receiver = setup_of(circle([1.0, 1.0]), interleaved_with=members, scan_min=scan_min).receiver
    assert receiver is not None
    steps = (np.arange(length) + 1300) % STEPS
    mine = own_scans(steps, receiver)
    assert set(mine) <= set(steps)
    if members == 1:
        assert np.array_equal(mine, steps)
    else:  # the last round may be cut: at most one scan more than the share
        assert abs(len(mine) - length / members) <= max(1, round(scan_min))


def test_modes_have_tracks_of_their_own_length_and_the_longest_makes_the_window() -> None:
    setup = setup_of(published(), look_hours=2.0, mode_shares=[0.5, 1, 2])
    half, one, double = (track_of(target_at(38.0), setup, share) for share in (0.5, 1.0, 2.0))
    assert [t.look_hours for t in (half, one, double)] == [1.0, 2.0, 4.0]
    assert half.noise_jy > one.noise_jy > double.noise_jy
    assert track_of(target_at(38.0), setup) == double


def test_a_target_that_never_rises_has_no_track() -> None:
    track = track_of(target_at(-85.0), setup_of(published()))
    assert isinstance(track, Track)
    assert (track.look_hours, track.chance_stations) == (0.0, 1.0)
