"""How fast, and in how much memory, a forecast of many features is made: bands and chances of all observables.

Run: python tests/benchmarks/forecast_size.py [--features 200] [--nights 183] [--draws 1024]
The targets are those of the shipped demo (invented) under other names, a third of them with other numbers, each with
its rings or knots; every setup that its programme has time on is forecast. Models are built and drawn beforehand:
that time is reported apart. Prints one JSON object.
"""

from __future__ import annotations

import argparse
import datetime as dt
import json
import resource
import time
from dataclasses import replace
from pathlib import Path

import numpy as np

from planner import flow
from planner.campaign.reading import read_campaign
from planner.campaign.records import Campaign, Target

DEMO = Path(__file__).resolve().parents[2] / "targets" / "demo"


def renamed(target: Target, number: int, rng: np.random.Generator) -> Target:
    """The same target under another name, its position moved a little."""
    position = target.position.model_copy(update={"ra_deg": (target.position.ra_deg + rng.uniform(-20, 20)) % 360.0})
    return target.model_copy(update={"target": f"{target.name} {number}", "position": position})


def many(campaign: Campaign, features: int, nights: int) -> Campaign:
    """A campaign of at least this many features over this many nights."""
    rng = np.random.default_rng(1)
    targets: list[Target] = []
    while sum(len(t.features) for t in targets) < features:
        base = campaign.targets[len(targets) % len(campaign.targets)]
        targets.append(renamed(base, len(targets), rng))
    season = campaign.file.season
    last = season.first + dt.timedelta(days=nights - 1)
    file = campaign.file.model_copy(update={"season": season.model_copy(update={"last": last})})
    return replace(campaign, file=file, targets=tuple(targets))


def main() -> None:
    """Prepare, forecast, and print seconds and peak memory."""
    parser = argparse.ArgumentParser()
    parser.add_argument("--features", type=int, default=200)
    parser.add_argument("--nights", type=int, default=183)
    parser.add_argument("--draws", type=int, default=1024)
    given = parser.parse_args()
    flow.FORECAST_DRAWS = given.draws
    campaign = many(read_campaign(DEMO), given.features, given.nights)
    begin = time.perf_counter()
    ready = flow.prepare(campaign)
    prepared = time.perf_counter()
    made = flow._forecast(campaign, ready, lambda stage, share: None)
    done, cpu = time.perf_counter(), time.process_time()
    bands = [band for one in made.targets for band in one.bands]
    kinds = [f.kind for model in ready.models.values() for f in model.features]
    print(
        json.dumps(
            {
                "features": len(kinds),
                "kinds": {kind: kinds.count(kind) for kind in sorted(set(kinds))},
                "nights": len(made.nights),
                "draws": given.draws,
                "bands": len(bands),
                "chances": sum(len(one.measurable) for one in made.targets),
                "forecast_s": round(done - prepared, 2),
                "prepare_s": round(prepared - begin, 2),
                "processor_s": round(cpu, 2),
                "peak_gb": round(resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024**2, 3),
                "finite_share_of_bands": round(float(np.mean([np.isfinite(b.quantiles).mean() for b in bands])), 4),
            },
            indent=1,
        )
    )


if __name__ == "__main__":
    main()
