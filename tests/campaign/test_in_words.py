"""What was understood, said back to the user."""

from __future__ import annotations

from planner.campaign.in_words import facts_of
from planner.campaign.records import Campaign


def test_every_value_that_was_written_is_said_and_no_default(demo_campaign: Campaign) -> None:
    facts = {(target, feature): text for target, feature, text in facts_of(demo_campaign)}
    assert len(facts) == 4 + 6  # targets and features
    ring = facts[("Sallow", "Sallow outer ring")]
    assert "dust.depth_pc 24 ± 25 % (lognormal)" in ring
    assert "brightness.seen.on 2026-11-10" in ring
    assert "goals: depth_over_distance2 to 1 %; distance_pc to 5 %" in ring
    assert "drift" not in ring  # a default: listed under what is assumed
    assert "brightness.seen.pa_deg 200 to 330" in facts[("Sallow", "Sallow inner arc")]
    assert "4 usable epochs" in facts[("Brindle", "Brindle ring")]


def test_a_target_says_its_place_programme_and_weight(demo_campaign: Campaign) -> None:
    text = next(text for target, feature, text in facts_of(demo_campaign) if (target, feature) == ("Sallow", ""))
    # 08:14:22.10 is 15 x (8 + 14/60 + 22.10/3600) = 123.592083 deg; -12:31:08 is -12.518889 deg
    assert text.startswith("ICRS 123.59208 -12.51889 deg; programme echoes, weight 3; ")
    assert "distance_pc 6100 ± 12 % (lognormal)" in text
