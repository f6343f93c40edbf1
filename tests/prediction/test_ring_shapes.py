"""Rings on every shape of dust: derivatives, limits, and nothing where there is no ring."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
from echo_campaigns import DUST, HEAD, OUTBURST, SEEN, arclet_text, model_in, ring_text
from hypothesis import given, settings
from hypothesis import strategies as st

from planner.physics import dust as dust_physics
from planner.physics import echo
from planner.prediction.model import TargetModel
from planner.prediction.quantities import QUANTITIES
from planner.prediction.ring_shapes import FilledShape, ScreenShape, SheetShape, ShellShape
from planner.prediction.rings import RingModel
from planner.units import C_PC_PER_DAY, mjd_of_date

START = mjd_of_date("2027-02-01")
MJD = START + np.array([1.0, 60.0, 179.0])
PEAK = mjd_of_date("2024-03-01")


def _ring(model: TargetModel) -> RingModel:
    (ring,) = model.features
    assert isinstance(ring, RingModel)
    return ring


def _mean(model: TargetModel) -> np.ndarray:
    return np.concatenate([block.moments()[0] for block in model.blocks])[None, :]


def _richardson(model: TargetModel, theta: np.ndarray, setup: str, j: int) -> np.ndarray:
    estimates = []
    for h in (2e-3, 1e-3):
        shift = np.zeros(model.size)
        shift[j] = h * model.sigma[j]
        high, low = model.observe(theta + shift, MJD, setup), model.observe(theta - shift, MJD, setup)
        estimates.append((high - low) / (2 * h * model.sigma[j]))
    return np.asarray((4 * estimates[1] - estimates[0]) / 3)


@pytest.mark.parametrize("shape", [*DUST, "arclet"])
def test_derivatives_of_every_observable_agree_with_richardson(tmp_path: Path, shape: str) -> None:
    """Two halvings extrapolated are good to about 1e-10 away from a ring's first moment."""
    model = model_in(tmp_path, arclet_text() if shape == "arclet" else ring_text(shape))
    theta = model.belief(6, 3, "test").draws
    if shape in ("beside", "behind"):  # keep off the edge where the ring appears and its speed is infinite
        theta = np.clip(theta, _mean(model) - 1.2 * model.sigma, _mean(model) + 1.2 * model.sigma)
    found = model.derivatives(theta, MJD, "hill/plain")
    assert np.isfinite(found).any()
    for j in range(model.size):
        exact = _richardson(model, theta, "hill/plain", j)
        scale = np.nanmax(np.abs(exact)) + 1e-12
        assert found[..., j] == pytest.approx(exact, abs=1e-6 * scale, nan_ok=True), model.blocks


@pytest.mark.parametrize("shape", [*DUST, "arclet"])
def test_a_feature_depends_on_exactly_the_coordinates_it_names(tmp_path: Path, shape: str) -> None:
    model = model_in(tmp_path, arclet_text() if shape == "arclet" else ring_text(shape))
    theta = _mean(model) + 0.3 * model.sigma  # off the mean, where no slope hides behind a symmetry
    for setup in (None, "hill/plain"):
        named = set(model.features[0].depends(setup))
        moved = set()
        for j in range(model.size):
            shift = np.zeros(model.size)
            shift[j] = 0.01 * model.sigma[j]
            change = model.observe(theta + shift, MJD, setup) - model.observe(theta, MJD, setup)
            if np.nanmax(np.abs(change)) > 0.0:
                moved.add(j)
        assert moved == named, (shape, setup)


@pytest.mark.parametrize("shape", list(DUST))
def test_shapes_broadcast_over_draws_and_moments(tmp_path: Path, shape: str) -> None:
    model = model_in(tmp_path, ring_text(shape))
    ring, theta = _ring(model), model.belief(5, 1, "test").draws
    assert ring.observe(theta, MJD, "hill/plain").shape == (5, 3, 8)
    assert ring.observe(theta[0], MJD).shape == (3, 8)
    assert ring.observe(theta, MJD[:0]).shape == (5, 0, 8)
    state = ring.state(theta, MJD)
    for field in (state.exists, state.radius_arcsec, state.mean_radius_arcsec, state.width_arcsec, state.mag_arcsec2):
        assert field.shape == (5, 3)


@pytest.mark.parametrize(
    ("shape", "kind"),
    [("sheet", SheetShape), ("shell", ShellShape), ("screen", ScreenShape), ("filled", FilledShape)],
)
def test_at_the_prior_mean_each_shape_has_the_radius_of_its_formula(tmp_path: Path, shape: str, kind: type) -> None:
    model = model_in(tmp_path, ring_text(shape))
    ring, theta, delay = _ring(model), _mean(model), MJD - PEAK
    assert isinstance(ring.shape, kind)
    expected = {
        "sheet": lambda: echo.sheet_ring(delay, 20.0, 8000.0).radius_arcsec,
        "shell": lambda: echo.shell_ring(delay, 1.2, 8000.0).radius_arcsec,
        "screen": lambda: echo.screen_ring(delay, 3000.0, 8000.0).radius_arcsec,
        "filled": lambda: dust_physics.polarised_radius_arcsec(delay, 8000.0),
    }[shape]()
    # drift is at its mean of 0, so that the lengths are those of the file; slopes and offsets are 0
    assert ring.observe(theta, MJD)[0] == pytest.approx(np.repeat(np.asarray(expected)[:, None], 8, axis=1), rel=1e-9)


# ------------------------------------------------------------------ no ring


def test_nothing_is_seen_before_the_outburst_whatever_the_dust(tmp_path: Path) -> None:
    early = np.array([PEAK - 30.0])
    for shape in DUST:
        model = model_in(tmp_path, ring_text(shape))
        ring, theta = _ring(model), model.belief(32, 1, "test").draws
        assert np.isnan(ring.observe(theta, early)).all(), shape
        assert not ring.state(theta, early).exists.any()


def test_dust_behind_shows_its_ring_exactly_from_twice_its_depth_on(tmp_path: Path) -> None:
    """First light of an untilted sheet at ct = -2z: closed form, draw by draw."""
    dust = "{shape: sheet, depth_pc: {normal: {mean: -0.49, sigma: 0.04}}}"
    model = model_in(tmp_path, ring_text("sheet", dust=dust))
    ring, theta = _ring(model), model.belief(256, 1, "test").draws.copy()
    shape = ring.shape
    assert isinstance(shape, SheetShape)
    for slope in (shape.slope_east, shape.slope_north):
        assert slope.index is not None
        theta[:, slope.index] = 0.0
    delay = ring.delay_days(theta, MJD)
    lit = C_PC_PER_DAY * delay >= -2.0 * shape.depth_pc(theta, delay)
    assert 0.0 < lit.mean() < 1.0
    assert np.array_equal(np.isfinite(ring.circle(theta, MJD)[0]), lit)
    assert np.array_equal(ring.state(theta, MJD).exists, lit)


def test_a_shells_ring_ends_after_twice_its_radius_and_shrinks_before_that(tmp_path: Path) -> None:
    model = model_in(tmp_path, ring_text("shell"))
    ring, theta = _ring(model), model.belief(256, 1, "test").draws
    shape = ring.shape
    assert isinstance(shape, ShellShape)
    days = PEAK + np.array([500.0, 1430.0, 2200.0, 2900.0])  # ct = 0.42, 1.2, 1.85, 2.43 pc
    delay = ring.delay_days(theta, days)
    radius = ring.circle(theta, days)[0]
    there = C_PC_PER_DAY * delay <= 2.0 * shape.radius_pc(theta, delay)
    assert 0.0 < there[:, 3].mean() < 1.0
    assert np.array_equal(np.isfinite(radius), there)
    growth = ring.growth_arcsec_day(_mean(model), days)[0]
    assert growth[0] > 0 > growth[2]
    assert abs(growth[1]) < 0.05 * growth[0]


def test_a_screen_behind_its_source_has_no_ring_in_those_draws(tmp_path: Path) -> None:
    dust = "{shape: screen, distance_pc: {lognormal: {median: 7900, sigma_fraction: 0.05}}}"
    model = model_in(tmp_path, ring_text("screen", dust=dust))
    ring, theta = _ring(model), model.belief(256, 1, "test").draws
    shape = ring.shape
    assert isinstance(shape, ScreenShape)
    assert shape.distance is not None
    delay = ring.delay_days(theta, MJD)
    behind = shape.dust_distance_pc(theta, delay) - shape.distance.value(theta)
    assert np.array_equal(np.isfinite(ring.circle(theta, MJD)[0]), 2.0 * behind <= C_PC_PER_DAY * delay)


# ------------------------------------------------------------------ limits


def test_a_screen_near_the_source_is_a_sheet(tmp_path: Path) -> None:
    """theta(screen at D - z - ct along the ray) against the sheet: they part by about z/2D (paraboloid, 0.3 %)."""
    near = "{shape: screen, distance_pc: 7950, drift: 0, thickness_pc: 0.5}"
    sheet = "{shape: sheet, depth_pc: 50, drift: 0, thickness_pc: 0.5}"
    fixed = ring_text("screen", dust=near).replace("{lognormal: {median: 8000, sigma_fraction: 0.1}}", "8000")
    other = ring_text("sheet", dust=sheet).replace("{lognormal: {median: 8000, sigma_fraction: 0.1}}", "8000")
    one, two = _ring(model_in(tmp_path / "a", fixed)), _ring(model_in(tmp_path / "b", other))
    at_one, at_two = one.home, two.home
    assert one.circle(at_one, MJD)[0] == pytest.approx(two.circle(at_two, MJD)[0], rel=0.01)
    a, b = one.state(at_one, MJD), two.state(at_two, MJD)
    assert a.width_arcsec == pytest.approx(b.width_arcsec, rel=0.03)  # small angles and z + ct beside z
    scatter_a = one.shape.scatter(at_one, one.delay_days(at_one, MJD))
    scatter_b = two.shape.scatter(at_two, two.delay_days(at_two, MJD))
    for name in ("angle_deg", "spread", "reach_pc", "lit_pc", "slant"):
        assert getattr(scatter_a, name) == pytest.approx(getattr(scatter_b, name), rel=0.05), name


def test_a_source_far_behind_a_screen_counts_as_infinitely_far(tmp_path: Path) -> None:
    """theta^2 = 2 ct (1/d - 1/D): with D = 1e4 d the radii part by half of 1e-4."""
    far = ring_text("infinity").replace("source_at_infinity: true, ", "").replace("median: 8000", "median: 5.0e+6")
    one = _ring(model_in(tmp_path / "a", far))
    two = _ring(model_in(tmp_path / "b", ring_text("infinity")))
    assert one.circle(one.home, MJD)[0] == pytest.approx(two.circle(two.home, MJD)[0], rel=1e-4)
    assert isinstance(two.shape, ScreenShape)
    assert two.shape.distance is None


def test_a_redshift_without_a_distance_puts_the_source_behind_a_screen_at_infinity(tmp_path: Path) -> None:
    text = HEAD + "redshift: 0.4\n" + OUTBURST + f"features:\n  - ring: Echo\n    dust: {DUST['screen']}\n    {SEEN}\n"
    ring = _ring(model_in(tmp_path, text))
    assert isinstance(ring.shape, ScreenShape)
    assert ring.shape.distance is None
    assert ring.frame == 1.0  # dust in front: no factor of 1 + redshift


def test_the_front_of_a_large_shell_is_a_sheet_at_its_radius(tmp_path: Path) -> None:
    """rho^2 = ct (2a - ct) against ct (2z + ct): they part by ct/2a = 2 % at a = 50 pc, ct = 0.9 pc."""
    shell = _ring(model_in(tmp_path / "a", ring_text("shell", dust="{shape: shell, radius_pc: 50, thickness_pc: 0.5}")))
    sheet = _ring(model_in(tmp_path / "b", ring_text("sheet", dust="{shape: sheet, depth_pc: 50, thickness_pc: 0.5}")))
    a, b = shell.state(shell.home, MJD), sheet.state(sheet.home, MJD)
    assert a.radius_arcsec == pytest.approx(b.radius_arcsec, rel=0.025)
    assert a.width_arcsec == pytest.approx(b.width_arcsec, rel=0.04)


def test_without_tilt_all_sectors_agree_and_a_little_tilt_moves_them_little(tmp_path: Path) -> None:
    model = model_in(tmp_path, ring_text("sheet"))
    ring, theta = _ring(model), _mean(model)
    shape = ring.shape
    assert isinstance(shape, SheetShape)
    assert shape.slope_east.index is not None
    flat = ring.observe(theta, MJD)
    assert np.ptp(flat, axis=-1) == pytest.approx(np.zeros((1, 3)), abs=1e-9)
    for slope in (1e-2, 1e-4, 1e-6):
        theta[0, shape.slope_east.index] = slope
        # centre moves by slope ct: first order in the slope, second-order rest
        moved = ring.observe(theta, MJD) - flat
        first = slope * C_PC_PER_DAY * (MJD - PEAK)[:, None] / 8000.0 * 206264.806 * np.sin(np.radians(ring.pa_deg))
        assert moved[0] == pytest.approx(first, abs=2.0 * slope**2 * 30.0 + 1e-9)


def test_depth_zero_is_the_plane_of_the_sky_and_drifts_by_its_light_path(tmp_path: Path) -> None:
    model = model_in(tmp_path, ring_text("beside", dust="{shape: sheet, depth_pc: 0, thickness_pc: 0.1}"))
    ring, theta = _ring(model), _mean(model)
    expected = dust_physics.polarised_radius_arcsec(MJD - PEAK, 8000.0)  # rho = ct
    assert ring.observe(theta, MJD)[0, :, 0] == pytest.approx(np.asarray(expected), rel=1e-9)
    shape = ring.shape
    assert isinstance(shape, SheetShape)
    assert shape.drift.index is not None
    theta[0, shape.drift.index] = 1.0
    delay = ring.delay_days(theta, MJD)
    ct = C_PC_PER_DAY * delay
    assert shape.depth_pc(theta, delay) == pytest.approx(0.1 * np.log(delay / shape.reference_days) * ct, rel=1e-12)


# ------------------------------------------------------------------ clock, redshift, what a radius means


def test_host_dust_keeps_the_time_of_its_redshift_and_a_screen_does_not(tmp_path: Path) -> None:
    for shape, factor in (("sheet", 1.25), ("shell", 1.25), ("filled", 1.25), ("screen", 1.0)):
        plain = _ring(model_in(tmp_path / f"{shape}0", ring_text(shape)))
        text = ring_text(shape).replace("outburst:", "redshift: 0.25\noutburst:")
        shifted = _ring(model_in(tmp_path / f"{shape}z", text))
        later = PEAK + factor * (MJD - PEAK)
        assert shifted.delay_days(shifted.home, later) == pytest.approx(plain.delay_days(plain.home, MJD), rel=1e-12)
        assert shifted.circle(shifted.home, later)[0] == pytest.approx(plain.circle(plain.home, MJD)[0], rel=1e-9)
        assert shifted.lasting_days == pytest.approx(plain.lasting_days / factor)


@pytest.mark.parametrize(("word", "offset"), [("outer_edge", -20.0), ("ridge", 0.0), ("mean", 0.0)])
def test_a_plateau_shifts_the_clock_by_half_its_length_at_the_outer_edge(
    tmp_path: Path, word: str, offset: float
) -> None:
    """40 d of light about the peak: the outer edge is light that left 20 d earlier, hence a delay 20 d longer."""
    ring = _ring(model_in(tmp_path / "a", ring_text("sheet", more=f"radius_of: {word}")))
    plain = _ring(model_in(tmp_path / "b", ring_text("sheet")))
    assert ring.phase_days() == pytest.approx(offset, abs=1e-5)
    assert ring.observe(ring.home, MJD) == pytest.approx(plain.observe(plain.home, MJD - offset), rel=1e-7)


def test_the_mean_of_pulses_shifts_the_clock_to_their_fluence(tmp_path: Path) -> None:
    pulses = "pulses: [{after_days: 0, share: 0.3, lasting_days: 20}, {after_days: 100, share: 0.7, lasting_days: 80}]"
    text = ring_text("sheet", more="radius_of: mean").replace("lasting_days: 40", pulses)
    ring = _ring(model_in(tmp_path, text))
    assert ring.phase_days() == pytest.approx(70.0, abs=1e-5)  # 0.7 x 100 d
    sheet = _ring(model_in(tmp_path / "b", ring_text("sheet")))
    assert ring.observe(ring.home, MJD) == pytest.approx(sheet.observe(sheet.home, MJD - 70.0), rel=1e-7)


def test_a_light_curve_in_a_table_gives_peak_length_and_phases_by_filter(tmp_path: Path) -> None:
    rows = ["# invented", "date,filter,mag"]
    for day, mag in ((-10, 8.5), (0, 6.0), (30, 8.5)):  # a tenth of the flux at both ends
        rows.append(f"{np.datetime64('2024-03-01') + day},V,{mag}")
        rows.append(f"{np.datetime64('2024-03-01') + 2 * day},R,{mag - 0.5}")
    (tmp_path / "curve.csv").write_text("\n".join(rows), encoding="utf-8")
    text = ring_text("sheet", more="radius_of: outer_edge").replace(
        "lasting_days: 40, peak_mag: {V: 6.0, R: 5.7}", "light_curve: curve.csv"
    )
    ring = _ring(model_in(tmp_path, text))
    assert ring.light.equivalent_days == pytest.approx(0.55 * 40.0, rel=1e-9)  # trapezia of 1 and 0.1
    assert ring.phase_days() == pytest.approx(-10.0)
    assert ring.colour_mag("R") == pytest.approx(-0.5 - 2.5 * np.log10(0.6745 / 0.6735), abs=1e-9)
    red = RingModel(**{**{f: getattr(ring, f) for f in ring.__dataclass_fields__}, "filters": {"hill/plain": "R"}})
    assert red.phase_days("hill/plain") == pytest.approx(-20.0)  # the red light came earlier and stayed longer
    assert red.delay_days(red.home, MJD, "hill/plain") == pytest.approx(ring.delay_days(ring.home, MJD) + 10.0)


def test_quantities_of_each_shape_at_the_prior_mean_are_the_numbers_of_its_file(tmp_path: Path) -> None:
    expected = {
        "sheet": {"depth_pc": 20.0, "distance_pc": 8000.0, "depth_over_distance2": 20.0 / 8000.0**2, "tilt_deg": 0.0},
        "shell": {"shell_radius_pc": 1.2, "distance_pc": 8000.0},
        "screen": {"dust_distance_pc": 3000.0, "source_distance_pc": 8000.0},
        "filled": {"distance_pc": 8000.0},
    }
    for shape, values in expected.items():
        model = model_in(tmp_path / shape, ring_text(shape))
        for name, value in values.items():
            found = QUANTITIES[("ring", name)](model, model.features[0], _mean(model))
            assert found == pytest.approx([value], rel=1e-9, abs=1e-12), (shape, name)


# ------------------------------------------------------------------ every point lies on the light surface


@pytest.fixture(scope="module")
def model_of(tmp_path_factory: pytest.TempPathFactory) -> Callable[[str], TargetModel]:
    folder = tmp_path_factory.mktemp("shapes")
    return {shape: model_in(folder / shape, ring_text(shape)) for shape in DUST}.__getitem__


@given(shape=st.sampled_from(["sheet", "behind", "beside"]), seed=st.integers(0, 2**31), days=st.floats(400, 6000))
@settings(max_examples=40, deadline=None)
def test_every_sector_of_a_sheet_is_as_late_as_its_detour(
    model_of: Callable[[str], TargetModel], shape: str, seed: int, days: float
) -> None:
    """r - z = ct for the point of the sheet at the radius and position angle that the model gives."""
    model = model_of(shape)
    ring = _ring(model)
    sheet = ring.shape
    assert isinstance(sheet, SheetShape)
    theta = _mean(model) + model.sigma * np.random.default_rng(seed).normal(size=model.size)
    mjd = np.array([PEAK + days])
    delay = ring.delay_days(theta, mjd)
    rho = ring.observe(theta, mjd)[0, 0] / 206264.806247 * sheet.distance.value(theta)[0]
    z = sheet.depth_pc(theta, delay)[0, 0] + sheet.radial_slope(theta, ring.pa_deg)[0, 0] * rho
    seen = np.isfinite(rho)
    if not seen.any():
        return
    ct = C_PC_PER_DAY * delay[0, 0]
    # the difference of two lengths of tens of pc keeps twelve of their digits
    assert (np.hypot(rho, z) - z)[seen] == pytest.approx(np.full(seen.sum(), ct), abs=1e-9 * (1 + np.nanmax(np.abs(z))))


@given(seed=st.integers(0, 2**31), days=st.floats(50, 4000))
@settings(max_examples=40, deadline=None)
def test_every_ring_of_a_screen_is_as_late_as_its_detour(
    model_of: Callable[[str], TargetModel], seed: int, days: float
) -> None:
    """Source to dust to observer against source to observer: the exact triangle, in long sums of like terms."""
    model = model_of("screen")
    ring = _ring(model)
    screen = ring.shape
    assert isinstance(screen, ScreenShape)
    assert screen.distance is not None
    theta = _mean(model) + model.sigma * np.random.default_rng(seed).normal(size=model.size)
    mjd = np.array([PEAK + days])
    delay = ring.delay_days(theta, mjd)
    angle = ring.circle(theta, mjd)[0][0, 0] / 206264.806247
    if np.isnan(angle):
        return
    d, big = screen.dust_distance_pc(theta, delay)[0, 0], screen.distance.value(theta)[0, 0]
    to_source = np.sqrt((big - d) ** 2 + 4.0 * big * d * np.sin(angle / 2) ** 2)
    assert to_source + d - big == pytest.approx(C_PC_PER_DAY * delay[0, 0], abs=1e-8)  # kpc to twelve digits


@given(seed=st.integers(0, 2**31), days=st.floats(50, 4000))
@settings(max_examples=40, deadline=None)
def test_every_ring_of_a_shell_lies_on_the_shell(
    model_of: Callable[[str], TargetModel], seed: int, days: float
) -> None:
    """rho^2 + (a - ct)^2 = a^2."""
    model = model_of("shell")
    ring = _ring(model)
    shell = ring.shape
    assert isinstance(shell, ShellShape)
    theta = _mean(model) + model.sigma * np.random.default_rng(seed).normal(size=model.size)
    mjd = np.array([PEAK + days])
    delay = ring.delay_days(theta, mjd)
    a, ct = shell.radius_pc(theta, delay)[0, 0], C_PC_PER_DAY * delay[0, 0]
    rho = ring.circle(theta, mjd)[0][0, 0] / 206264.806247 * shell.distance.value(theta)[0, 0]
    assert np.isnan(rho) == (ct > 2.0 * a)
    if ct <= 2.0 * a:
        assert np.hypot(rho, a - ct) == pytest.approx(a, rel=1e-9)
