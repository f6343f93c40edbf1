"""An observatory's own calculator goes before our photon count; crowding and overheads."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from planner.campaign.records import Anchor, CameraSetup, Campaign, SetupRef, Site, Source
from planner.errors import InputError
from planner.instruments import camera
from planner.instruments.calibration import BRIGHTER_MAG, calibrations, rate_factor

ANCHOR = {"minutes": 30, "snr": 12, "mag_arcsec2": 24, "sky": "dark", "airmass": 1.3}


def setup_of(anchor: dict[str, Any] | None, **camera_fields: Any) -> SetupRef:
    """An invented site with one camera."""
    fields = {"aperture_m": 1.8, "filter": "R", **camera_fields} | ({} if anchor is None else {"anchor": anchor})
    site = Site.model_validate(
        {
            "site": "Invented Ridge", "invented": True, "longitude_deg": -70, "latitude_deg": -30, "height_m": 2400,
            "time_zone": "America/Santiago", "months": {"clear": [0.7] * 12},
            "telescopes": {"one": {"setups": {"wide": fields}}},
            "source": Source("ridge.yaml", {("telescopes", "one", "setups", "wide", "anchor"): 17}),
        }
    )  # fmt: skip
    return SetupRef("ridge/wide", "ridge", site, "ridge/one", site.telescopes["one"].setups["wide"])


def single(setup: SetupRef) -> CameraSetup:
    """The camera as a calculator has it: one image, no floor."""
    assert setup.camera is not None
    return setup.camera.model_copy(update={"difference_imaging": False, "subtraction_floor": 0.0})


def test_a_setup_without_an_anchor_keeps_our_photon_count() -> None:
    assert rate_factor(setup_of(None)) == 1.0


@settings(max_examples=40, deadline=None)
@given(st.floats(1.0, 120.0), st.floats(1.0, 30.0), st.floats(20.0, 26.0), st.floats(1.0, 3.0), st.floats(0.5, 50.0))
def test_the_factor_gives_back_the_anchors_own_snr(
    minutes: float, snr: float, mag: float, airmass: float, area: float
) -> None:
    anchor = {
        "minutes": minutes, "snr": snr, "mag_arcsec2": mag, "sky_mag_arcsec2": 21.0, "airmass": airmass,
        "area_arcsec2": area,
    }  # fmt: skip
    setup = setup_of(anchor)
    assert isinstance(setup.site, Site)
    mags = (mag, area, 21.0, airmass, setup.site.extinction_mag["R"], minutes * 60.0)
    if camera.ring_snr(single(setup), "R", *mags, rate_factor=1.1 / 0.3) < snr:  # 1.1 electrons a photon
        with pytest.raises(InputError, match=r"electrons a photon|no photon count"):
            rate_factor(setup)
        return
    got = camera.ring_snr(single(setup), "R", *mags, rate_factor=rate_factor(setup))
    assert got == pytest.approx(snr, rel=1e-9)


def test_a_star_anchors_a_setup_as_well() -> None:
    anchor = {"minutes": 10, "snr": 50, "mag": 20.5, "sky": "grey", "seeing_arcsec": 0.9, "airmass": 1.0}
    setup = setup_of(anchor)
    assert isinstance(setup.site, Site)
    sky = setup.site.sky_mag_arcsec2["R"] - BRIGHTER_MAG["grey"]["R"]
    mags = (20.5, 0.9, sky, 1.0, setup.site.extinction_mag["R"], 600.0)
    assert camera.point_snr(single(setup), "R", *mags, rate_factor=rate_factor(setup)) == pytest.approx(50, rel=1e-9)


def test_a_subtracted_anchor_is_met_with_floor_and_template() -> None:
    setup = setup_of({**ANCHOR, "snr": 1.5, "subtracted": True})
    assert setup.camera is not None
    assert isinstance(setup.site, Site)
    mags = (24.0, 1.0, setup.site.sky_mag_arcsec2["R"], 1.3, setup.site.extinction_mag["R"], 1800.0)
    got = camera.ring_snr(setup.camera, "R", *mags, rate_factor=rate_factor(setup))
    assert got == pytest.approx(1.5, rel=1e-9)
    plain = rate_factor(setup_of({**ANCHOR, "snr": 1.5}))
    assert rate_factor(setup) > plain  # the noise of template and floor must be paid for with more light


def test_the_same_snr_under_a_brighter_sky_means_more_light() -> None:
    dark, grey, bright = (rate_factor(setup_of({**ANCHOR, "snr": 4, "sky": sky})) for sky in ("dark", "grey", "bright"))
    assert dark < grey < bright


def test_in_a_sky_limited_image_the_factor_is_the_square_of_the_snr() -> None:
    """Closed form: S/N goes as the root of the photons where the sky alone makes the noise."""
    quiet = {"read_noise_e": 0.0, "dark_e_s": 0.0}
    faint = {**ANCHOR, "mag_arcsec2": 26.0}
    low, high = (rate_factor(setup_of({**faint, "snr": snr}, **quiet)) for snr in (0.5, 1.0))
    assert high / low == pytest.approx(4.0, rel=0.01)  # the source is 1/110 of the sky


def test_an_anchor_above_the_floors_cap_is_refused_with_the_cap() -> None:
    # source / (floor x sky) = 10^(-0.4 (24 + 0.08 x 1.3 - 20.9)) / 0.003 = 17.4 for one arcsec2, closed form
    with pytest.raises(
        InputError,
        match=r"ridge\.yaml:17, telescopes\.one\.setups\.wide\.anchor\.snr: no photon count gives S/N 40: the setup "
        r"cannot exceed 17\.4 in 30 min, .*subtraction_floor 0\.003 caps it; write subtracted: false",
    ):
        rate_factor(setup_of({**ANCHOR, "snr": 40, "subtracted": True}))


def test_an_anchor_that_needs_more_electrons_than_photons_is_refused() -> None:
    with pytest.raises(InputError, match=r"S/N 300 in 30 min needs .* electrons a photon that falls on the mirror"):
        rate_factor(setup_of({**ANCHOR, "snr": 300}))


def test_an_anchor_in_a_filter_without_a_sky_is_refused() -> None:
    setup = setup_of({**ANCHOR, "filter": "B"})
    site = setup.site.model_copy(update={"sky_mag_arcsec2": {"R": 20.9}})
    assert isinstance(site, Site)
    with pytest.raises(InputError, match=r"sky_mag_arcsec2 has no value for filter B; add it, or give"):
        rate_factor(SetupRef(setup.name, setup.site_slug, site, setup.telescope, setup.camera))


@pytest.mark.parametrize(
    ("change", "text"),
    [
        ({"mag": 20}, "exactly one of mag_arcsec2 .* and mag"),
        ({"mag_arcsec2": None}, "exactly one of mag_arcsec2 .* and mag"),
        ({"sky_mag_arcsec2": 21}, "exactly one of sky .* and sky_mag_arcsec2"),
    ],
)
def test_an_anchor_states_one_light_and_one_sky(change: dict[str, Any], text: str) -> None:
    with pytest.raises(ValueError, match=text):
        setup_of(ANCHOR | change)


# ------------------------------------------------------------------ crowding and overheads


@settings(max_examples=30, deadline=None)
@given(st.floats(1.0, 20.0), st.floats(10.0, 5000.0), st.floats(1.0, 400.0))
def test_crowding_multiplies_the_variance_of_the_background(crowding: float, seconds: float, pixels: float) -> None:
    """Closed form: S t / sqrt(S t + c n (B t + m R^2))."""
    source, sky, read = 2.0, 5.0, 4.0
    got = camera.snr(source, sky, seconds, pixels, read_noise_e=read, crowding=crowding)
    noise2 = source * seconds + crowding * pixels * (sky * seconds + read**2)
    assert got == pytest.approx(source * seconds / np.sqrt(noise2), rel=1e-12)
    back = camera.seconds_for_snr(got, source, sky, pixels, read_noise_e=read, crowding=crowding)
    assert back == pytest.approx(seconds, rel=1e-9)


def test_crowding_of_one_changes_no_bit() -> None:
    setup = setup_of(None)
    assert setup.camera is not None
    mags = (np.linspace(22, 26, 50), 30.0, 20.9, 1.4, 0.08, 900.0)
    plain = camera.ring_snr(setup.camera, "R", *mags)
    assert np.array_equal(plain, camera.ring_snr(setup.camera, "R", *mags, crowding=1.0))
    crowded = camera.ring_snr(setup.camera, "R", *mags, crowding=5.0)
    assert np.all(crowded < plain)
    # a template's noise is the background's too: its subtraction is worse in a crowded field as well
    deep = {"sky_counts": 1.0, "template_s": 3600.0}
    loss = camera.ring_snr(setup.camera, "R", *mags, **deep, crowding=5.0) / camera.ring_snr(
        setup.camera, "R", *mags, **deep
    )
    assert np.all(loss < 1.0)


def test_a_look_pays_for_acquisition_filter_calibration_and_every_readout() -> None:
    setup = setup_of(
        None, acquisition_min=4, calibration_min=6, filter_change_s=90, readout_s=15, longest_exposure_s=300
    )
    assert setup.camera is not None
    # 601 s of open shutter are three frames: 4 + 6 + 1.5 min, 601 s and 45 s
    assert camera.look_minutes(setup.camera, 601.0) == pytest.approx(11.5 + 646 / 60, rel=1e-12)
    assert camera.look_minutes(setup.camera, np.array([])).shape == (0,)
    assert camera.overhead_min(setup.camera) == 11.5


def test_check_shows_every_anchor_with_its_factor(demo_campaign: Campaign) -> None:
    from planner import flow

    assert calibrations(demo_campaign) == []
    setup = demo_campaign.setup("cairn-south/imager")
    assert setup.camera is not None
    anchor = Anchor.model_validate({"minutes": 20, "snr": 6, "mag_arcsec2": 24, "sky": "grey"})
    changed = replace(setup, camera=setup.camera.model_copy(update={"anchor": anchor}))
    campaign = replace(
        demo_campaign, setups=tuple(changed if s.name == setup.name else s for s in demo_campaign.setups)
    )
    (row,) = calibrations(campaign)
    assert row[0] == "cairn-south/imager"
    assert row[2] == (
        "anchor S/N 6 in 20 min on 24 mag/arcsec2 in R (grey sky, airmass 1.2): "
        f"all light counts {rate_factor(changed):.3g} times our photon count"
    )
    assert row in flow.understood(campaign).facts
