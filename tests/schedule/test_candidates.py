"""Modes of a look, members of a stint, and the weather each setup needs."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from planner import flow
from planner.campaign.records import Campaign, FixedLook, Months
from planner.instruments import camera
from planner.prediction.look import look_errors
from planner.prediction.model import TargetModel
from planner.prediction.tracks import track_of
from planner.records import Slot, Windows, silent
from planner.schedule.candidates import batches, good_share, mode_of, shutter_seconds, taught
from planner.schedule.problem import Spacing, gap_conflicts
from planner.schedule.promise import Chosen, good_looks, good_seasons, odds_part
from planner.schedule.slots import SlotBook
from planner.schedule.weather import weather_roots
from planner.units import iso_of_mjd

IMAGER, ARRAY = "cairn-south/imager", "cairn-array/43ghz"
# wants much, so that the minutes of a look lie between the shortest and the longest
FAINT = {"snr_wanted": 250.0, "subtraction_floor": 0.0, "shortest_look_min": 1.0, "longest_look_min": 600.0}


def campaign_with(campaign: Campaign, name: str, *, spacing: float | None = None, **change: Any) -> Campaign:
    """The demo, shortened, with one camera or receiver changed."""
    setups = []
    for setup in campaign.setups:
        if setup.name == name:
            part = "camera" if setup.camera is not None else "receiver"
            record = getattr(setup, part)
            data = record.model_dump() | change
            setup = replace(setup, **{part: type(record).model_validate(data)})
        setups.append(setup)
    targets = campaign.targets
    if spacing is not None:
        targets = tuple(
            t.model_copy(update={"spacing": t.spacing.model_copy(update={"at_least_days": spacing})}) for t in targets
        )
    season = campaign.file.season.model_copy(update={"last": campaign.file.season.first.replace(month=2, day=20)})
    return replace(
        campaign, setups=tuple(setups), targets=targets, file=campaign.file.model_copy(update={"season": season})
    )


def made(campaign: Campaign) -> tuple[flow.Prepared, Windows, SlotBook]:
    ready = flow.prepare(campaign)
    windows = flow._windows(campaign, ready, silent)
    return ready, windows, flow._book(campaign, ready, windows, silent)


@pytest.fixture(scope="module")
def modes(demo_campaign: Campaign) -> tuple[Campaign, flow.Prepared, Windows, SlotBook]:
    """Both kinds of setup in three modes; looks of one night allowed by the targets' own spacing."""
    campaign = campaign_with(demo_campaign, IMAGER, spacing=0.0, mode_shares=[0.5, 1, 2], **FAINT)
    campaign = campaign_with(campaign, ARRAY, mode_shares=[0.5, 1, 2])
    return campaign, *made(campaign)


def of(book: SlotBook, target: str, setup: str) -> list[Slot]:
    return [s for s in book.slots if s.target == target and s.setup == setup]


# ------------------------------------------------------------------ modes


@pytest.mark.parametrize(("target", "setup"), [("Brindle", IMAGER), ("Tern", ARRAY)])
def test_every_night_offers_its_modes_and_their_names_say_which(
    modes: tuple[Campaign, flow.Prepared, Windows, SlotBook], target: str, setup: str
) -> None:
    nights: dict[str, dict[float, Slot]] = {}
    for slot in of(modes[3], target, setup):
        nights.setdefault(slot.night, {})[slot.mode.share] = slot
    whole = [found for found in nights.values() if len(found) == 3]
    assert len(whole) > 5
    for found in whole:
        assert found[0.5].mode.name.endswith("(half)")
        assert not found[1.0].mode.name.endswith(")")
        assert found[2.0].mode.name.endswith("(double)")
        assert found[0.5].mode.exposure_s < found[1.0].mode.exposure_s < found[2.0].mode.exposure_s
        # the plain look is what the quantile asks for in whole minutes; its half and double are rounded up themselves
        assert found[2.0].mode.exposure_s == pytest.approx(2 * found[1.0].mode.exposure_s, abs=120.0)
        assert found[0.5].expected_snr < found[1.0].expected_snr < found[2.0].expected_snr


def test_at_most_one_mode_of_a_night_is_ever_chosen(
    modes: tuple[Campaign, flow.Prepared, Windows, SlotBook],
) -> None:
    """Even where the target allows two looks of one night: the spacing rule of the problem excludes them."""
    campaign, _, _, book = modes
    for part in book.problem.targets:
        assert campaign.target(part.name).spacing.at_least_days == 0.0
        night = np.array([book.slots[int(k)].night_index for k in part.slots])
        same = night[:, None] == night[None, :]
        np.fill_diagonal(same, False)
        if part.name in ("Brindle", "Tern"):
            assert same.any()
        clash = gap_conflicts(part)
        assert np.all(clash[same])
        rules = Spacing.of(part)
        for one, other in np.argwhere(same)[:50]:
            assert not rules.kept([int(one), int(other)])


def test_slots_of_every_mode_fit_their_windows(modes: tuple[Campaign, flow.Prepared, Windows, SlotBook]) -> None:
    _, _, windows, book = modes
    for slot, row in zip(book.slots, book.window_rows, strict=True):
        assert windows.start_mjd[row] - 1e-9 <= slot.earliest_start_mjd
        assert slot.latest_end_mjd <= windows.end_mjd[row] + 1e-9
        assert slot.mode.minutes <= (slot.latest_end_mjd - slot.earliest_start_mjd) * 1440.0 + 1e-5
        assert 0.0 < slot.mode.exposure_s < slot.mode.minutes * 60.0 + 1e-6


def test_array_modes_lie_around_their_own_best_place(modes: tuple[Campaign, flow.Prepared, Windows, SlotBook]) -> None:
    campaign, _, windows, book = modes
    setup, target = campaign.setup(ARRAY), campaign.target("Tern")
    tracks = {share: track_of(target, setup, share) for share in (0.5, 1.0, 2.0)}
    best = {slot.mode.share: slot.best_mjd for slot in of(book, "Tern", ARRAY) if slot.night == "2027-01-20"}
    hours = {share: t.start_from_transit_hours + t.look_hours / 2 for share, t in tracks.items()}
    for share in (0.5, 1.0):
        apart = (best[share] - best[2.0]) * 24 * 1.00273781191135448  # sidereal hours
        assert apart == pytest.approx((hours[share] - hours[2.0] + 12) % 24 - 12, abs=1e-6)
    assert windows.tracks["Tern", ARRAY] == tracks[2.0]


def test_odds_of_modes_use_the_model_of_their_own_mode(
    modes: tuple[Campaign, flow.Prepared, Windows, SlotBook],
) -> None:
    campaign, ready, windows, book = modes
    for name in ("Brindle", "Tern"):
        part = next(p for p in book.problem.targets if p.name == name)
        local = np.arange(0, len(part.slots), 7)
        middles = np.array([book.slots[int(k)].best_mjd for k in part.slots[local]])
        draws = ready.models[name].belief(flow.PLAN_DRAWS, campaign.file.seed, "plan").draws
        again = odds_part(ready.models[name], book, part, Chosen(local, middles), draws, windows, campaign)
        assert again.rows == pytest.approx(part.rows[:, local], rel=1e-6, abs=1e-6 * np.abs(part.rows).max())


def test_modes_cut_off_at_the_same_length_are_offered_once(demo_campaign: Campaign) -> None:
    campaign = campaign_with(
        demo_campaign, IMAGER, mode_shares=[0.5, 1, 2], shortest_look_min=10.0, longest_look_min=10.0
    )
    slots = of(made(campaign)[2], "Brindle", IMAGER)
    assert len(slots) > 10
    assert {s.mode.exposure_s for s in slots} == {600.0}
    assert len({(s.night, s.allocation) for s in slots}) == len(slots)


def test_a_plan_with_modes_passes_its_recount_and_takes_one_mode_a_night(
    modes: tuple[Campaign, flow.Prepared, Windows, SlotBook],
) -> None:
    plan = flow.plan(modes[0], seconds=4)
    assert len(plan.looks) > 3
    keys = [(k.slot.target, k.slot.night) for k in plan.looks]
    assert len(keys) == len(set(keys))


# ------------------------------------------------------------------ stints


@pytest.fixture(scope="module")
def stint(demo_campaign: Campaign) -> tuple[Campaign, flow.Prepared, Windows, SlotBook]:
    campaign = campaign_with(demo_campaign, ARRAY, interleaved_with=3)
    return campaign, *made(campaign)


def test_a_member_is_charged_its_share_and_stays_inside_the_stretch_of_the_whole_stint(
    demo_campaign: Campaign, stint: tuple[Campaign, flow.Prepared, Windows, SlotBook]
) -> None:
    plain = made(campaign_with(demo_campaign, ARRAY))
    members, wholes = of(stint[3], "Tern", ARRAY), of(plain[2], "Tern", ARRAY)
    assert [s.night for s in members] == [s.night for s in wholes]
    for member, whole in zip(members, wholes, strict=True):
        assert member.mode.minutes == pytest.approx(whole.mode.minutes / 3)
        assert member.mode.exposure_s == pytest.approx(whole.mode.exposure_s / 3)
        assert (member.earliest_start_mjd, member.latest_end_mjd) == (whole.earliest_start_mjd, whole.latest_end_mjd)
        assert member.expected_snr < whole.expected_snr
        assert member.mode.name == "43.1 GHz 1 h of a 3 h stint"
    problem = stint[3].problem
    charged = problem.charge[[s.number for s in members]]
    assert charged == pytest.approx(np.full(len(members), 60.0), abs=0.2)


def test_members_of_a_stint_fit_side_by_side_and_pass_the_recount(
    stint: tuple[Campaign, flow.Prepared, Windows, SlotBook],
) -> None:
    plan = flow.plan(stint[0], seconds=4)
    hours = {a.setup: a.planned_hours for a in plan.accounts}
    looks = [k for k in plan.looks if k.slot.setup == ARRAY]
    assert looks
    assert hours[ARRAY] == pytest.approx(len(looks) * 1.0, rel=0.01)  # 1 h each, not 3


# ------------------------------------------------------------------ two bands in one look


@pytest.fixture(scope="module")
def both(demo_campaign: Campaign) -> tuple[Campaign, flow.Prepared, Windows, SlotBook]:
    campaign = campaign_with(demo_campaign, ARRAY, simultaneous=["22ghz"])
    return campaign, *made(campaign)


def test_a_look_in_two_bands_teaches_what_both_see(
    demo_campaign: Campaign, both: tuple[Campaign, flow.Prepared, Windows, SlotBook]
) -> None:
    """Its first rows are those of its own band alone; the other band's come below, and add."""
    campaign, ready, windows, book = both
    model, setup = ready.models["Tern"], campaign.setup(ARRAY)
    draws = model.belief(8, 3, "test").draws
    rows = windows.rows("Tern", ARRAY)[:5]
    (batch,) = batches(model, setup, windows, rows, draws)
    observables = sum(len(f.observables) for f in model.features)
    what = taught(model, draws, batch)
    assert what.rows.shape[2] == 2 * observables
    alone = taught(model, draws, replace(batch, beside=()))
    assert np.array_equal(what.rows[:, :, :observables], alone.rows)
    ((name, track),) = [(s.name, t) for s, t in batch.beside]
    assert name == "cairn-array/22ghz"
    other = campaign.setup(name)
    at_22 = look_errors(model, draws, batch.mjd, other, track=track)
    expected = at_22.whiten(model.derivatives(draws, batch.mjd, name))
    assert np.array_equal(what.rows[:, :, observables:], expected)
    assert np.abs(expected).max() > 0
    # the other band is recorded during the very same hours
    own = windows.tracks["Tern", ARRAY]
    assert (track.start_from_transit_hours, track.look_hours) == (own.start_from_transit_hours, own.look_hours)
    assert track.beam_major_mas == pytest.approx(own.beam_major_mas * 43.1 / 22.2, rel=0.05)
    for slot in of(book, "Tern", ARRAY):
        assert slot.mode.name == "43.1+22.2 GHz 3 h"


def test_looks_in_one_band_beside_looks_in_two_are_filled_with_rows_that_teach_nothing(
    both: tuple[Campaign, flow.Prepared, Windows, SlotBook],
) -> None:
    campaign, ready, windows, book = both
    part = next(p for p in book.problem.targets if p.name == "Tern")
    observables = sum(len(f.observables) for f in ready.models["Tern"].features)
    assert part.rows.shape[2] == 2 * observables
    single = [i for i, k in enumerate(part.slots) if book.slots[int(k)].setup == "cairn-array/22ghz"]
    double = [i for i, k in enumerate(part.slots) if book.slots[int(k)].setup == ARRAY]
    assert single
    assert double
    assert np.all(part.rows[:, single, observables:] == 0.0)
    assert np.abs(part.rows[:, double, observables:]).max() > 0.0
    local = np.array([single[0], double[0]])
    middles = np.array([book.slots[int(k)].best_mjd for k in part.slots[local]])
    draws = ready.models["Tern"].belief(flow.PLAN_DRAWS, campaign.file.seed, "plan").draws
    again = odds_part(ready.models["Tern"], book, part, Chosen(local, middles), draws, windows, campaign)
    assert again.rows == pytest.approx(part.rows[:, local], rel=1e-6, abs=1e-6 * np.abs(part.rows).max())


def test_a_band_without_hours_of_its_own_is_in_the_belief_as_well(demo_campaign: Campaign) -> None:
    """The other band needs no allocation: its core and its flux scale are coordinates of the target all the same."""
    campaign = campaign_with(demo_campaign, ARRAY, simultaneous=["22ghz"])
    kept = tuple(a for a in campaign.file.allocations if a.setup != "cairn-array/22ghz")
    campaign = replace(
        campaign, file=campaign.file.model_copy(update={"allocations": kept}),
        setups=tuple(s for s in campaign.setups if s.name != "cairn-array/22ghz"),
    )  # fmt: skip
    ready, windows, book = made(campaign)
    names = [n for block in ready.models["Tern"].blocks for n in block.names]
    assert "cairn-array/22ghz/ln flux scale" in names
    part = next(p for p in book.problem.targets if p.name == "Tern")
    observables = sum(len(f.observables) for f in ready.models["Tern"].features)
    assert part.rows.shape[2] == 2 * observables
    assert windows.tracks.keys() == {(t, ARRAY) for t in ("Tern", "Vetch")}


# ------------------------------------------------------------------ weather


def with_months(campaign: Campaign, months: dict[str, dict[str, Any]]) -> Campaign:
    """The campaign with other weather at some sites."""
    sites = {
        slug: site.model_copy(update={"months": Months.model_validate(months[slug])}) if slug in months else site
        for slug, site in campaign.sites.items()
    }
    return replace(campaign, sites=sites, setups=tuple(replace(s, site=sites[s.site_slug]) for s in campaign.setups))


@pytest.fixture(scope="module")
def season(demo_campaign: Campaign) -> tuple[Campaign, flow.Prepared, Windows, SlotBook]:
    campaign = campaign_with(demo_campaign, IMAGER)
    return campaign, *made(campaign)


def test_thin_cloud_raises_the_chance_of_setups_that_bear_it(demo_campaign: Campaign) -> None:
    thin = with_months(demo_campaign, {"cairn-south": {"clear": [0.5] * 12, "thin_cloud": [0.2] * 12}})
    needy = campaign_with(thin, IMAGER)
    easy = campaign_with(thin, IMAGER, needs="thin")
    assert good_share(needy.setup(IMAGER), "2027-01-09") == 0.5
    assert good_share(easy.setup(IMAGER), "2027-01-09") == pytest.approx(0.7)


def test_sites_that_share_weather_and_shares_are_equal(
    season: tuple[Campaign, flow.Prepared, Windows, SlotBook],
) -> None:
    same = {"clear": [0.6] * 12, "persistence": 0.3}
    campaign = with_months(season[0], {"cairn-south": same, "brack-ridge": {**same, "weather_with": "cairn-south"}})
    good = good_seasons(campaign, season[2], np.random.SeedSequence(5), 400)
    assert np.array_equal(good["cairn-south", "clear"], good["brack-ridge", "clear"])
    apart = with_months(season[0], {"cairn-south": same, "brack-ridge": same})
    free = good_seasons(apart, season[2], np.random.SeedSequence(5), 400)
    nights = free["cairn-south", "clear"].size
    together = np.corrcoef(free["cairn-south", "clear"].ravel(), free["brack-ridge", "clear"].ravel())[0, 1]
    # persistence 0.3 leaves (1 - 0.09) / (1 + 0.09) of the nights as independent pairs (lag-one process)
    assert abs(together) < 5 / np.sqrt(nights * 0.91 / 1.09)


def test_shared_weather_with_other_shares_is_clear_together_as_far_as_they_agree(
    season: tuple[Campaign, flow.Prepared, Windows, SlotBook],
) -> None:
    months = {
        "cairn-south": {"clear": [0.5] * 12, "persistence": 0.0},
        "brack-ridge": {"clear": [0.8] * 12, "persistence": 0.0, "weather_with": "cairn-south"},
    }
    good = good_seasons(with_months(season[0], months), season[2], np.random.SeedSequence(5), 2000)
    poor, rich = good["cairn-south", "clear"], good["brack-ridge", "clear"]
    assert not np.any(poor & ~rich)  # one number decides both
    # phi coefficient of nested events, closed form: sqrt(p (1 - q) / (q (1 - p))) with p = 0.5, q = 0.8
    phi = np.corrcoef(poor.ravel(), rich.ravel())[0, 1]
    assert phi == pytest.approx(np.sqrt(0.5 * 0.2 / (0.8 * 0.5)), abs=5 / np.sqrt(poor.size))


def test_a_clear_night_serves_setups_that_bear_thin_cloud(
    season: tuple[Campaign, flow.Prepared, Windows, SlotBook],
) -> None:
    clear = [0.3, 0.9] * 6  # shares that jump from month to month
    months = {"cairn-south": {"clear": clear, "thin_cloud": [0.05] * 12, "persistence": 0.6}}
    good = good_seasons(with_months(season[0], months), season[2], np.random.SeedSequence(5), 1000)
    assert not np.any(good["cairn-south", "clear"] & ~good["cairn-south", "thin"])
    assert good["cairn-south", "thin"].sum() > good["cairn-south", "clear"].sum()


def test_links_join_in_chains_and_through_absent_sites() -> None:
    links = {"a": None, "b": "c", "c": "a", "d": "elsewhere", "e": "elsewhere", "f": None}
    assert weather_roots(links) == {"a": "a", "b": "a", "c": "a", "d": "d", "e": "d", "f": "f"}
    assert weather_roots({}) == {}


def test_looks_of_an_array_fail_with_weather_and_with_stations(
    season: tuple[Campaign, flow.Prepared, Windows, SlotBook],
) -> None:
    campaign, _, windows, book = season
    slots = [replace(s, chance_stations=0.5) for s in of(book, "Tern", ARRAY)[:20]]
    good = good_seasons(campaign, windows, np.random.SeedSequence(1), 4000)
    looks = good_looks(campaign, slots, good, np.random.default_rng(2), 4000)
    weather = np.stack([good["cairn-array", "clear"][:, s.night_index] for s in slots], axis=1)
    assert not np.any(looks & ~weather)
    assert looks.sum() / weather.sum() == pytest.approx(0.5, abs=5 * 0.5 / np.sqrt(weather.sum()))
    sure = good_looks(campaign, [replace(s, chance_stations=1.0) for s in slots], good, np.random.default_rng(2), 4000)
    assert np.array_equal(sure, weather)


def test_the_chance_of_an_array_look_is_weather_times_stations(
    season: tuple[Campaign, flow.Prepared, Windows, SlotBook],
) -> None:
    campaign, _, windows, book = season
    for slot in of(book, "Tern", ARRAY):
        track = windows.tracks["Tern", ARRAY]
        assert slot.chance_stations == track.chance_stations < 1.0
        assert slot.chance_clear == pytest.approx(good_share(campaign.setup(ARRAY), slot.night) * track.chance_stations)


# ------------------------------------------------------------------ single looks


def test_fixed_minutes_hold_overheads_and_readouts(demo_campaign: Campaign) -> None:
    setup = campaign_with(demo_campaign, IMAGER, calibration_min=3.0, filter_change_s=30.0).setup(IMAGER)
    assert setup.camera is not None
    seconds = shutter_seconds(setup, 60.0)
    assert camera.look_minutes(setup.camera, seconds) == pytest.approx(60.0, abs=1e-9)


@pytest.mark.parametrize(("share", "end"), [(0.5, " (half)"), (1.0, " s"), (1.5, " (x1.5)"), (2.0, " (double)")])
def test_names_of_modes(demo_campaign: Campaign, share: float, end: str) -> None:
    mode = mode_of(demo_campaign.setup(IMAGER), 600.0, 16.0, share)
    assert mode.name.endswith(end)
    assert mode.share == share


def test_batches_of_a_setup_without_windows_are_empty(
    season: tuple[Campaign, flow.Prepared, Windows, SlotBook],
) -> None:
    campaign, ready, windows, _ = season
    model: TargetModel = ready.models["Brindle"]
    found = batches(model, campaign.setup(IMAGER), windows, np.array([], dtype=np.int64), np.zeros((4, model.size)))
    assert [len(b.rows) for b in found] == [0]


def test_a_fixed_look_of_an_array_has_the_noise_of_its_own_length(
    season: tuple[Campaign, flow.Prepared, Windows, SlotBook],
) -> None:
    campaign, ready, windows, book = season
    whole = next(s for s in of(book, "Tern", ARRAY) if s.night == "2027-01-20")
    found = {}
    for minutes in (whole.mode.minutes, 60.0):
        start = iso_of_mjd(whole.earliest_start_mjd + 0.01)
        look = {"target": "Tern", "setup": ARRAY, "start_utc": start, "minutes": minutes}
        fixed = FixedLook.model_validate(look)
        told = replace(campaign, file=campaign.file.model_copy(update={"fixed_looks": (fixed,)}))
        (found[minutes],) = [s for s in flow._book(told, ready, windows, silent).slots if s.fixed_look is not None]
    long, short = found[whole.mode.minutes], found[60.0]
    assert long.mode.exposure_s == pytest.approx(whole.mode.exposure_s, rel=1e-3)
    assert long.expected_snr == pytest.approx(whole.expected_snr, rel=0.02)
    assert short.mode.exposure_s == pytest.approx(whole.mode.exposure_s / 3, rel=0.01)
    assert short.expected_snr < long.expected_snr
    assert short.mode.share == pytest.approx(1 / 3, rel=1e-6)
