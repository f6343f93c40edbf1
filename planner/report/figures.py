"""Figures: each function takes an axis and records, draws, and returns the axis. Nothing is computed here."""

from __future__ import annotations

import io
import textwrap
import warnings
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Any

from planner.records import Band, Floats, Forecast, Look, Measurable, Windows
from planner.report import series
from planner.report.words import feature_name, plain

# Our own palette: neighbours differ in lightness as well as hue, so that it survives colour blindness and grey
# print (tests/report compares every pair as seen with protanopia and deuteranopia).
PALETTE = ("#1b4f9c", "#e08214", "#1fa187", "#8a0f4a", "#7fb2e5", "#6b5b00")
MARKERS = ("o", "s", "D", "^", "v", "P")
DASHES = ("-", "--", "-.", ":", (0, (5, 1, 1, 1, 1, 1)), (0, (1, 1)))
LABEL_CHARACTERS = 18  # of an axis label on one line: what fits beside the smallest panel
INK, FAINT, GRID = "#1d2733", "#5c6875", "#dde2e8"
BAND_DARK, BAND_LIGHT, LIKELY_GREEN = "#8fa3bd", "#ccd6e3", "#e6f2ea"


@dataclass(frozen=True, slots=True)
class Style:
    """How one setup looks in every figure."""

    colour: str
    marker: str
    dash: Any


def setup_styles(setups: Sequence[str]) -> dict[str, Style]:
    """Give each setup a colour, a marker and a dash; above six the combinations differ."""
    n = len(PALETTE)
    return {
        name: Style(PALETTE[i % n], MARKERS[(i + i // n) % n], DASHES[(i + i // n) % n])
        for i, name in enumerate(setups)
    }


def label(text: str) -> str:
    """Return a name as matplotlib prints it literally: no mathematics, no hidden legend entry."""
    text = plain(text).replace("$", r"\$")
    return " " + text if text.startswith("_") else text


def _dates(ax: Any, days: Floats) -> None:
    """A readable date axis over the nights of the season; the year stands below it."""
    from matplotlib import dates

    locator = dates.AutoDateLocator(minticks=3, maxticks=8)
    ax.xaxis.set_major_locator(locator)
    ax.xaxis.set_major_formatter(dates.ConciseDateFormatter(locator, show_offset=False))
    if len(days):
        pad = max(1.0, 0.01 * float(days[-1] - days[0]))
        ax.set_xlim(float(days[0]) - pad, float(days[-1]) + pad)
        years = dict.fromkeys(dates.num2date(day).year for day in (days[0], days[-1]))
        ax.set_xlabel(f"{' to '.join(map(str, years))} (UTC)", color=INK, fontsize=9.5)


def _frame(ax: Any) -> None:
    ax.grid(True, color=GRID, linewidth=0.6)
    ax.set_axisbelow(True)
    ax.tick_params(colors=FAINT, labelcolor=INK, labelsize=9)
    for side in ("top", "right"):
        ax.spines[side].set_visible(False)
    for side in ("left", "bottom"):
        ax.spines[side].set_color(FAINT)


def _legend(ax: Any, entries: list[tuple[Any, str]]) -> None:
    """A legend to the right of the axis, where it hides no data."""
    if entries:
        handles, names = zip(*entries, strict=True)
        ax.legend(
            handles, names, loc="upper left", bbox_to_anchor=(1.01, 1.02), frameon=False, fontsize=8.5,
            labelcolor=INK, handlelength=2.2, borderaxespad=0.0, labelspacing=0.55,
        )  # fmt: skip


def _say(ax: Any, text: str) -> None:
    ax.text(0.5, 0.5, text, transform=ax.transAxes, ha="center", va="center", color=FAINT, fontsize=10)


def axis_words(band: Band) -> str:
    """Name of an observable on short lines, its unit below, e.g. ``radius`` above ``[arcsec]``."""
    name = "\n".join(textwrap.wrap(label(band.observable), LABEL_CHARACTERS))
    return name + (f"\n[{label(band.unit)}]" if band.unit else "")


def draw_band(
    ax: Any,
    forecast: Forecast,
    band: Band,
    measurable: Sequence[Measurable] = (),
    looks: Iterable[Look] = (),
    *,
    styles: dict[str, Style] | None = None,
    legend: bool = True,
) -> Any:
    """Draw one observable against date: median, 16-84 and 5-95 % bands, where it can be measured, the looks.

    The nights on which a setup can measure it with a chance of one half or more are shaded; what lies outside a
    setup's ``span`` (glare, part of a beam) is hatched; a hollow marker is a look that will likely not measure it.
    """
    days = series.figure_days(forecast.mjd)
    styles = styles or setup_styles(sorted({m.setup for m in measurable} | {k.slot.setup for k in looks}))
    entries: list[tuple[Any, str]] = []
    _frame(ax)
    entries += _draw_quantiles(ax, days, band)
    limits = ax.get_ylim()
    likely = series.likely_nights(measurable, len(days))
    if likely.any():
        shade = ax.fill_between(
            days, 0, 1, where=likely, step="mid", transform=ax.get_xaxis_transform(),
            color=LIKELY_GREEN, linewidth=0, zorder=0,
        )  # fmt: skip
        entries.append((shade, "likely measurable"))
    entries += _draw_spans(ax, days, measurable, styles, limits)
    entries += _draw_looks(ax, forecast, band, tuple(looks), measurable, styles)
    ax.set_ylabel(axis_words(band), color=INK, fontsize=9.5)
    _dates(ax, days)
    if "mag" in band.unit.split("/")[0].split():
        ax.invert_yaxis()
    if legend:
        _legend(ax, entries)
    return ax


def _draw_quantiles(ax: Any, days: Floats, band: Band) -> list[tuple[Any, str]]:
    q = band.quantiles
    if not (q[2] == q[2]).any():
        _say(ax, "does not exist in this season")
        return []
    wide = ax.fill_between(days, q[0], q[4], color=BAND_LIGHT, linewidth=0, zorder=1)
    narrow = ax.fill_between(days, q[1], q[3], color=BAND_DARK, linewidth=0, zorder=2)
    marker = "o" if len(days) < 3 else None
    (line,) = ax.plot(days, q[2], color=INK, linewidth=1.6, marker=marker, zorder=3)
    return [(line, "median"), (narrow, "16 to 84 %"), (wide, "5 to 95 %")]


def _draw_spans(
    ax: Any, days: Floats, measurable: Sequence[Measurable], styles: dict[str, Style], limits: tuple[float, float]
) -> list[tuple[Any, str]]:
    """Hatch what a setup could not measure, without stretching the axis to it."""
    entries = []
    bottom, top = limits
    for m in measurable:
        if m.span is None or m.setup not in styles:
            continue
        style = styles[m.setup]
        for edge, beyond, inside in ((m.span[0], bottom, m.span[0] > bottom), (m.span[1], top, m.span[1] < top)):
            if not inside.any():
                continue
            zone = ax.fill_between(
                days, beyond, edge, where=inside, facecolor="none", edgecolor=style.colour,
                hatch="////", linewidth=0, alpha=0.35, zorder=1.5,
            )  # fmt: skip
            ax.plot(days, edge, color=style.colour, linewidth=1.0, linestyle=style.dash, zorder=2.5)
            entries.append((zone, f"out of reach of\n{label(m.setup)}"))
    ax.set_ylim(bottom, top)
    return list({text: (handle, text) for handle, text in entries}.values())


def _draw_looks(
    ax: Any,
    forecast: Forecast,
    band: Band,
    looks: tuple[Look, ...],
    measurable: Sequence[Measurable],
    styles: dict[str, Style],
) -> list[tuple[Any, str]]:
    entries: dict[str, tuple[Any, str]] = {}
    for look, value, likely in series.looks_on_band(forecast, band, looks, measurable):
        style = styles[look.slot.setup]
        (mark,) = ax.plot(
            [series.figure_days(look.start_mjd)], [value], linestyle="none", marker=style.marker, markersize=7,
            markeredgecolor=style.colour, markeredgewidth=1.5, zorder=4, clip_on=False,
            markerfacecolor=style.colour if likely else "white",
        )  # fmt: skip
        text = f"look, {label(look.slot.setup)}" + ("" if likely else "\n(unlikely to measure it)")
        entries.setdefault(text, (mark, text))
    return list(entries.values())


def draw_chance(
    ax: Any,
    forecast: Forecast,
    measurable: Sequence[Measurable],
    *,
    styles: dict[str, Style] | None = None,
    legend: bool = True,
) -> Any:
    """Draw the chance that one feature is measurable, one line a setup, weather left out."""
    days = series.figure_days(forecast.mjd)
    styles = styles or setup_styles(sorted(m.setup for m in measurable))
    _frame(ax)
    entries = []
    for m in measurable:
        style = styles[m.setup]
        (line,) = ax.plot(days, m.chance, color=style.colour, linestyle=style.dash, linewidth=1.6, clip_on=False)
        entries.append((line, label(m.setup)))
    ax.set_ylim(-0.04, 1.04)
    ax.set_yticks((0, 0.5, 1), ("0", "50", "100 %"))
    ax.set_ylabel("chance\nmeasurable", color=INK, fontsize=9.5)
    _dates(ax, days)
    if legend:
        _legend(ax, entries)
    return ax


def draw_windows(
    ax: Any,
    windows: Windows,
    target: str,
    *,
    moon: Floats | None = None,
    styles: dict[str, Style] | None = None,
    legend: bool = True,
) -> Any:
    """Draw the hours a night in which a target can be observed, one line a setup.

    ``moon``: (T,) illuminated fraction, drawn faintly behind (full Moon reaches the top of the axis).
    """
    days = series.night_days(windows.nights)
    styles = styles or setup_styles(sorted(windows.setups))
    _frame(ax)
    entries = []
    if moon is not None:
        shade = ax.fill_between(
            days, 0, moon, transform=ax.get_xaxis_transform(), color="#f1ebd3", linewidth=0, zorder=0
        )
        entries.append((shade, "Moon, share lit"))
    table = series.night_hours(windows, target)
    for name, row in zip(windows.setups, table, strict=True):
        if not series.was_considered(windows, target, name):
            continue
        style = styles[name]
        marker = style.marker if len(days) < 3 else None
        (line,) = ax.plot(
            days, row if row.any() else row * float("nan"), color=style.colour, linestyle=style.dash, linewidth=1.6,
            marker=marker, drawstyle="steps-mid",
        )  # fmt: skip
        entries.append((line, label(name) + ("" if row.any() else " (no window)")))
    ax.set_ylim(0, max(1.0, 1.08 * float(table.max(initial=0.0))))
    ax.set_ylabel("hours a night", color=INK, fontsize=9.5)
    ax.set_title(label(target), loc="left", fontsize=11, color=INK, fontweight="bold")
    _dates(ax, days)
    if legend:
        _legend(ax, entries)
    return ax


def draw_calendar(
    ax: Any, looks: Sequence[Look], nights: Sequence[str], *, styles: dict[str, Style] | None = None
) -> Any:
    """Draw every look on a line a telescope, against date; the colour and marker tell the setup."""
    telescopes = sorted({k.slot.telescope for k in looks})
    styles = styles or setup_styles(sorted({k.slot.setup for k in looks}))
    _frame(ax)
    entries: dict[str, tuple[Any, str]] = {}
    for row, name in enumerate(telescopes):
        ax.axhline(row, color=GRID, linewidth=5, zorder=0, solid_capstyle="butt")
        for look in (k for k in looks if k.slot.telescope == name):
            style = styles[look.slot.setup]
            (mark,) = ax.plot(
                [series.figure_days(look.start_mjd)], [row], linestyle="none", marker=style.marker, markersize=7,
                markerfacecolor=style.colour, markeredgecolor="white", markeredgewidth=0.8, zorder=3,
            )  # fmt: skip
            entries.setdefault(look.slot.setup, (mark, label(look.slot.setup)))
    if not telescopes:
        _say(ax, "no look is planned")
    ax.grid(False, axis="y")
    ax.set_yticks(range(len(telescopes)), [label(name) for name in telescopes])
    ax.set_ylim(max(len(telescopes), 1) - 0.4, -0.6)
    _dates(ax, series.night_days(nights))
    _legend(ax, list(entries.values()))
    return ax


# ------------------------------------------------------------------ whole figures

MAIN_IN, SIDE_IN, CHANCE_IN = 2.9, 1.5, 1.0  # heights of the panels, inch
WIDTH_IN = 9.0
MOST_BANDS = 4  # observables drawn for one feature; the table lists all
IN_TABLES_ONLY = ("whole-ring brightness", "separation time")  # follow the others; a panel each would crowd them


def _new_figure(height_in: float) -> Any:
    """A figure outside pyplot's global state, so that nothing has to be closed."""
    from matplotlib.figure import Figure

    return Figure(figsize=(WIDTH_IN, height_in), layout="constrained", facecolor="white")


def feature_figure(
    forecast: Forecast, target: str, feature: str, looks: Iterable[Look] = (), *, styles: dict[str, Style]
) -> Any:
    """Figure of one feature: its observables above one another, and the chance of being measurable below."""
    every = series.bands_of(forecast, target, feature)
    bands = [band for band in every if band.observable not in IN_TABLES_ONLY][:MOST_BANDS] or every[:1]
    measurable = series.measurable_of(forecast, target, feature)
    mine = tuple(k for k in looks if k.slot.target == target)
    heights = [MAIN_IN, *([SIDE_IN] * (len(bands) - 1)), *([CHANCE_IN] if measurable else [])]
    figure = _new_figure(sum(heights) + 0.6)
    axes = figure.subplots(len(heights), 1, sharex=True, squeeze=False, height_ratios=heights)[:, 0]
    for i, (ax, band) in enumerate(zip(axes, bands, strict=False)):
        spans = measurable if i == 0 else [_without_span(m) for m in measurable]
        draw_band(ax, forecast, band, spans, mine, styles=styles, legend=i == 0)
    if measurable:
        draw_chance(axes[-1], forecast, measurable, styles=styles)
    for ax in axes:
        ax.label_outer()
    figure.align_ylabels(axes)
    axes[0].set_title(label(feature_name(target, feature)), loc="left", fontsize=11, color=INK, fontweight="bold")
    return figure


def _without_span(m: Measurable) -> Measurable:
    """The span belongs to the main observable only."""
    from dataclasses import replace

    return replace(m, span=None)


def windows_figure(windows: Windows, target: str, *, styles: dict[str, Style], moon: Floats | None = None) -> Any:
    """Figure of the hours a night of one target."""
    figure = _new_figure(2.6)
    draw_windows(figure.subplots(), windows, target, moon=moon, styles=styles)
    return figure


def calendar_figure(looks: Sequence[Look], nights: Sequence[str], *, styles: dict[str, Style]) -> Any:
    """Figure of all looks, a line a telescope."""
    count = len({k.slot.telescope for k in looks})
    figure = _new_figure(1.1 + 0.45 * max(count, 1))
    draw_calendar(figure.subplots(), looks, nights, styles=styles)
    return figure


def figure_png(figure: Any, dpi: int = 150) -> bytes:
    """Return a figure as PNG."""
    return _saved(figure, "png", dpi=dpi)


def figure_svg(figure: Any) -> bytes:
    """Return a figure as SVG with letters as shapes (it looks the same everywhere) and no date inside."""
    import matplotlib

    with matplotlib.rc_context({"svg.fonttype": "path", "svg.hashsalt": "lightlag"}):
        return _saved(figure, "svg", metadata={"Date": None, "Creator": "lightlag"})


def _saved(figure: Any, form: str, **more: Any) -> bytes:
    out = io.BytesIO()
    with warnings.catch_warnings():
        # A name may hold letters that the figure's font lacks; they show as boxes, and the page has the name.
        warnings.filterwarnings("ignore", message=r"Glyph \d+ .* missing from", category=UserWarning)
        figure.savefig(out, format=form, **more)
    return out.getvalue()
