"""The page: self-contained, escaped, and saying what the records say."""

from __future__ import annotations

import base64
import re
from dataclasses import replace
from html.parser import HTMLParser
from pathlib import Path
from types import SimpleNamespace

import numpy as np
import pytest
from report_campaign import UNDERSTOOD, Assumed, make_campaign, ring_target
from report_records import make_forecast, make_goal, make_look, make_plan, make_windows

from planner.report import page

VOID = {"meta", "img", "br", "hr", "link", "input"}


class Reader(HTMLParser):
    """Tags, attributes and text of a page; fails on tags that are not closed in order."""

    def __init__(self) -> None:
        super().__init__()
        self.open: list[str] = []
        self.tags: list[tuple[str, dict[str, str | None]]] = []
        self.text: list[str] = []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.append((tag, dict(attrs)))
        if tag not in VOID:
            self.open.append(tag)

    def handle_endtag(self, tag: str) -> None:
        assert self.open.pop() == tag, f"</{tag}> closes another tag"

    def handle_data(self, data: str) -> None:
        if "style" not in self.open:
            self.text.append(data)


def read(html: str) -> Reader:
    reader = Reader()
    reader.feed(html)
    reader.close()
    assert reader.open == []
    return reader


@pytest.fixture(scope="module")
def html() -> str:
    return page.page_html(make_campaign(), make_forecast(), make_windows(), make_plan(), UNDERSTOOD)


def words_of(html: str) -> str:
    return " ".join("".join(read(html).text).replace("\u00a0", " ").split())


def test_the_page_needs_nothing_from_outside(html: str) -> None:
    """No script, and every address is a place on the page or data inside it."""
    reader = read(html)
    assert "script" not in {tag for tag, _ in reader.tags}
    addresses = [v for _, attrs in reader.tags for k, v in attrs.items() if k in ("src", "href", "action") and v]
    assert addresses
    assert all(a.startswith(("#", "data:image/svg+xml;base64,")) for a in addresses)
    assert not re.search(r"@import|url\(", html)


def test_every_link_leads_to_a_section(html: str) -> None:
    reader = read(html)
    ids = {attrs.get("id") for _, attrs in reader.tags}
    links = {v[1:] for tag, attrs in reader.tags if tag == "a" and (v := attrs.get("href"))}
    assert links
    assert links <= ids


def test_the_head_of_the_page_tells_goals_with_odds_and_the_shortfall(html: str) -> None:
    text = words_of(html)
    assert "8 looks reach 1 of 3 goals with the odds asked for." in text
    assert "87 ± 1 % odds, wanted 80 %: reached" in text
    assert "66 ± 2 % odds, wanted 80 %: not reached" in text
    assert "1.6 % below that bound" in text


def test_the_page_holds_reasons_assumptions_warnings_and_remarks(html: str) -> None:
    text = words_of(html)
    assert "never above 30 deg in the dark from north-hill" in text
    assert "thin filament, common practice; no source" in text
    assert "sheet is 0.31 of its depth thick" in text
    assert "nothing you can schedule reaches 6 %" in text
    assert "radii fix depth/distance² only" in text


def test_the_page_shows_every_standing_caution(html: str) -> None:
    text = words_of(html)
    assert "closer to the Sun than the setup's keep-out" in text
    assert "it does not operate a telescope" in text
    assert "the site's own rules and the staff on duty" in text
    assert "uncertain by 1-2 mag unless it is anchored" in text


def test_rings_that_are_not_anchored_are_named_in_the_cautions() -> None:
    loose = make_campaign(targets=(ring_target(anchored=False),))
    assert page.cautions(loose)[-1] == "Not anchored on a sighting, so good to 1-2 mag only: Reed ring."
    assert not any("Not anchored" in c for c in page.cautions(make_campaign()))


def test_what_is_invented_is_said_and_what_is_not_is_not() -> None:
    assert page.invented_parts(make_campaign()).startswith("This campaign is invented")
    part = make_campaign(invented=False)  # its target is still invented
    assert page.invented_parts(part) == "Invented, and describing nothing real: Reed."
    real = make_campaign(invented=False, targets=(ring_target().model_copy(update={"invented": False}),))
    assert page.invented_parts(real) == ""


def test_each_figure_is_a_drawing_with_words_for_those_who_cannot_see_it(html: str) -> None:
    images = [attrs for tag, attrs in read(html).tags if tag == "img"]
    assert len(images) == 2 + 2 + 1  # features, targets with windows, calendar
    for image in images:
        drawing = base64.b64decode((image["src"] or "").split(",", 1)[1])
        assert drawing.startswith(b"<?xml")
        head = drawing[drawing.index(b"<svg") : drawing.index(b">", drawing.index(b"<svg"))]
        assert b"viewBox" in head
        assert b" width=" not in head  # a fixed width would not follow the page
        assert len(image["alt"] or "") > 20


NASTY = "<script>alert(1)</script>, \"q\" & 'r'\n=1+1 <b>"


def nasty_page() -> str:
    forecast, windows, name = make_forecast(), make_windows(), NASTY
    target = forecast.targets[0]
    bad = replace(
        target,
        target=name,
        bands=tuple(replace(b, feature=name, observable=name, unit=name) for b in target.bands),
        measurable=tuple(replace(m, feature=name, setup=name, reason=name) for m in target.measurable[:1]),
        warnings=(name,),
    )
    ledger = replace(windows.ledger, targets=(name, "Heron"), setups=(name, *windows.setups[1:]))
    plan = make_plan(
        campaign=name,
        looks=(make_look(1, 5, target=name, setup=name, mode=name),),
        goals=(make_goal(target=name, feature=name, goal=name, remark=name, unit=name),),
        reasons={name: name},
        notes=(name,),
    )
    understood = SimpleNamespace(
        assumptions=(Assumed(name, name, name, name),),
        answers=((name, name, name),),
        ties=((name, name),),
        warnings=(name,),
    )
    return page.page_html(
        make_campaign(name, targets=(ring_target(name, name, anchored=False),)),
        replace(forecast, campaign=name, targets=(bad,)),
        replace(windows, targets=(name, "Heron"), setups=(name, *windows.setups[1:]), ledger=ledger),
        plan,
        understood,
    )


def test_names_with_markup_commas_newlines_and_signs_are_shown_as_text() -> None:
    """Every place that takes a name from a file is given one that would run as a script if it were not escaped."""
    html = nasty_page()
    reader = read(html)
    tags = [tag for tag, _ in reader.tags]
    assert "script" not in tags
    assert tags.count("b") == 1  # the one goal's card
    assert "<script" not in html
    assert words_of(html).count("<script>alert(1)</script>") >= 20


def test_a_plan_without_looks_goals_or_windows_still_makes_a_page() -> None:
    windows = make_windows()
    none = np.array([], dtype=np.int64)
    empty = replace(
        windows, targets=(), target=none, setup=none, night=none,
        **{f: np.array([]) for f in (
            "start_mjd", "end_mjd", "best_mjd", "airmass", "moon_separation_deg", "moon_altitude_deg",
            "moon_illumination", "sun_separation_deg", "sky_mag_arcsec2",
        )},
        sky_class=none,
        ledger=replace(
            windows.ledger, targets=(), lost_hours=np.zeros((0, 3, 4, len(windows.ledger.limits))),
            left_hours=np.zeros((0, 3, 4)),
        ),
    )  # fmt: skip
    plan = make_plan(looks=(), goals=(), value=0.0, best_possible=0.0, proof_value=0.0, reasons={}, accounts=())
    text = words_of(page.page_html(make_campaign(), make_forecast(), empty, plan))
    assert "0 looks planned; no goal is stated" in text
    assert "Nothing is left to gain" in text


def test_above_the_limit_features_with_looks_get_the_figures_and_the_rest_is_counted(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    monkeypatch.setattr(page, "MOST_FIGURES", 1)
    plan = make_plan(looks=(make_look(1, 5, target="Heron"),))
    assert page.figured_features(make_forecast(), plan) == ([("Heron", "Heron K1")], 1)


def test_the_page_is_written_whole(tmp_path: Path) -> None:
    stages: list[float] = []
    path = page.write_page(
        tmp_path / "page.html", make_campaign(), make_forecast(), make_windows(), make_plan(), UNDERSTOOD,
        progress=lambda stage, share: stages.append(share),
    )  # fmt: skip
    assert path.read_text(encoding="utf-8").rstrip().endswith("</html>")
    assert [p.name for p in tmp_path.iterdir()] == ["page.html"]
    assert stages == sorted(stages)
    assert stages[-1] == 1.0
