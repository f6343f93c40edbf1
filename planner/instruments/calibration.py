"""An observatory's own exposure calculator against our photon count: one factor on all light."""

from __future__ import annotations

import math

from planner.campaign.records import ArraySite, CameraSetup, Campaign, SetupRef
from planner.errors import InputError
from planner.instruments import camera

# Zenith sky at 7 and 14 days from new Moon against that at 0, mag/arcsec2 (Walker 1987, NOAO Newsletter 10, from
# memory; B V R I listed there, g r i between their neighbours).
BRIGHTER_MAG = {
    "dark": dict.fromkeys(("B", "g", "V", "r", "R", "i", "I"), 0.0),
    "grey": {"B": 1.1, "g": 0.75, "V": 0.4, "r": 0.33, "R": 0.3, "i": 0.23, "I": 0.2},
    "bright": {"B": 3.2, "g": 2.5, "V": 1.8, "r": 1.2, "R": 1.0, "i": 0.8, "I": 0.7},
}
# Electrons per photon that a setup may end at: 1 would be no loss anywhere, and our passbands are good to 10 %.
MOST_THROUGHPUT = 1.1
SEARCHED = 1e6  # factors from 1/SEARCHED to SEARCHED are tried; no calculator is that far from a photon count


def rate_factor(setup: SetupRef) -> float:
    """Factor on our photon count that makes a setup give its anchor's S/N; 1 without an anchor.

    Source and sky are scaled alike; dark current, readout noise and (for ``subtracted`` anchors) the subtraction
    floor are not, so the answer is a root of ``anchor_snr``. Raises InputError when no factor gives that S/N, or
    when it would need more electrons than photons fall on the mirror.
    """
    own = setup.camera
    if own is None or own.anchor is None or isinstance(setup.site, ArraySite):
        return 1.0
    from scipy.optimize import brentq

    anchor, name = own.anchor, own.anchor.filter or own.filter
    rest = (setup, own, name)
    highest = anchor_snr(*rest, SEARCHED)
    if highest < anchor.snr or anchor_snr(*rest, 1.0 / SEARCHED) > anchor.snr:
        why = f"the setup cannot exceed {highest:.3g} in {anchor.minutes:g} min, however much light it takes in"
        if anchor.subtracted:
            why += f": subtraction_floor {own.subtraction_floor:g} caps it; write subtracted: false for a single image"
        raise _error(setup, f"no photon count gives S/N {anchor.snr:g}: {why}", anchor.snr, "snr")
    root = brentq(
        lambda ln: math.log(anchor_snr(*rest, math.exp(ln)) / anchor.snr),
        -math.log(SEARCHED), math.log(SEARCHED), xtol=1e-13, rtol=1e-14,
    )  # fmt: skip
    factor = math.exp(float(root))
    if factor * own.throughput > MOST_THROUGHPUT:
        text = (
            f"S/N {anchor.snr:g} in {anchor.minutes:g} min needs {factor * own.throughput:.2g} electrons a photon "
            "that falls on the mirror; check its brightness, area_arcsec2 and aperture_m"
        )
        raise _error(setup, text, anchor.snr, "snr")
    return factor


def calibrations(campaign: Campaign) -> list[tuple[str, str, str]]:
    """What the setups' anchors say: (setup, "", words) for each setup that has one."""
    found = []
    for setup in campaign.setups:
        if setup.camera is None or setup.camera.anchor is None:
            continue
        anchor, factor = setup.camera.anchor, rate_factor(setup)
        light = f"{anchor.mag:g} mag" if anchor.mag is not None else f"{anchor.mag_arcsec2:g} mag/arcsec2"
        sky = anchor.sky or f"{anchor.sky_mag_arcsec2:g} mag/arcsec2"
        words = (
            f"anchor S/N {anchor.snr:g} in {anchor.minutes:g} min on {light} in {anchor.filter or setup.camera.filter} "
            f"({sky} sky, airmass {anchor.airmass:g}): all light counts {factor:.3g} times our photon count"
        )
        found.append((setup.name, "", words))
    return found


def anchor_snr(setup: SetupRef, own: CameraSetup, filter_name: str, factor: float) -> float:
    """S/N of the anchor's look with our photon count times ``factor``."""
    assert own.anchor is not None
    assert not isinstance(setup.site, ArraySite)
    anchor, site = own.anchor, setup.site
    sky = anchor.sky_mag_arcsec2
    if sky is None:
        assert anchor.sky is not None
        if filter_name not in site.sky_mag_arcsec2:
            text = f"the site's sky_mag_arcsec2 has no value for filter {filter_name}; add it, or give sky_mag_arcsec2"
            raise _error(setup, text, filter_name, "filter")
        sky = site.sky_mag_arcsec2[filter_name] - BRIGHTER_MAG[anchor.sky][filter_name]
    if not anchor.subtracted:
        own = own.model_copy(update={"subtraction_floor": 0.0, "difference_imaging": False})
    extinction = {str(name): mag for name, mag in site.extinction_mag.items()}
    rest = (sky, anchor.airmass, extinction.get(filter_name, 0.0), anchor.minutes * 60.0)
    if anchor.mag is not None:
        return float(camera.point_snr(own, filter_name, anchor.mag, anchor.seeing_arcsec, *rest, rate_factor=factor))
    assert anchor.mag_arcsec2 is not None
    return float(camera.ring_snr(own, filter_name, anchor.mag_arcsec2, anchor.area_arcsec2, *rest, rate_factor=factor))


def _error(setup: SetupRef, text: str, value: object, field: str) -> InputError:
    telescope, name = setup.telescope.split("/", 1)[-1], setup.name.split("/", 1)[1]
    place = setup.site.source.place("telescopes", telescope, "setups", name, "anchor")
    return InputError(text, place=place, field=f"telescopes.{telescope}.setups.{name}.anchor.{field}", value=value)
