"""A target with every kind of jet goes the whole way: folder, forecast, check, plan, recount, odds."""

from __future__ import annotations

import shutil
from pathlib import Path

import pytest

from planner import flow
from planner.records import Outcome

CAMPAIGN = """\
campaign: Every kind of jet, invented
invented: true
season: {from: 2027-02-01, to: 2027-03-20}
seed: 3
programmes:
  - {name: knots, targets: [fern.yaml]}
allocations:
  - {setup: cairn-array/43ghz, programme: knots, hours: 24}
  - {setup: cairn-array/22ghz, programme: knots, hours: 6}
"""
FERN = """\
target: Fern
invented: true
position: {ra: "11:27:33.4", dec: "+24:08:51"}
distance_pc: {lognormal: {median: 5000, sigma_fraction: 0.1}}
scatter_mas: {at_ghz: 8.4, mas: 0.3}
spacing: {at_least_days: 4}
features:
  - knot: Fern nozzle 1
    motion:
      ejection: {date: 2027-01-02, sigma_days: 2}
      nozzle:
        period_days: {lognormal: {median: 162, sigma_fraction: 0.01}}
        half_angle_deg: 20
        inclination_deg: 79
        axis_pa_deg: {normal: {mean: 98, sigma: 2}}
        phase_deg: {normal: {mean: 40, sigma: 10}}
        phase_on: 2026-12-01
        beta: {normal: {mean: 0.26, sigma: 0.02}}
    flux: {rest_mjy: 300, on: 2027-01-04, ghz: 43, fades: {power_law: {index: 0.5, with: age}}}
    grows: 0
    goals: [{learn: beta, to: 3 %}, {learn: ejection, to: 1 d}]
  - knot: Fern nozzle 2
    motion: {nozzle: Fern nozzle 1, ejection: {date: 2027-01-20, sigma_days: 2}}
    flux: {mjy: 300, on: 2027-01-24, ghz: 43, fades: {exponential_days: 60}}
    grows: 0
    goals: [{learn: pa_deg, to: 1 deg}]
  - knot: Fern counter
    motion: {side: receding, of: Fern nozzle 1}
    flux: {mjy: 100, on: 2027-01-04, ghz: 43, fades: {exponential_days: 60}}
    grows: 0
  - knot: Fern far
    motion:
      passes: {on: 2027-01-10, east_mas: {normal: {mean: -900, sigma: 2}}, north_mas: {normal: {mean: 300, sigma: 2}}}
      speed_mas_yr: {lognormal: {median: 1500, sigma_fraction: 0.2}}
      pa_deg: {normal: {mean: 20, sigma: 5}}
    flux: {mjy: 90, on: 2027-01-10, ghz: 43, fades: {exponential_days: 400}}
    grows: 0
    goals: [{learn: speed_mas_yr, to: 10 %}]
  - knot: Fern bar
    motion: {stationary: {separation_mas: {lognormal: {median: 3, sigma_fraction: 0.1}}, pa_deg: 98}}
    flux: {mjy: 200, on: 2027-01-10, ghz: 43, fades: {exponential_days: 4000}}
    goals: [{learn: separation_mas, to: 2 %}]
  - pair: Fern jets
    motion:
      ejection: {date: 2027-01-10, sigma_days: 1}
      approaching_mas_d: {lognormal: {median: 18, sigma_fraction: 0.1}}
      receding_mas_d: {lognormal: {median: 9.5, sigma_fraction: 0.1}}
      pa_deg: 300
    flux: {mjy: 200, on: 2027-01-12, ghz: 43, fades: {adiabatic: {electron_index: 1.2}}}
    goals: [{learn: beta_cos, to: 0.01}]
"""


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory, demo_folder: Path) -> Path:
    where = tmp_path_factory.mktemp("jets")
    (where / "campaign.yaml").write_text(CAMPAIGN)
    (where / "fern.yaml").write_text(FERN)
    (where / "sites").mkdir()
    shutil.copy(demo_folder.parent.parent / "site_profiles" / "cairn-array.yaml", where / "sites")
    return where


def test_every_kind_of_jet_is_planned_and_recounted(folder: Path) -> None:
    campaign = flow.read_campaign(folder)
    results = flow.work(campaign, seconds=60)
    one = results.forecast.target("Fern")
    assert {b.feature for b in one.bands} == {f.name for f in campaign.target("Fern").features}
    assert {d.feature for d in one.derived} == {f.name for f in campaign.target("Fern").features}
    assert results.plan.outcome in (Outcome.PROVEN, Outcome.GOOD)
    assert results.plan.looks  # a plan that failed its recount would have raised
    expected = sum(len(f.goals) for f in campaign.target("Fern").features)
    assert len(results.plan.goals) == expected
    reached = [g.goal for g in results.plan.goals if g.expected < 0.5 * g.prior]
    assert len(reached) >= 4  # looks teach most of these goals
    told = [text for _, feature, text in results.understanding.answers if feature == "Fern far"]
    assert any("the least useful spacing" in text for text in told)
    assert not any(f == "Fern bar" and "spacing of epochs" in text for _, f, text in results.understanding.answers)
