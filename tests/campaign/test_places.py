"""Positions: sexagesimal text and degrees mean the same place."""

from __future__ import annotations

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from pydantic import ValidationError

from planner.campaign.places import Position, angle_deg


@settings(max_examples=200, deadline=None)
@given(st.integers(0, 86_400_00 - 1))
def test_right_ascension_comes_back_from_sexagesimal_text(hundredths):
    """Written by whole-number arithmetic to 0.01 s, so the text is exact and so must the value be."""
    seconds, rest = divmod(hundredths, 100)
    text = f"{seconds // 3600:02d}:{seconds // 60 % 60:02d}:{seconds % 60:02d}.{rest:02d}"
    # 15 arcsec per second of time; 1e-9 deg is 4 microarcsec, the rounding of a double at 360
    assert angle_deg(text, hours=True) == pytest.approx(hundredths / 100 * 15 / 3600, abs=1e-9)


@settings(max_examples=200, deadline=None)
@given(st.integers(-90 * 36_000, 90 * 36_000), st.sampled_from([":", " ", "dm"]))
def test_declination_comes_back_from_sexagesimal_text_with_its_sign(tenths, between):
    """Minus zero degrees is where signs get lost: -00:30:00 is south of the equator."""
    size = abs(tenths)
    parts = f"{size // 36_000:02d}", f"{size // 600 % 60:02d}", f"{size // 10 % 60:02d}.{size % 10}"
    first, second = between if len(between) == 2 else between * 2
    text = ("-" if tenths < 0 else "+") + parts[0] + first + parts[1] + second + parts[2]
    assert angle_deg(text, hours=False) == pytest.approx(tenths / 36_000, abs=1e-9)


def test_minus_zero_degrees_is_south():
    assert Position(ra=0, dec="-00:30:00").dec_deg == -0.5
    assert Position(ra=0, dec="\N{MINUS SIGN}00:30:00").dec_deg == -0.5


def test_numbers_are_degrees_for_both_axes():
    place = Position(ra=93.5, dec=-12.5)
    assert (place.ra_deg, place.dec_deg) == (93.5, -12.5)


@pytest.mark.parametrize(
    ("ra", "dec", "message"),
    [
        ("24:00:00", 0, "less than 360"),
        ("-01:00:00", 0, "greater than or equal to 0"),
        ("06:60:00", 0, "minutes and seconds must be below 60"),
        ("06:14:60.0", 0, "minutes and seconds must be below 60"),
        ("6h", 0, "write hh:mm:ss.ss in quotes, or a number in degrees"),
        (0, "+90:00:01", "less than or equal to 90"),
        (0, "12.5 deg", "write ±dd:mm:ss.s in quotes"),
        (float("nan"), 0, "finite number"),
    ],
)
def test_a_bad_angle_is_told_with_the_shape_it_should_have(ra, dec, message):
    with pytest.raises(ValidationError, match=message):
        Position(ra=ra, dec=dec)
