"""Arrays with subarrays, receivers and stations; weather by month; how a camera's look is taken."""

from __future__ import annotations

from typing import Any

import pytest

from planner.campaign.array_setups import subarray_of
from planner.campaign.assumptions import assumptions
from planner.campaign.presets import RECEIVERS
from planner.campaign.reading import read_campaign, read_site
from planner.campaign.records import ArraySite, CameraSetup, Months, Receiver, Seeing
from planner.errors import InputError, UnknownName

BAND = {"ghz": 43, "bandwidth_mhz": 256, "look_hours": 3}
PARTS = "subarrays:\n  west: [A, B]\n  east: {stations: [B, C], least_stations: 2}\n"


def test_a_subarray_is_a_setup_of_its_own(folder: Any) -> None:
    folder.append("sites/dishes.yaml", PARTS)
    folder.edit("campaign.yaml", "setup: dishes/43ghz", "setup: dishes/43ghz@west")
    campaign = read_campaign(folder.path)
    setup = campaign.setup("dishes/43ghz@west")
    assert isinstance(setup.site, ArraySite)
    assert [s.station for s in setup.site.stations] == ["A", "B"]
    assert (setup.receiver_name, setup.telescope, subarray_of(setup)) == ("43ghz", "dishes@west", "west")
    whole = campaign.sites["dishes"]
    assert isinstance(whole, ArraySite)
    assert len(whole.stations) == 3
    # what is assumed of its receiver is found in the file of the array
    places = {a.place.line for a in assumptions(setup) if a.field == "dynamic_range"}
    assert places == {folder.line("sites/dishes.yaml", "43ghz: {receiver_class: 43ghz_cooled")}


def test_parts_that_share_a_station_share_a_telescope(folder: Any) -> None:
    folder.append("sites/dishes.yaml", PARTS)
    folder.edit("campaign.yaml", "setup: dishes/43ghz", "setup: dishes/43ghz@west")
    folder.edit(
        "campaign.yaml", "fixed_looks:", "  - {setup: dishes/43ghz@east, programme: knots, hours: 3}\nfixed_looks:"
    )
    campaign = read_campaign(folder.path)
    assert {s.telescope for s in campaign.setups if s.is_array} == {"dishes@east+west"}


def test_least_stations_of_a_part_are_its_own_or_the_arrays_or_all() -> None:
    stations = [
        {"station": n, "longitude_deg": 10 * i, "latitude_deg": 40, "height_m": 0, "sefd_jy": {"q": 1.0}}
        for i, n in enumerate("ABCDE")
    ]
    parts = {"two": ["A", "B"], "four": ["A", "B", "C", "D"], "own": {"stations": ["A", "B", "C"], "least_stations": 2}}
    site = ArraySite.model_validate(
        {
            "array": "X", "invented": True, "stations": stations, "least_stations": 3, "receivers": {"q": BAND},
            "subarrays": parts, "months": {"clear": [0.5] * 12},
        }
    )  # fmt: skip
    assert [site.part(name).least_stations for name in ("two", "four", "own")] == [2, 3, 2]


@pytest.mark.parametrize(
    ("parts", "text"),
    [
        ("subarrays: {west: [A, Q]}\n", r"yaml:\d+, subarrays\.west\.stations\[1\]: unknown station 'Q'.*A, B, C"),
        ("subarrays: {west: [A, A]}\n", r"station 'A' is listed twice in subarray 'west'"),
        ("subarrays: {west: [A]}\n", r"subarrays\.west"),
        (
            "subarrays: {west: {stations: [A, B], least_stations: 3}}\n",
            r"least_stations: got 3, above the 2 stations of subarray 'west'",
        ),
    ],
)  # fmt: skip
def test_faulty_subarrays_are_named(folder: Any, parts: str, text: str) -> None:
    folder.append("sites/dishes.yaml", parts)
    with pytest.raises(InputError, match=text):
        read_site(folder.path / "sites/dishes.yaml")


@pytest.mark.parametrize(
    ("setup", "text"),
    [
        ("dishes/43ghz@wst", r"yaml:\d+, allocations\[2\]\.setup: unknown subarray of dishes 'wst'; .*'west'"),
        ("dishes/34ghz@west", r"unknown receiver of dishes '34ghz'"),
        ("dishes/22ghz@west", r"only 1 stations of subarray 'west' of dishes have a sefd_jy for '22ghz', .*stations 2"),
        ("dishes/43ghz@", r"write site/setup"),
    ],
)  # fmt: skip
def test_faulty_names_of_subarrays_are_named(folder: Any, setup: str, text: str) -> None:
    folder.append("sites/dishes.yaml", PARTS)
    folder.edit("campaign.yaml", "setup: dishes/43ghz", f"setup: {setup}")
    with pytest.raises(InputError, match=text):
        read_campaign(folder.path)


@pytest.mark.parametrize(
    ("bands", "text"),
    [
        ("[44ghz]", r"receivers\.43ghz\.simultaneous\[0\]: unknown receiver '44ghz'"),
        ("[43ghz]", r"'43ghz' is listed twice, or is this very receiver"),
        ("[22ghz]", r"only 1 stations of dishes have a sefd_jy for '22ghz', fewer than its least_stations 2"),
    ],
)
def test_faulty_bands_of_one_look_are_named(folder: Any, bands: str, text: str) -> None:
    old = "43ghz: {receiver_class: 43ghz_cooled, look_hours: 3}"
    folder.edit("sites/dishes.yaml", old, old.replace("look_hours: 3", f"look_hours: 3, simultaneous: {bands}"))
    with pytest.raises(InputError, match=text):
        read_campaign(folder.path)


# ------------------------------------------------------------------ receivers and stations


def test_presets_bring_the_opacity_of_their_band() -> None:
    for name, preset in RECEIVERS.items():
        receiver = Receiver.model_validate({"receiver_class": name, "look_hours": 3})
        assert receiver.opacity == preset.values["opacity"]
        assert receiver.zenith_opacity(7) == receiver.opacity
    taus = [float(RECEIVERS[name].values["opacity"]) for name in ("5ghz_cooled", "15ghz_cooled", "86ghz_cooled")]
    assert taus == sorted(taus)


def test_twelve_opacities_are_those_of_the_months() -> None:
    receiver = Receiver.model_validate(BAND | {"opacity": [0.01 * i for i in range(12)]})
    assert [receiver.zenith_opacity(m) for m in (1, 12)] == pytest.approx([0.0, 0.11])
    assert receiver.opacity_by_month
    assert not Receiver.model_validate(BAND).opacity_by_month


@pytest.mark.parametrize(
    ("change", "text"),
    [
        ({"opacity": [0.1, 0.2]}, "got 2 values, needs a list of 12 zenith opacities, January first"),
        ({"opacity": -0.1}, "greater than or equal to 0"),
        ({"mode_shares": [1, 1]}, "got 1, 1; list each share once, rising"),
        ({"mode_shares": [0.5, 10]}, r"look_hours 3 times 10 is more than 24 h"),
        ({"mode_shares": []}, "at least 1 item"),
        ({"sessions": ["2027-13-01"]}, "write year-month-day|no day of the calendar"),
        ({"interleaved_with": 0}, "greater than or equal to 1"),
    ],
)
def test_faulty_receivers_are_named(change: dict[str, Any], text: str) -> None:
    with pytest.raises(ValueError, match=text):
        Receiver.model_validate(BAND | change)


def test_reliability_is_on_the_list_of_what_is_assumed(folder: Any) -> None:
    site = read_site(folder.path / "sites/dishes.yaml")
    found = [a for a in assumptions(site) if a.field == "stations[0].reliability"]
    assert [(a.value, a.why) for a in found] == [
        ("0.95", "chance to take part in a look, weather apart; common practice")
    ]


# ------------------------------------------------------------------ weather and seeing


def test_seeing_is_one_law_or_twelve_medians() -> None:
    one = Months.model_validate({"clear": [0.5] * 12, "seeing_arcsec": {"median": 0.9, "sigma_ln": 0.25}})
    assert one.seeing_arcsec.median_arcsec(7) == one.seeing_arcsec.median_arcsec() == 0.9
    medians = [0.8 + 0.01 * i for i in range(12)]
    bare = Months.model_validate({"clear": [0.5] * 12, "seeing_arcsec": medians})
    assert bare.seeing_arcsec.median_arcsec(12) == pytest.approx(0.91)
    assert bare.seeing_arcsec.sigma_ln == 0.3
    with_spread = Seeing.model_validate({"median": medians, "sigma_ln": 0.2})
    assert with_spread.median_arcsec(1) == 0.8


def test_shares_of_clear_and_thin_nights_add() -> None:
    months = Months.model_validate({"clear": [0.5] * 12, "thin_cloud": [0.1] * 6 + [0.5] * 6, "thin_cloud_mag": 0.4})
    assert months.good("clear") == (0.5,) * 12
    assert months.good("thin") == pytest.approx((0.6,) * 6 + (1.0,) * 6)
    assert months.cloud_mag("clear", 1) == 0.0
    assert months.cloud_mag("thin", 1) == pytest.approx(0.4 * 0.1 / 0.6)


@pytest.mark.parametrize(
    ("change", "text"),
    [
        ({"thin_cloud": [0.6] * 12}, "clear 0.5 and thin_cloud 0.6 make more than 1 in month 1"),
        ({"thin_cloud": [0.1]}, "got 1 values, needs a list of 12 shares of nights with thin cloud, January first"),
        ({"seeing_arcsec": [1.0] * 11}, "got 11 values, needs a list of 12 medians, January first"),
        ({"seeing_arcsec": {"median": 0}}, "greater than 0"),
    ],
)
def test_faulty_weather_is_named(change: dict[str, Any], text: str) -> None:
    with pytest.raises(ValueError, match=text):
        Months.model_validate({"clear": [0.5] * 12} | change)


def test_weather_is_shared_with_a_site_that_there_is(folder: Any) -> None:
    folder.edit("sites/hill.yaml", "months:", "months:\n  weather_with: brack-ridge")
    campaign = read_campaign(folder.path)
    assert campaign.sites["hill"].months.weather_with == "brack-ridge"
    folder.edit("sites/hill.yaml", "weather_with: brack-ridge", "weather_with: brak-ridge")
    with pytest.raises(
        UnknownName,
        match=r"hill\.yaml:\d+, months\.weather_with: unknown site 'brak-ridge'; did you mean 'brack-ridge'",
    ):
        read_campaign(folder.path)


def test_a_site_has_its_own_weather_anyway(folder: Any) -> None:
    folder.edit("sites/hill.yaml", "months:", "months:\n  weather_with: hill")
    with pytest.raises(UnknownName, match=r"months\.weather_with: unknown site 'hill'"):
        read_campaign(folder.path)


@pytest.mark.parametrize(
    ("change", "text"),
    [
        ({"needs": "photometric"}, "clear.*thin"),
        ({"crowding": 0.5}, "greater than or equal to 1"),
        ({"calibration_min": -1}, "greater than or equal to 0"),
        ({"mode_shares": [2, 1]}, "got 2, 1; list each share once, rising"),
        ({"mode_shares": [0.2, 0.5, 1, 2, 4]}, "at most 4 items"),
    ],
)
def test_faulty_cameras_are_named(change: dict[str, Any], text: str) -> None:
    with pytest.raises(ValueError, match=text):
        CameraSetup.model_validate({"aperture_m": 1.0} | change)
