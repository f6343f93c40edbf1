"""Presets of cameras and receivers, named by class: typical values, never those of one make or observatory.

A preset fills only the fields that a setup leaves out, and what it fills is listed as assumed.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from typing import Any

from planner.campaign.base import raise_faults, unknown


@dataclass(frozen=True, slots=True)
class Preset:
    """Values of a class of equipment, what the class is, and where the values come from."""

    words: str
    why: str
    values: Mapping[str, float | int | bool]


_CCD = "typical of this class of detector; from memory, common practice"
_BAND = "typical of a cooled receiver recording about 2 Gbit/s; from memory, common practice"

CAMERAS: Mapping[str, Preset] = {
    "ccd_blue": Preset(
        "thinned back-illuminated CCD with a blue coating",
        _CCD,
        {"throughput": 0.35, "read_noise_e": 4.0, "dark_e_s": 0.001, "pixel_arcsec": 0.40, "readout_s": 30.0},
    ),
    "ccd_red_deep": Preset(
        "deep-depletion CCD for the red, little fringing",
        _CCD,
        {"throughput": 0.40, "read_noise_e": 4.0, "dark_e_s": 0.002, "pixel_arcsec": 0.30, "readout_s": 30.0},
    ),
    "ccd_front": Preset(
        "front-illuminated CCD of an older or small telescope",
        _CCD,
        {
            "throughput": 0.18, "read_noise_e": 9.0, "dark_e_s": 0.02, "pixel_arcsec": 0.60,
            "readout_s": 15.0, "subtraction_floor": 0.005,
        },
    ),
    "ccd_mosaic": Preset(
        "mosaic of thinned CCDs over a wide field",
        _CCD,
        {
            "throughput": 0.33, "read_noise_e": 6.0, "dark_e_s": 0.001, "pixel_arcsec": 0.27,
            "field_arcmin": 60.0, "readout_s": 40.0, "subtraction_floor": 0.004,
        },
    ),
    "cmos_fast": Preset(
        "back-illuminated CMOS, short frames",
        _CCD,
        {
            "throughput": 0.33, "read_noise_e": 1.8, "dark_e_s": 0.02, "pixel_arcsec": 0.35, "readout_s": 1.0,
            "longest_exposure_s": 60.0,
        },
    ),
}  # fmt: skip

RECEIVERS: Mapping[str, Preset] = {
    "5ghz_cooled": Preset(
        "cooled receiver at 5 GHz", _BAND,
        {"ghz": 5.0, "opacity": 0.008, "system_k": 35.0, "bandwidth_mhz": 256.0, "on_source": 0.8}
    ),
    "8ghz_cooled": Preset(
        "cooled receiver at 8.4 GHz", _BAND,
        {"ghz": 8.4, "opacity": 0.01, "system_k": 40.0, "bandwidth_mhz": 256.0, "on_source": 0.8}
    ),
    "15ghz_cooled": Preset(
        "cooled receiver at 15 GHz", _BAND,
        {"ghz": 15.4, "opacity": 0.02, "system_k": 55.0, "bandwidth_mhz": 256.0, "on_source": 0.75}
    ),
    "22ghz_cooled": Preset(
        "cooled receiver at 22 GHz", _BAND,
        {"ghz": 22.2, "opacity": 0.06, "system_k": 70.0, "bandwidth_mhz": 256.0, "on_source": 0.7}
    ),
    "43ghz_cooled": Preset(
        "cooled receiver at 43 GHz", _BAND,
        {"ghz": 43.1, "opacity": 0.07, "system_k": 90.0, "bandwidth_mhz": 256.0, "on_source": 0.6}
    ),
    "86ghz_cooled": Preset(
        "cooled receiver at 86 GHz", _BAND,
        {
            "ghz": 86.2, "opacity": 0.1, "system_k": 130.0, "bandwidth_mhz": 512.0,
            "on_source": 0.5, "dynamic_range": 200.0, "position_floor_beam": 0.1,
        },
    ),
}  # fmt: skip


def preset_values(key: str, name: Any, presets: Mapping[str, Preset]) -> Mapping[str, float | int | bool]:
    """Return the values of a preset; an unknown name is reported at ``key`` with the nearest spelling."""
    if name is None:
        return {}
    if not isinstance(name, str) or name not in presets:
        raise_faults(key, [unknown((key,), str(name), presets, f"{key} preset")])
    return presets[name].values


def preset_words(presets: Mapping[str, Preset]) -> Iterable[str]:
    """One line per preset, for help texts."""
    return [f"{name}: {preset.words}" for name, preset in presets.items()]
