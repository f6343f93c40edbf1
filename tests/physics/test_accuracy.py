"""Digits: every formula against 60-digit arithmetic on the plainest form of its definition.

The twins below subtract near equals without care, because with 60 digits they can. Bar: forward functions 1e-10
relative, 1 day to 1,000 years and 1e-6 pc to 1 Mpc; inverse functions 1e-10, or 16 machine epsilons times the
condition number where that is larger. Points are drawn once with a fixed seed, uniformly in the logarithm.
"""

from __future__ import annotations

import mpmath as mp
import numpy as np
import pytest

from planner.physics import dust, echo, echo_width, flux, jet
from planner.units import C_PC_PER_DAY, MAG_PER_TAU, RAD_ARCSEC, SR_ARCSEC2

EPS = np.finfo(float).eps
FORWARD = 1e-10
POINTS = 150


@pytest.fixture(autouse=True)
def sixty_digits():
    with mp.workdps(60):
        yield


def logs(rng, low, high, size=POINTS):
    return np.exp(rng.uniform(np.log(low), np.log(high), size))


def draw(seed):
    rng = np.random.default_rng(seed)
    return rng, logs(rng, 1.0, 365_250.0), logs(rng, 1e-6, 1e6)


def ct_of(t):
    return mp.mpf(C_PC_PER_DAY) * mp.mpf(float(t))


def num(x):
    return mp.mpf(float(x))


def assert_digits(got, exact, bar=FORWARD):
    """``bar`` may be one number or one for each point."""
    bars = np.broadcast_to(bar, np.shape(got))
    for g, e, b in zip(np.ravel(got), exact, np.ravel(bars), strict=True):
        assert abs(num(g) - e) <= num(b) * abs(e), (float(g), mp.nstr(e, 20))


# ------------------------------------------------------------------ forward


def test_sheet_ring_keeps_ten_digits():
    rng, t, z0 = draw(1)
    big = logs(rng, 1e3, 1e9)
    ring = echo.sheet_ring(t, z0, big)
    rho = [mp.sqrt((ct_of(a) + num(b)) ** 2 - num(b) ** 2) for a, b in zip(t, z0, strict=True)]
    assert_digits(ring.radius_arcsec, [r / num(d) * num(RAD_ARCSEC) for r, d in zip(rho, big, strict=True)])
    assert_digits(ring.speed_c, [(num(b) + ct_of(a)) / r for a, b, r in zip(t, z0, rho, strict=True)])
    angle = [mp.degrees(mp.acos(num(b) / (num(b) + ct_of(a)))) for a, b in zip(t, z0, strict=True)]
    assert_digits(ring.scattering_deg, angle)


def test_tilted_sheet_keeps_ten_digits_in_every_direction():
    rng, t, z0 = draw(2)
    slope, phi, pa = rng.uniform(-3, 3, POINTS), rng.uniform(0, 360, POINTS), rng.uniform(0, 360, POINTS)
    me, mn = slope * np.sin(np.deg2rad(phi)), slope * np.cos(np.deg2rad(phi))
    circle = echo.sheet_circle(t, z0, 1e4, me, mn)
    got = echo.radius_at_pa_arcsec(circle, pa)
    exact = []
    for a, b, e, n, p in zip(t, z0, me, mn, pa, strict=True):
        ct, u = ct_of(a), mp.radians(num(p))
        m = num(e) * mp.sin(u) + num(n) * mp.cos(u)
        # rho^2 = ct (2 (z0 + m rho) + ct)
        rho = m * ct + mp.sqrt((m * ct) ** 2 + 2 * num(b) * ct + ct**2)
        exact.append(rho / 10_000 * num(RAD_ARCSEC))
    assert_digits(got, exact)


def test_dust_behind_the_source_keeps_ten_digits():
    rng, _, depth = draw(3)
    depth = np.minimum(depth, 100.0)
    t = 2.0 * depth / C_PC_PER_DAY * (1.0 + logs(rng, 1e-5, 1e3))
    rho = [mp.sqrt(ct_of(a) * (ct_of(a) - 2 * num(b))) for a, b in zip(t, depth, strict=True)]
    ring = echo.sheet_ring(t, -depth, 1e4)
    assert_digits(ring.radius_arcsec, [r / 10_000 * num(RAD_ARCSEC) for r in rho])


def test_shell_ring_keeps_ten_digits():
    rng, _, a = draw(4)
    t = 2.0 * a / C_PC_PER_DAY * rng.uniform(1e-5, 0.9999, POINTS)
    ring = echo.shell_ring(t, a, 1e4)
    rho = [mp.sqrt(num(b) ** 2 - (num(b) - ct_of(x)) ** 2) for x, b in zip(t, a, strict=True)]
    assert_digits(ring.radius_arcsec, [r / 10_000 * num(RAD_ARCSEC) for r in rho])
    angle = [mp.degrees(mp.acos(1 - ct_of(x) / num(b))) for x, b in zip(t, a, strict=True)]
    assert_digits(ring.scattering_deg, angle)
    speed = [(num(b) - ct_of(x)) / r for x, b, r in zip(t, a, rho, strict=True)]
    # passes through 0 where the ring is largest: absolute there
    assert np.all(np.abs(ring.speed_c - np.array([float(s) for s in speed])) < 1e-10 * (1 + np.abs(ring.speed_c)))


def screen_exact(t, d, big):
    """(theta, scattering) by the law of cosines in the triangle observer, dust, source."""
    ct, d = ct_of(t), num(d)
    if big is None:
        theta = mp.acos(1 - ct / d)
        return theta, theta
    big = num(big)
    r = big + ct - d
    theta = mp.acos((big**2 + d**2 - r**2) / (2 * big * d))
    return theta, mp.pi - mp.acos((d**2 + r**2 - big**2) / (2 * d * r))


@pytest.mark.parametrize("infinite", [False, True])
def test_screen_ring_keeps_ten_digits(infinite):
    rng, t, d = draw(5)
    d = np.maximum(d, C_PC_PER_DAY * t)
    big = None if infinite else d * (1.0 + logs(rng, 1e-4, 1e5))
    ring = echo.screen_ring(t, d, big)
    both = [screen_exact(a, b, None if infinite else big[k]) for k, (a, b) in enumerate(zip(t, d, strict=True))]
    assert_digits(ring.radius_arcsec, [x * num(RAD_ARCSEC) for x, _ in both])
    assert_digits(ring.scattering_deg, [mp.degrees(x) for _, x in both])
    for k in range(0, POINTS, 10):

        def radius(ct, k=k):
            return screen_exact_ct(ct, d[k], None if infinite else big[k])

        rate = mp.diff(radius, ct_of(t[k]), h=ct_of(t[k]) * mp.mpf("1e-20"))
        assert_digits([ring.speed_c[k]], [num(d[k]) * rate])


def screen_exact_ct(ct, d, big):
    d = num(d)
    if big is None:
        return mp.acos(1 - ct / d)
    r = num(big) + ct - d
    return mp.acos((num(big) ** 2 + d**2 - r**2) / (2 * num(big) * d))


def test_near_sheet_keeps_ten_digits():
    rng, t, _ = draw(6)
    big = logs(rng, 10.0, 1e6)
    z0 = big * rng.uniform(1e-6, 0.95, POINTS)
    ring = echo.near_sheet_ring(t, z0, big)
    for k in range(POINTS):
        theta = num(ring.radius_arcsec[k]) / num(RAD_ARCSEC)
        gap = num(big[k]) - num(z0[k])
        rho = gap * mp.tan(theta)
        late = mp.hypot(rho, num(z0[k])) + mp.hypot(rho, gap) - num(big[k])
        # the delay goes as the square of the radius (less beyond the source's own distance): twice the bar
        assert abs(late / ct_of(t[k]) - 1) < 2 * FORWARD


def test_widths_keep_ten_digits():
    rng, t, z0 = draw(7)
    slope = rng.uniform(-2.0, 0.5, POINTS)
    ring = echo.radius_at_pa_arcsec(echo.sheet_circle(t, z0, 1e4, slope, 0.0), 90.0)
    rho = [num(x) / num(RAD_ARCSEC) * 10_000 for x in ring]
    outburst, thickness = [], []
    for k in range(POINTS):
        ct = ct_of(t[k])
        r = (rho[k] ** 2 + ct**2) / (2 * ct)
        tangent = (rho[k] - num(slope[k]) * ct) / num(RAD_ARCSEC) * 10_000
        outburst.append(num(C_PC_PER_DAY) * 30 * r / tangent)
        thickness.append(ct * mp.mpf("0.5") / tangent)
    assert_digits(echo_width.outburst_width_arcsec(30.0, ring, t, 1e4, slope), outburst)
    assert_digits(echo_width.dust_width_arcsec(0.5, ring, t, 1e4, slope), thickness)


def phase_exact(cosine, g):
    g = num(g)
    return (1 - g**2) / (4 * mp.pi * (1 + g**2 - 2 * g * cosine) ** mp.mpf("1.5"))


def test_phase_function_and_ring_brightness_keep_ten_digits():
    rng, t, z0 = draw(8)
    g = rng.uniform(-0.9, 0.99, POINTS)
    angle = np.concatenate([rng.uniform(0, 180, POINTS - 50), logs(rng, 1e-8, 1.0, 50)])
    got = dust.phase_function(angle, g)
    assert_digits(got, [phase_exact(mp.cos(mp.radians(num(a))), b) for a, b in zip(angle, g, strict=True)])
    big = logs(rng, 1e3, 1e9)
    mag = dust.ring_mag_arcsec2(12.0, 0.3, 0.6735, g, z0, t, big)
    exact = []
    for k in range(POINTS):
        r = num(z0[k]) + ct_of(t[k])
        share = num(0.6735) * num(0.3) / num(MAG_PER_TAU) * phase_exact(num(z0[k]) / r, g[k])
        exact.append(12 - mp.mpf("2.5") * mp.log10(share * (num(big[k]) / r) ** 2 / num(SR_ARCSEC2)))
    # magnitudes are logarithms: 1e-10 of the light is 1.1e-10 mag
    for m, e in zip(mag, exact, strict=True):
        assert abs(num(m) - e) < 1.1e-10


def test_jet_speeds_and_doppler_factors_keep_ten_digits():
    rng = np.random.default_rng(9)
    beta = 1.0 - logs(rng, 1e-9, 0.99)
    angle = np.concatenate([rng.uniform(0.0, 180.0, 75), logs(rng, 1e-7, 1.0, 75)])
    speed = [
        num(b) * mp.sin(mp.radians(num(a))) / (1 - num(b) * mp.cos(mp.radians(num(a))))
        for b, a in zip(beta, angle, strict=True)
    ]
    assert_digits(jet.apparent_speed_c(beta, angle), speed)
    doppler = [
        mp.sqrt(1 - num(b) ** 2) / (1 - num(b) * mp.cos(mp.radians(num(a)))) for b, a in zip(beta, angle, strict=True)
    ]
    assert_digits(jet.doppler_factor(beta, angle), doppler)
    gamma, back = jet.gamma_and_angle([float(s) for s in speed], [float(d) for d in doppler])
    for k in range(POINTS):
        v, d = num(float(speed[k])), num(float(doppler[k]))
        assert_digits([gamma[k]], [(v**2 + d**2 + 1) / (2 * d)])
        # angle from atan2: where v^2 + d^2 - 1 cancels the angle is near 90 deg and does not care
        assert_digits([back[k]], [mp.degrees(mp.atan2(2 * v, v**2 + d**2 - 1))])


def test_fluxes_keep_ten_digits():
    rng = np.random.default_rng(10)
    days, efold = rng.uniform(0.0, 1e3, POINTS), logs(rng, 10.0, 1e3)
    exact = [100 * mp.exp(-num(a) / num(b)) for a, b in zip(days, efold, strict=True)]
    assert_digits(flux.exponential_mjy(100.0, days, efold), exact)
    beta_cos, index = rng.uniform(-0.999, 0.999, POINTS), rng.uniform(-1.5, 0.5, POINTS)
    ratio = [((1 + num(b)) / (1 - num(b))) ** (3 - num(i)) for b, i in zip(beta_cos, index, strict=True)]
    assert_digits(flux.ratio_equal_separation(beta_cos, index), ratio)


# ------------------------------------------------------------------ inverse


def bar_of(*conditions):
    """1e-10 or 16 epsilons times the condition number, whichever is larger."""
    return np.maximum(1e-10, 16.0 * EPS * np.max(np.abs(conditions), axis=0))


def test_depth_from_radius():
    rng, t, z0 = draw(11)
    big = logs(rng, 1e3, 1e9)
    radius = echo.sheet_ring(t, z0, big).radius_arcsec
    rho, ct = radius / RAD_ARCSEC * big, C_PC_PER_DAY * t
    conditions = 2.0 * rho**2 / (rho**2 - ct**2), (rho**2 + ct**2) / (rho**2 - ct**2)
    exact = []
    for k in range(POINTS):
        r, c = num(radius[k]) / num(RAD_ARCSEC) * num(big[k]), ct_of(t[k])
        exact.append((r**2 - c**2) / (2 * c))
    got = echo.depth_from_radius_pc(radius, t, big)
    assert_digits(got, exact, bar_of(*conditions))
    easy = np.max(np.abs(conditions), axis=0) < 1e3
    assert easy.sum() > 50
    assert_digits(got[easy], [e for e, ok in zip(exact, easy, strict=True) if ok], 1e-10)


@pytest.mark.parametrize("sign", [1.0, -1.0])
def test_delay_at_radius(sign):
    """Condition number at most 2 for dust in front, 1 behind: ten digits everywhere."""
    rng, _, z0 = draw(12)
    big = logs(rng, 1e3, 1e9)
    rho = z0 * logs(rng, 1e-7, 1e4)
    radius = rho / big * RAD_ARCSEC
    exact = []
    for k in range(POINTS):
        r, z = num(radius[k]) / num(RAD_ARCSEC) * num(big[k]), num(sign * z0[k])
        exact.append((mp.sqrt(r**2 + z**2) - z) / num(C_PC_PER_DAY))
    assert_digits(echo.delay_at_radius_days(radius, sign * z0, big), exact, np.minimum(1e-10, 32.0 * EPS))


def test_far_dust_would_lose_all_digits_by_the_plain_difference():
    rho, z = 1e-3, 1e6
    plain = np.sqrt(rho**2 + z**2) - z
    good = echo.delay_at_radius_days(rho / 1e4 * RAD_ARCSEC, z, 1e4) * C_PC_PER_DAY
    assert good == pytest.approx(5e-13, rel=1e-12)
    assert abs(plain / good - 1.0) > 0.5


def test_dust_and_source_distance():
    rng, t, d = draw(13)
    d = np.maximum(d, 10.0 * C_PC_PER_DAY * t)
    big = d * (1.0 + logs(rng, 1e-3, 1e4))
    radius = echo.screen_ring(t, d, big).radius_arcsec
    ct = C_PC_PER_DAY * t
    half2 = np.sin(radius / RAD_ARCSEC / 2.0) ** 2
    dust_exact, source_exact, far_exact = [], [], []
    for k in range(POINTS):
        c, s2 = ct_of(t[k]), mp.sin(num(radius[k]) / num(RAD_ARCSEC) / 2) ** 2
        dust_exact.append(c * (2 * num(big[k]) + c) / (2 * (2 * num(big[k]) * s2 + c)))
        source_exact.append(c * (2 * num(d[k]) - c) / (2 * (c - 2 * num(d[k]) * s2)))
        far_exact.append(c / (2 * s2))
    # condition of the dust's distance is at most 2 (by the radius)
    assert_digits(echo.dust_distance_pc(radius, t, big), dust_exact, 1e-10)
    assert_digits(echo.dust_distance_pc(radius, t), far_exact, 1e-10)
    # the source's distance: by the radius 4 d S/(ct - 2 d S), by the delay at most that plus 2
    by_radius = 4.0 * d * half2 / (ct - 2.0 * d * half2)
    assert_digits(echo.source_distance_pc(d, radius, t), source_exact, bar_of(by_radius, by_radius + 2.0))


def test_age_from_motion():
    rng = np.random.default_rng(14)
    b = 1.0 + logs(rng, 1e-6, 1e4)
    rate = b * C_PC_PER_DAY * 365.25 / 1e4 * RAD_ARCSEC
    exact, condition = [], []
    for x in rate:
        speed = num(x) * 10_000 / num(RAD_ARCSEC) / (num(C_PC_PER_DAY) * num(365.25))
        root = mp.sqrt(speed**2 - 1)
        rho = num(3.0) * 10_000 / num(RAD_ARCSEC)
        exact.append(rho * (speed - root) / num(C_PC_PER_DAY))
        condition.append(float(speed / root))
    assert_digits(echo.age_from_motion_days(3.0, rate, 1e4), exact, bar_of(np.array(condition)))


def test_angles_of_an_apparent_speed():
    rng = np.random.default_rng(15)
    beta = 1.0 - logs(rng, 1e-6, 0.9)
    speed = np.array(jet.fastest_apparent_c(beta)) * rng.uniform(1e-3, 0.99999, POINTS)
    found = jet.angles_deg(beta, speed)
    for sign, roots in ((-1, found[0]), (1, found[1])):
        exact = []
        for b, v in zip(beta, speed, strict=True):
            b, v = num(b), num(v)
            root = mp.sqrt(b**2 - v**2 * (1 - b**2))
            exact.append(mp.degrees(2 * mp.atan((b + sign * root) / (v * (1 + b)))))
        by_beta, by_angle = jet.speed_slopes(beta, roots)
        theta = np.deg2rad(roots)
        conditions = speed / (theta * by_angle), beta * by_beta / (theta * by_angle)
        assert_digits(roots, exact, bar_of(*conditions))


def test_pair_of_motions():
    rng = np.random.default_rng(16)
    a, r, kpc = logs(rng, 1.0, 100.0), logs(rng, 1.0, 100.0), logs(rng, 0.5, 1.0)
    got = jet.two_sided(a, r, kpc)
    assert np.all(~np.isnan(got.beta))
    light = num(173.144632674240)  # au/d, only to check the unit below
    assert abs(light - num(299_792_458.0) * 86_400 / num(149_597_870_700.0)) < 1e-9
    light = num(299_792_458.0 * 86_400.0 / 149_597_870_700.0)
    cos, angle, beta = [], [], []
    for x, y, d in zip(a, r, kpc, strict=True):
        x, y, d = num(x), num(y), num(d)
        bc, bs = (x - y) / (x + y), 2 * d * x * y / (light * (x + y))
        cos.append(bc)
        angle.append(mp.degrees(mp.atan2(bs, bc)))
        beta.append(mp.hypot(bs, bc))
    condition = np.maximum(a, r) / np.abs(a - r)
    assert_digits(got.beta_cos, cos, bar_of(condition))
    assert_digits(got.angle_deg, angle, 1e-10)
    assert_digits(got.beta, beta, 1e-10)


def test_flux_ratio_inverse():
    rng = np.random.default_rng(17)
    ratio, index = logs(rng, 1.0001, 1e4), rng.uniform(-1.5, 0.5, POINTS)
    exact = []
    for q, i in zip(ratio, index, strict=True):
        base = num(q) ** (1 / (3 - num(i)))
        exact.append((base - 1) / (base + 1))
    condition = 1.0 / np.log(ratio)
    assert_digits(flux.beta_cos_of_ratio(ratio, index), exact, bar_of(condition))
