"""The figures as PNG files in a folder."""

from __future__ import annotations

from pathlib import Path

from planner.records import Forecast, Look, Plan, Progress, Windows, silent
from planner.report import figures, series
from planner.report.files import write_whole
from planner.report.words import feature_name, slug


def write_figures(
    folder: str | Path,
    forecast: Forecast | None = None,
    windows: Windows | None = None,
    plan: Plan | None = None,
    *,
    progress: Progress = silent,
) -> tuple[Path, ...]:
    """Write one PNG a feature, one a target with windows, and a calendar of looks; return the paths.

    The folder is made if it is missing. Raises OSError where it cannot be written.
    """
    folder = Path(folder)
    folder.mkdir(parents=True, exist_ok=True)
    looks: tuple[Look, ...] = plan.looks if plan else ()
    names = {*series.setups_in(forecast, windows), *(k.slot.setup for k in looks)}
    styles = figures.setup_styles(tuple(sorted(names)))
    jobs: dict[str, tuple[str, str, str]] = {}
    for target, feature in series.features_of(forecast) if forecast else ():
        jobs[slug("forecast " + feature_name(target, feature), jobs)] = ("forecast", target, feature)
    for target in windows.targets if windows else ():
        jobs[slug("windows " + target, jobs)] = ("windows", target, "")
    moon = series.moon_by_night(windows.nights) if windows else None
    paths = []
    for i, (stem, (kind, target, feature)) in enumerate(jobs.items()):
        progress("figures", i / len(jobs))
        if kind == "forecast" and forecast:
            figure = figures.feature_figure(forecast, target, feature, looks, styles=styles)
        elif windows:
            shown = moon if series.moon_matters(windows, target) else None
            figure = figures.windows_figure(windows, target, styles=styles, moon=shown)
        paths.append(write_whole(folder / f"{stem}.png", figures.figure_png(figure)))
    nights = forecast.nights if forecast else windows.nights if windows else ()
    if plan and nights:
        figure = figures.calendar_figure(looks, nights, styles=styles)
        paths.append(write_whole(folder / "calendar.png", figures.figure_png(figure)))
    progress("figures", 1.0)
    return tuple(paths)
