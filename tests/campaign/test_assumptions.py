"""Whatever was left out is listed with its value and origin; presets fill only what was left out."""

from __future__ import annotations

import pytest
from pydantic import ValidationError

from planner.campaign.assumptions import assumptions, grouped
from planner.campaign.presets import CAMERAS, RECEIVERS, preset_words
from planner.campaign.reading import read_campaign
from planner.campaign.records import CameraSetup, Receiver


def fields(found, owner):
    return {a.field: a for a in found if a.owner == owner}


def test_a_field_is_listed_when_left_out_and_not_when_written(folder):
    before = fields(assumptions(read_campaign(folder.path)), "target Reed, ring Reed ring")
    assert before["dust.thickness_pc"].value == "0.5"
    assert before["dust.thickness_pc"].why == "thin filament, common practice; no source"
    assert before["dust.tilt"].value == "slope_sigma 0.3, slope_east 0, slope_north 0"
    assert str(before["dust.thickness_pc"].place) == f"{folder.path / 'reed.yaml'}:{folder.line('reed.yaml', 'dust:')}"
    folder.edit("reed.yaml", "shape: sheet", "shape: sheet\n      thickness_pc: 0.5\n      tilt: {slope_sigma: 0.2}")
    after = fields(assumptions(read_campaign(folder.path)), "target Reed, ring Reed ring")
    assert set(before) - set(after) == {"dust.thickness_pc", "dust.tilt"}  # the same value, but now it was written


def test_only_what_has_an_effect_is_listed(folder):
    found = assumptions(read_campaign(folder.path))
    ring, knot = fields(found, "target Reed"), fields(found, "target Moss")
    assert "nuisances.plate_scale_sigma" in ring
    assert "cosmology.h0_km_s_mpc" not in ring  # no redshift
    assert "nuisances.core_wander_beam" not in ring
    assert "cosmology.h0_km_s_mpc" in knot
    assert "nuisances.plate_scale_sigma" not in knot
    assert not any("22ghz" in a.owner for a in found)  # no allocation uses that receiver
    assert "months.seeing_arcsec" in fields(found, "site Invented Hill")
    assert "months.seeing_arcsec" not in fields(found, "array Invented Dishes")


def test_what_a_preset_filled_is_listed_as_the_presets(folder):
    found = fields(assumptions(read_campaign(folder.path)), "setup hill/big")
    assert found["throughput"].value == "0.35"
    assert found["throughput"].why.startswith("preset ccd_blue (thinned back-illuminated CCD with a blue coating)")
    assert "read_noise_e" not in found  # written in the file
    assert found["snr_wanted"].why == "summed S/N of a feature that sets the minutes of a look"
    receiver = fields(assumptions(read_campaign(folder.path)), "setup dishes/43ghz")
    assert receiver["ghz"].value == "43.1"
    assert "look_hours" not in receiver


def test_alike_assumptions_come_together(folder):
    groups = grouped(assumptions(read_campaign(folder.path)))
    odds = [found for (field, _, _), found in groups.items() if field == "goals[].odds"]
    assert [len(found) for found in odds] == [4]  # two goals of the ring and two of the knot


def test_explicit_fields_win_over_a_preset():
    camera = CameraSetup(camera="ccd_front", aperture_m=1, throughput=0.5)
    assert (camera.throughput, camera.read_noise_e) == (0.5, CAMERAS["ccd_front"].values["read_noise_e"])
    plain = CameraSetup(aperture_m=1)
    assert plain.read_noise_e == 5.0
    assert camera.model_fields_set == {"camera", "aperture_m", "throughput"}


@pytest.mark.parametrize("name", CAMERAS)
def test_each_camera_preset_is_within_the_fields_limits(name):
    camera = CameraSetup(camera=name, aperture_m=1)
    assert {key: getattr(camera, key) for key in CAMERAS[name].values} == CAMERAS[name].values


@pytest.mark.parametrize("name", RECEIVERS)
def test_each_receiver_preset_is_within_the_fields_limits_and_true_to_its_name(name):
    receiver = Receiver(receiver_class=name, look_hours=2)
    assert round(receiver.ghz) == int(name.split("ghz")[0])
    with pytest.raises(ValidationError, match="ghz"):
        Receiver(look_hours=2)


def test_every_preset_says_where_its_values_come_from():
    for preset in (*CAMERAS.values(), *RECEIVERS.values()):
        assert "from memory" in preset.why
        assert "common practice" in preset.why
    assert len(list(preset_words(CAMERAS))) == len(CAMERAS)
