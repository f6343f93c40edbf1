"""From the records of a target's jets to their models: one coordinate for each number that is not known."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np

from planner.campaign.laws import Fixed, Law
from planner.campaign.records import (
    CounterMotion,
    Intrinsic,
    IntrinsicMotion,
    Knot,
    KnotMotion,
    LinearMotion,
    Nozzle,
    NozzleMotion,
    Pair,
    StationaryMotion,
    Target,
)
from planner.errors import InputError
from planner.physics import jet
from planner.prediction.coordinates import JointPrior, Layout, Number, standard
from planner.prediction.core import Core, Wander, build_core, build_wander
from planner.prediction.knots import JetModel, KnotModel, PairModel, opposite
from planner.prediction.light import Light, build_ln_flux
from planner.prediction.paths import ApparentPath, IntrinsicPath, LinearPath, NozzlePath, Path, StationaryPath
from planner.prediction.scale import Scale, build_scale
from planner.records import Floats
from planner.units import mjd_of_date

_FILE = "the target's file"
ZERO = Number(None, False, 0.0)


@dataclass
class JetBuilder:
    """Adds the coordinates of a target's jets to its layout, in the order of the file."""

    target: Target
    layout: Layout
    core: Core
    scale: Scale
    first_mjd: float
    last_mjd: float
    paths: dict[str, Path] = field(default_factory=dict)

    @property
    def middle_mjd(self) -> float:
        """Middle of the season, where speeds are stated."""
        return 0.5 * (self.first_mjd + self.last_mjd)

    def build(self, jets: Sequence[Knot | Pair]) -> list[JetModel]:
        """Return a model for each jet; those that lean on another one are built after it."""
        found: dict[str, JetModel] = {}
        for record in sorted(jets, key=_leans):
            found[record.name] = self._pair(record) if isinstance(record, Pair) else self._knot(record)
        return [found[record.name] for record in jets]

    # -------------------------------------------------------------- knots

    def _knot(self, record: Knot) -> KnotModel:
        path = self.paths[record.name] = self._path(record)
        model = KnotModel(record, self.target, path, None, self.core, stated_ghz(record, self.target))  # type: ignore[arg-type]
        light = Light(
            record.flux, build_ln_flux(self.layout, record.name, record.flux.sigma_fraction), path.start_mjd,
            lambda theta, mjd: np.hypot(*np.moveaxis(path.offset_mas(theta, mjd), -1, 0)),
            model.doppler if record.flux.rest_mjy is not None else None,
        )  # fmt: skip
        return KnotModel(record, self.target, path, light, self.core, model.stated_ghz)

    def _path(self, record: Knot) -> Path:
        motion, name = record.motion, record.name
        if isinstance(motion, CounterMotion):
            of = self.paths[motion.of]
            assert isinstance(of, IntrinsicPath | NozzlePath)
            return opposite(of)
        if isinstance(motion, NozzleMotion):
            return self._nozzle(name, motion)
        if isinstance(motion, StationaryMotion):
            return self._stationary(name, motion)
        if isinstance(motion, LinearMotion):
            return self._linear(name, motion)
        if isinstance(motion, IntrinsicMotion):
            return self._intrinsic(name, motion)
        self._refuse_impossible(record, motion)
        return self._apparent(name, motion)

    def _apparent(self, name: str, motion: KnotMotion) -> ApparentPath:
        velocity = self._velocity(name, motion.speed_mas_yr, motion.pa_deg)
        along, across = self._acceleration(name, motion.acceleration_fraction_yr)
        return ApparentPath(
            date_mjd=mjd_of_date(motion.core_crossing.date) + 0.5,
            t0=self._clock(f"{name}/core_crossing", motion.core_crossing.sigma_days),
            velocity=velocity, along=along, across=across, reference_mjd=self.middle_mjd,
            home_pa_deg=motion.pa_deg.median(),
        )  # fmt: skip

    def _linear(self, name: str, motion: LinearMotion) -> LinearPath:
        east = self.layout.add_law(f"{name}/east_mas", "mas", motion.passes.east_mas)
        north = self.layout.add_law(f"{name}/north_mas", "mas", motion.passes.north_mas)
        velocity = self._velocity(name, motion.speed_mas_yr, motion.pa_deg)
        along, across = self._acceleration(name, motion.acceleration_fraction_yr)
        return LinearPath(
            mjd_of_date(motion.passes.on) + 0.5, east, north, velocity, along, across, motion.pa_deg.median()
        )

    def _intrinsic(self, name: str, motion: IntrinsicMotion) -> IntrinsicPath:
        rapidity = self._rapidity(name, motion.intrinsic)
        angle = self.layout.add_law(f"{name}/angle_deg", "deg", motion.intrinsic.angle_deg)
        pa = self.layout.add_law(f"{name}/pa_deg", "deg", motion.pa_deg)
        along, across = self._acceleration(name, motion.acceleration_fraction_yr)
        return IntrinsicPath(
            date_mjd=mjd_of_date(motion.core_crossing.date) + 0.5,
            t0=self._clock(f"{name}/core_crossing", motion.core_crossing.sigma_days),
            rapidity=rapidity, angle=angle, pa=pa, along=along, across=across, scale=self.scale,
            reference_mjd=self.middle_mjd, home_pa_deg=motion.pa_deg.median(),
        )  # fmt: skip

    def _nozzle(self, name: str, motion: NozzleMotion) -> NozzlePath:
        date = mjd_of_date(motion.ejection.date) + 0.5
        t0 = self._clock(f"{name}/ejection", motion.ejection.sigma_days)
        if isinstance(motion.nozzle, str):
            shared = self.paths[motion.nozzle]
            assert isinstance(shared, NozzlePath)
            fields = {f: getattr(shared, f) for f in shared.__dataclass_fields__}
            return NozzlePath(**{**fields, "date_mjd": date, "t0": t0})
        n: Nozzle = motion.nozzle
        add = self.layout.add_law
        return NozzlePath(
            date_mjd=date, t0=t0,
            period=add(f"{name}/period_days", "d", n.period_days),
            half_angle=add(f"{name}/half_angle_deg", "deg", n.half_angle_deg),
            inclination=add(f"{name}/inclination_deg", "deg", n.inclination_deg),
            axis_pa=add(f"{name}/axis_pa_deg", "deg", n.axis_pa_deg),
            phase=add(f"{name}/phase_deg", "deg", n.phase_deg),
            phase_mjd=mjd_of_date(n.phase_on) + 0.5, sense=n.sense,
            rapidity=self._rapidity(name, n), scale=self.scale, home_pa_deg=n.axis_pa_deg.median(),
        )  # fmt: skip

    def _stationary(self, name: str, motion: StationaryMotion) -> StationaryPath:
        mean = motion.stationary
        separation = self.layout.add_law(f"{name}/separation_mas", "mas", mean.separation_mas)
        pa = self.layout.add_law(f"{name}/pa_deg", "deg", mean.pa_deg)
        why = "a standing feature scatters about its mean"
        jitter = build_wander(
            self.layout, mean.jitter_mas, self.first_mjd, self.last_mjd, name=f"{name}/jitter", unit="mas", why=why
        )
        return StationaryPath(separation, pa, jitter, mean.pa_deg.median())

    # -------------------------------------------------------------- pairs

    def _pair(self, record: Pair) -> PairModel:
        motion, name, add = record.motion, record.name, self.layout.add_law
        along, across = self._acceleration(name, motion.acceleration_fraction_yr)
        t0 = self._clock(f"{name}/ejection", motion.ejection.sigma_days)
        date = mjd_of_date(motion.ejection.date) + 0.5
        approaching = add(f"{name}/approaching_mas_d", "mas/d", motion.approaching_mas_d)
        light = Light(
            record.flux, build_ln_flux(self.layout, name, record.flux.sigma_fraction),
            lambda theta: date + t0.value(theta),
            lambda theta, mjd: approaching.value(theta) * np.maximum(mjd - date - t0.value(theta), 1e-3), None,
        )  # fmt: skip
        return PairModel(
            record=record, target=self.target, t0=t0, approaching=approaching,
            receding=add(f"{name}/receding_mas_d", "mas/d", motion.receding_mas_d),
            pa=add(f"{name}/pa_deg", "deg", motion.pa_deg),
            along=along, across=across, light=light, core=self.core, stated_ghz=record.flux.ghz,
        )  # fmt: skip

    # -------------------------------------------------------------- shared pieces

    def _velocity(self, name: str, speed: Law, pa_deg: Law) -> tuple[int, int]:
        names = (f"{name}/speed_east", f"{name}/speed_north")
        laws = (speed, pa_deg)
        east, north = self.layout.add(
            JointPrior(names, ("mas/yr", "mas/yr"), laws, _components, nuisance=False, why=_FILE)
        )
        return east, north

    def _rapidity(self, name: str, given: Intrinsic | Nozzle) -> Number:
        lorentz = getattr(given, "lorentz_factor", None)
        law, turn = (given.beta, np.arctanh) if lorentz is None else (lorentz, np.arccosh)
        assert law is not None
        if isinstance(law, Fixed):
            return Number(None, False, float(turn(law.value)))
        word = "beta" if lorentz is None else "lorentz_factor"
        block = JointPrior((f"{name}/rapidity",), ("",), (law,), turn, nuisance=False, why=f"{word} in {_FILE}")
        return Number(self.layout.add(block)[0], False, float("nan"))

    def _clock(self, name: str, sigma_days: float) -> Number:
        if sigma_days <= 0:
            return ZERO
        return Number(self.layout.add(standard(name, "d", sigma_days, why=_FILE, nuisance=False))[0], False, 0.0)

    def _acceleration(self, name: str, sigma: float) -> tuple[Number, Number]:
        if sigma <= 0:
            return ZERO, ZERO
        why = "most well-sampled features accelerate or turn"
        along, across = (
            Number(self.layout.add(standard(f"{name}/acceleration {axis}", "1/yr", sigma, why=why))[0], False, 0.0)
            for axis in ("along", "across")
        )
        return along, across

    def _refuse_impossible(self, record: Knot, motion: KnotMotion) -> None:
        """Refuse a stated beta at which no angle gives the apparent speed. Raises InputError with the numbers."""
        if motion.beta is None:
            return
        apparent = motion.speed_mas_yr.median() / self._median_scale()
        why = jet.why_no_angle(motion.beta.median(), apparent)
        if why:
            i = self.target.features.index(record)
            keys = ("features", i, "motion", "beta")
            raise InputError(
                f"{record.name}: {why}; raise beta, lower speed_mas_yr, or bring the source nearer",
                place=self.target.source.place(*keys), field=f"features[{i}].motion.beta", value=motion.beta.median(),
            )  # fmt: skip

    def _median_scale(self) -> float:
        return median_mas_yr_per_c(self.target, self.scale)


def median_mas_yr_per_c(target: Target, scale: Scale) -> float:
    """Motion of apparent speed c at the redshift, or at the median distance, of a target, mas/yr."""
    if scale.distance is None:
        return scale.constant
    assert target.distance_pc is not None
    return float(Scale(Number(None, True, target.distance_pc.median()), float("nan")).mas_yr_per_c(np.zeros(0))[0])


def _leans(record: Knot | Pair) -> int:
    motion = record.motion
    if isinstance(motion, CounterMotion):
        return 2
    return 1 if isinstance(motion, NozzleMotion) and isinstance(motion.nozzle, str) else 0


def stated_ghz(record: Knot, target: Target) -> float:
    """Frequency of the core from which a knot's path is stated; that of its flux where the motion names none."""
    motion = record.motion
    if isinstance(motion, KnotMotion | IntrinsicMotion):
        return motion.core_crossing.at_ghz
    if isinstance(motion, CounterMotion):
        of = next(f for f in target.features if isinstance(f, Knot) and f.name == motion.of)
        return stated_ghz(of, target)
    named = None
    if isinstance(motion, LinearMotion):
        named = motion.passes.at_ghz
    elif isinstance(motion, StationaryMotion):
        named = motion.stationary.at_ghz
    return named or record.flux.ghz


def _components(values: Floats) -> Floats:
    speed, pa = values[..., 0], np.radians(values[..., 1])
    return np.stack([speed * np.sin(pa), speed * np.cos(pa)], axis=-1)


def build_jets(
    target: Target, layout: Layout, distance: Number | None, beams_mas: Mapping[str, float],
    ghz: Mapping[str, float], first_mjd: float, last_mjd: float,
) -> tuple[list[JetModel], Wander]:  # fmt: skip
    """Add the jets of a target to its layout and return their models with the core's wander."""
    jets = [f for f in target.features if isinstance(f, Knot | Pair)]
    nuisance = target.nuisances
    wander = build_wander(layout, nuisance.core_wander_beam, first_mjd, last_mjd)
    law = nuisance.core_shift_mas_ghz
    shift = layout.add_law("core_shift_mas_ghz", "mas GHz", law, why="core lies elsewhere at each band", nuisance=True)
    core = build_core(
        layout, jets, beams_mas, {name: ghz[name] for name in beams_mas}, wander=wander, shift=shift,
        flux_scale_fraction=nuisance.flux_scale_fraction,
    )  # fmt: skip
    builder = JetBuilder(target, layout, core, build_scale(target, distance), first_mjd, last_mjd)
    return builder.build(jets), wander
