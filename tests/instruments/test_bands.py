"""Electrons from a star: known fluxes, scaling, and the inverse."""

from __future__ import annotations

import numpy as np
import pytest

from planner.campaign.records import CameraSetup
from planner.errors import UnknownName
from planner.instruments.bands import PASSBANDS, passband, photons_e_s, zero_point_mag


def one_square_metre(**change: object) -> CameraSetup:
    """Aperture of 1 m2, every photon counted."""
    fields = {"aperture_m": (4 / np.pi) ** 0.5, "obstruction": 0.0, "throughput": 1.0} | change
    return CameraSetup.model_validate(fields)


def test_v_magnitude_zero_gives_a_thousand_photons_per_square_centimetre_second_and_angstrom():
    # Rule of thumb for Vega at 550 nm, from memory; good to about 5 %.
    per_angstrom = photons_e_s(one_square_metre(), "V", 0.0) / 1e4 / (0.16 * 5500)
    assert per_angstrom == pytest.approx(1000, rel=0.05)


def test_ab_zero_gives_photons_by_the_definition_of_the_ab_system():
    # AB: 3631 Jy at every frequency. Photons = F_nu / h x d(nu)/nu; h from the SI. Closed form, hence 1e-9.
    expected = 3631e-26 / 6.62607015e-34 * PASSBANDS["r"].relative_width
    assert photons_e_s(one_square_metre(), "r", 0.0) == pytest.approx(expected, rel=1e-9)


def test_published_zero_point_example():
    # 151,356 counts in 100 s with a zero point of 20.75 is magnitude 12.80: a lecture page on the S/N of CCD
    # images, University of Turku (opened by the reference's author). Printed to 0.01 mag = 0.9 %.
    setup = one_square_metre()
    rate = photons_e_s(setup, "V", zero_point_mag(setup, "V") - (20.75 - 12.80))
    assert rate == pytest.approx(1513.56, rel=0.009)


@pytest.mark.parametrize("name", sorted(PASSBANDS))
def test_zero_point_is_the_magnitude_of_one_electron_a_second(name):
    setup = one_square_metre(throughput=0.3)
    assert photons_e_s(setup, name, zero_point_mag(setup, name)) == pytest.approx(1.0, rel=1e-12)


def test_electrons_scale_with_free_area_and_throughput():
    small, large = one_square_metre(), one_square_metre(aperture_m=4.0, obstruction=0.25, throughput=0.5)
    ratio = 4.0**2 * np.pi / 4 * 0.75 * 0.5
    assert photons_e_s(large, "R", 18.0) == pytest.approx(ratio * photons_e_s(small, "R", 18.0), rel=1e-12)


@pytest.mark.parametrize("shape", [(), (3,), (0,), (2, 3)])
def test_shape_follows_the_magnitudes(shape):
    assert np.shape(photons_e_s(one_square_metre(), "B", np.full(shape, 20.0))) == shape


def test_no_light_at_infinite_magnitude():
    assert photons_e_s(one_square_metre(), "B", np.inf) == 0.0


def test_unknown_filter_is_named_with_the_permitted_ones():
    with pytest.raises(UnknownName, match=r"unknown filter 'v'.*allowed: B, I, R, V, g, i, r"):
        passband("v")
