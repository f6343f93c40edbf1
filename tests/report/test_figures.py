"""Figures: what is drawn, not how it looks."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from matplotlib.figure import Figure
from report_records import (
    ARRAY,
    CAMERA,
    IMAGER,
    KNOT,
    MJD,
    NIGHTS,
    RING,
    SETUPS,
    make_forecast,
    make_look,
    make_plan,
    make_windows,
)

from planner.report import figures, series

STYLES = figures.setup_styles(tuple(sorted(SETUPS)))
PNG_START = b"\x89PNG\r\n\x1a\n"


def new_axis() -> Any:
    return Figure().subplots()


def legend_texts(ax: Any) -> list[str]:
    return [t.get_text() for t in ax.get_legend().get_texts()]


def test_drawing_functions_return_the_axis_they_were_given() -> None:
    forecast, windows, plan = make_forecast(), make_windows(), make_plan()
    for draw in (
        lambda ax: figures.draw_band(ax, forecast, forecast.targets[0].bands[0], forecast.targets[0].measurable),
        lambda ax: figures.draw_chance(ax, forecast, forecast.targets[0].measurable),
        lambda ax: figures.draw_windows(ax, windows, "Reed"),
        lambda ax: figures.draw_calendar(ax, plan.looks, NIGHTS),
    ):
        ax = new_axis()
        assert draw(ax) is ax


def test_the_line_is_the_median_at_the_moments_of_the_forecast() -> None:
    """MJD 40587 is 1970-01-01, where the figure's days begin."""
    forecast = make_forecast()
    band = forecast.target("Reed").bands[0]
    ax = figures.draw_band(new_axis(), forecast, band)
    line = ax.get_lines()[0]
    np.testing.assert_allclose(line.get_ydata(), band.quantiles[2])
    np.testing.assert_allclose(line.get_xdata(), MJD - 40587.0)
    assert ax.get_ylabel() == "radius\n[arcsec]"


def test_magnitudes_grow_downward_and_nothing_else_does() -> None:
    forecast = make_forecast()
    radius, brightness = forecast.target("Reed").bands
    assert not figures.draw_band(new_axis(), forecast, radius).yaxis_inverted()
    assert figures.draw_band(new_axis(), forecast, brightness).yaxis_inverted()


def test_a_look_that_will_likely_not_measure_the_feature_is_hollow() -> None:
    """With the wide camera the invented chance is below one half before night 30 and above it after."""
    forecast = make_forecast()
    target = forecast.target("Reed")
    looks = (make_look(1, 10), make_look(2, 60))
    ax = figures.draw_band(new_axis(), forecast, target.bands[0], target.measurable, looks, styles=STYLES)
    faces = [line.get_markerfacecolor() for line in ax.get_lines() if line.get_marker() == STYLES[CAMERA].marker]
    assert faces == ["white", STYLES[CAMERA].colour]
    assert f"look, {CAMERA}\n(unlikely to measure it)" in legend_texts(ax)


def test_the_zone_out_of_reach_is_drawn_only_where_it_shows() -> None:
    """A limit far below the band would only squeeze the band; the axis keeps to the band."""
    forecast = make_forecast()
    target = forecast.target("Reed")
    wide, imager = target.measurable
    ax = figures.draw_band(new_axis(), forecast, target.bands[0], (wide, imager), styles=STYLES)
    assert f"out of reach of\n{CAMERA}" in legend_texts(ax)
    far = replace(wide, span=(np.full(len(MJD), 1.0), np.full(len(MJD), np.nan)))
    ax = figures.draw_band(new_axis(), forecast, target.bands[0], (far,), styles=STYLES)
    assert not any("out of reach" in text for text in legend_texts(ax))
    assert ax.get_ylim()[0] > 20.0


def test_an_observable_that_never_exists_is_said_in_the_figure() -> None:
    forecast = make_forecast()
    band = forecast.target("Reed").bands[0]
    empty = replace(band, quantiles=np.full(band.quantiles.shape, np.nan), exists=np.zeros(len(MJD)))
    ax = figures.draw_band(new_axis(), forecast, empty, (), (make_look(1, 10),))
    assert "does not exist in this season" in [t.get_text() for t in ax.texts]


def test_likely_nights_need_one_setup_with_a_chance_of_one_half() -> None:
    m = make_forecast().target("Reed").measurable[0]
    low, high = replace(m, chance=np.array([0.1, 0.49, np.nan])), replace(m, chance=np.array([0.5, 0.2, 0.9]))
    assert series.likely_nights((low, high), 3).tolist() == [True, False, True]
    assert series.likely_nights((), 2).tolist() == [False, False]


def test_hours_a_night_add_up_to_the_hours_of_all_windows() -> None:
    """Sum over nights and setups against a plain loop over the rows."""
    windows = make_windows()
    hours = series.night_hours(windows, "Reed")
    plain = sum(
        24 * (e - s) for t, s, e in zip(windows.target, windows.start_mjd, windows.end_mjd, strict=True) if t == 0
    )
    assert hours.shape == (len(SETUPS), len(NIGHTS))
    assert hours.sum() == pytest.approx(plain, rel=1e-12)
    assert hours[SETUPS.index(IMAGER), 110] == 0.0
    assert series.night_hours(windows, "nobody").sum() == 0.0


def test_a_setup_without_any_window_is_named_and_one_never_considered_is_not() -> None:
    windows = make_windows()
    none = replace(windows, target=np.ones_like(windows.target))
    ax = figures.draw_windows(new_axis(), none, "Reed")
    assert legend_texts(ax) == [f"{CAMERA} (no window)", f"{IMAGER} (no window)"]
    assert legend_texts(figures.draw_windows(new_axis(), windows, "Heron")) == [ARRAY]


def test_the_calendar_has_a_line_a_telescope() -> None:
    ax = figures.draw_calendar(new_axis(), make_plan().looks, NIGHTS)
    assert [t.get_text() for t in ax.get_yticklabels()] == [
        "long-array",
        "north-hill/one-eight",
        "south-plain/four-metre",
    ]
    empty = figures.draw_calendar(new_axis(), (), NIGHTS)
    assert "no look is planned" in [t.get_text() for t in empty.texts]


def test_a_setup_looks_the_same_in_every_figure_and_differs_from_all_others() -> None:
    many = figures.setup_styles([f"site/s{i}" for i in range(30)])
    assert len({(s.colour, s.marker) for s in many.values()}) == 30


@pytest.mark.parametrize("name", ["a $x^2$ b", "_hidden", "50 % & <b>", "x\ny", "$", "\\frac{", "灯 ring"])
def test_names_are_drawn_as_they_are(name: str) -> None:
    """Neither mathematics, nor hidden legend entries, nor letters the font lacks may break a figure."""
    forecast = make_forecast()
    target = forecast.targets[0]
    renamed = replace(
        forecast,
        targets=(
            replace(
                target,
                target=name,
                bands=tuple(replace(b, feature=name, observable=name) for b in target.bands),
                measurable=tuple(replace(m, feature=name, setup=name) for m in target.measurable[:1]),
            ),
        ),
    )
    figure = figures.feature_figure(renamed, name, name, (), styles=figures.setup_styles((name,)))
    assert figures.figure_png(figure, dpi=40).startswith(PNG_START)
    assert any(name.split()[0] in text.replace("\\$", "$") for text in legend_texts(figure.axes[-1]))


def test_a_feature_figure_has_its_observables_and_the_chance_below() -> None:
    figure = figures.feature_figure(make_forecast(), "Heron", KNOT, make_plan().looks, styles=STYLES)
    assert [ax.get_ylabel().split("\n")[0] for ax in figure.axes] == ["separation", "flux", "chance"]


def test_svg_is_the_same_each_time_and_holds_no_date() -> None:
    def draw() -> bytes:
        return figures.figure_svg(figures.feature_figure(make_forecast(), "Reed", RING, styles=STYLES))

    first = draw()
    assert first == draw()
    assert b"<dc:date>" not in first
    assert b"<svg" in first


def test_a_season_of_one_night_can_be_drawn() -> None:
    forecast = make_forecast()
    target = forecast.targets[0]
    one = replace(
        forecast,
        nights=forecast.nights[:1],
        mjd=forecast.mjd[:1],
        targets=(
            replace(
                target,
                bands=tuple(replace(b, quantiles=b.quantiles[:, :1], exists=b.exists[:1]) for b in target.bands),
                measurable=tuple(replace(m, chance=m.chance[:1], span=None) for m in target.measurable),
            ),
        ),
    )
    figure = figures.feature_figure(one, "Reed", RING, (make_look(1, 0),), styles=STYLES)
    assert figures.figure_png(figure, dpi=40).startswith(PNG_START)


# Linear-light matrices for complete protanopia and deuteranopia, Machado, Oliveira & Fernandes 2009; from memory
# (each row sums to 1, so that white stays white, which the test checks).
BLINDNESS = {
    "normal": np.eye(3),
    "protanopia": np.array(
        [[0.152286, 1.052583, -0.204868], [0.114503, 0.786281, 0.099216], [-0.003882, -0.048116, 1.051998]]
    ),
    "deuteranopia": np.array(
        [[0.367322, 0.860646, -0.227968], [0.280085, 0.672501, 0.047413], [-0.011820, 0.042940, 0.968881]]
    ),
}


def lab(colour: str, seen: np.ndarray) -> np.ndarray:
    """CIELAB (D65) of an sRGB colour through a blindness matrix."""
    rgb = np.array([int(colour[i : i + 2], 16) for i in (1, 3, 5)]) / 255.0
    linear = np.where(rgb <= 0.04045, rgb / 12.92, ((rgb + 0.055) / 1.055) ** 2.4)
    linear = np.clip(seen @ linear, 0.0, 1.0)
    to_xyz = np.array([[0.4124, 0.3576, 0.1805], [0.2126, 0.7152, 0.0722], [0.0193, 0.1192, 0.9505]])  # IEC 61966-2-1
    t = to_xyz @ linear / np.array([0.9505, 1.0, 1.089])
    f = np.where(t > (6 / 29) ** 3, np.cbrt(t), t / (3 * (6 / 29) ** 2) + 4 / 29)
    return np.array([116 * f[1] - 16, 500 * (f[0] - f[1]), 200 * (f[1] - f[2])])


@pytest.mark.parametrize("kind", list(BLINDNESS))
def test_any_two_colours_of_the_palette_differ_for_colour_blind_eyes(kind: str) -> None:
    """A CIELAB distance of 15 is several times what eyes just notice (about 2.3); markers and dashes differ as well."""
    seen = BLINDNESS[kind]
    np.testing.assert_allclose(seen.sum(axis=1), 1.0, atol=1e-5)
    spots = [lab(colour, seen) for colour in figures.PALETTE]
    gaps = {(i, j): float(np.linalg.norm(spots[i] - spots[j])) for i in range(len(spots)) for j in range(i)}
    assert min(gaps.values()) > 15.0, gaps
