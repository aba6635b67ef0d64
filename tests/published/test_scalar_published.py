"""Scalar laws against figures from outside, each with its source beside it.

Marks: "seen" in a readable page; "from memory", the page was not seen; "computed" from the law in closed
form, where there is no publication. Where a polygon stands for a smooth law, h is the spacing of its
breakpoints: states are right to h, speeds and places of shocks to a few h^2 once a fan has been met, to a
few h before.
"""

from __future__ import annotations

import math

import numpy as np
import pytest
import wavekin as wk
from oracles.hopf_lax import BURGERS, HopfLax
from wavekin.records import KINDS

SHOCK = KINDS.index("shock")


def shocks(history: wk.History, t: float) -> np.ndarray:
    """Return the rows of the shocks alive at t by place."""
    fronts = history.fronts[history.alive(t)]
    return fronts[fronts["kind"] == SHOCK]


def place(front: np.void, t: float) -> float:
    return float(front["birth_x"] + front["speed"] * (t - front["birth_t"]))


def strongest(history: wk.History, t: float) -> np.void:
    fronts = history.fronts[history.alive(t)]
    return fronts[np.argmax(np.abs(fronts["right"] - fronts["left"]))]


# Burgers


def test_box_of_height_two_grows_and_decays() -> None:
    """u = 2 on [0, 1]: shock 1 + t until the fan meets it at t = 1, then x = 2 sqrt t, u = 2 / sqrt t.

    Seen: a worked page of imathworks on Burgers' equation.
    """
    levels = 1025
    h = 2.0 / (levels - 1)
    history = wk.track(wk.burgers(), wk.Profile([0.0, 1.0], [0.0, 2.0, 0.0]), 16.0, levels=levels)
    assert history.collisions["t"][0] == pytest.approx(1.0, abs=h)
    assert place(strongest(history, 0.5), 0.5) == 1.5
    for t in (2.0, 4.0, 9.0, 16.0):
        front = strongest(history, t)
        assert place(front, t) == pytest.approx(2.0 * math.sqrt(t), abs=h * h * t)
        assert front["left"] == pytest.approx(2.0 / math.sqrt(t), abs=h)


def test_box_of_height_one_at_eight() -> None:
    """x = sqrt(2 t) = 4 and u = 1/2 at t = 8. From memory: Lax 1957, Whitham 1974; computed."""
    history = wk.track(wk.burgers(), wk.Profile([0.0, 1.0], [0.0, 1.0, 0.0]), 8.0, levels=1025)
    front = strongest(history, 8.0)
    assert place(front, 8.0) == pytest.approx(4.0, abs=1e-5)
    assert front["left"] == pytest.approx(0.5, abs=1.0 / 1024)


def test_fan_overtakes_a_shock() -> None:
    """u = -1 | 1/2 | 0 with jumps at 1 and 2: they meet at t = 4, x = 3; then x = 1 + sqrt t.

    Seen (a student repository that states the problem in full) for the data, the fan from 1/2 to 5/4 and the
    shock at 17/8 at t = 1/2, and the meeting; computed for x(9) = 4.
    """
    levels = 1501
    h = 1.5 / (levels - 1)
    history = wk.track(wk.burgers(), wk.Profile([1.0, 2.0], [-1.0, 0.5, 0.0]), 9.0, levels=levels)
    early = history.at(0.5)
    assert early.edges[[0, -2]] == pytest.approx([0.5, 1.25], abs=h)
    assert early.edges[-1] == pytest.approx(17.0 / 8.0, rel=1e-15)
    first = history.collisions[0]
    assert (first["t"], first["x"]) == (pytest.approx(4.0, abs=16 * h), pytest.approx(3.0, abs=4 * h))
    assert place(strongest(history, 9.0), 9.0) == pytest.approx(4.0, abs=10 * h * h)


@pytest.mark.parametrize("loop", ["queue", "compiled"])
@pytest.mark.parametrize("m", [2, 4, 5, 10])
def test_events_of_the_box_are_the_exact_list(m: int, loop: str) -> None:
    """t_k = 2 M^2 / ((M-k)(M-k+1)), x_k = (M-k+1/2) t_k / M; computed (fractions and formula agree)."""
    history = wk.track(wk.burgers(), wk.Profile([0.0, 1.0], [0.0, 1.0, 0.0]), 1000.0, levels=m + 1, loop=loop)
    k = np.arange(1, m)
    times = 2.0 * m * m / ((m - k) * (m - k + 1))
    assert history.collisions["t"] == pytest.approx(times, rel=1e-14)
    assert history.collisions["x"] == pytest.approx((m - k + 0.5) / m * times, rel=1e-14)
    assert (history.collisions["fronts_in"] == 2).all() and (history.collisions["fronts_out"] == 1).all()
    end = history.fronts[history.alive(1000.0)]
    assert end["speed"] == pytest.approx([0.5 / m, 0.5 / m], rel=1e-15)  # the last two run side by side
    if m == 4:
        rows = history.collisions[["t", "x"]].tolist()
        expected = [(8.0 / 3.0, 7.0 / 3.0), (16.0 / 3.0, 10.0 / 3.0), (16.0, 6.0)]
        assert rows == [pytest.approx(row, rel=1e-15) for row in expected]


@pytest.mark.parametrize("m", [1, 3, 8, 100])
def test_steps_of_a_fan_have_the_exact_error(m: int) -> None:
    """L1 distance t (uR - uL)^2 / (4 M) for M equal steps; computed. The bound is that distance itself."""
    t, left, right = 2.0, -0.5, 1.0
    exact = t * (right - left) ** 2 / (4 * m)
    history = wk.track(wk.burgers(), wk.Profile([0.0], [left, right]), t, levels=m + 1)
    profile = history.at(t)
    solution = HopfLax(BURGERS, [0.0], [left, right])
    assert solution.distance(profile.edges, profile.values, t, (-5.0, 5.0)) == pytest.approx(exact, rel=1e-11)
    assert exact * (1.0 - 1e-12) <= history.error_bound(t) <= exact * (1.0 + 2e-4)


def test_edges_of_an_n_wave() -> None:
    """Areas +P and -Q: edges at sqrt(2 P t) and -sqrt(2 Q t).

    From memory: Lax 1957, Whitham 1974; computed.
    """
    start = wk.Profile([-0.5, 0.0, 1.0], [0.0, -1.0, 1.0, 0.0])
    history = wk.track(wk.burgers(), start, 50.0, levels=2001)
    ends = history.at(50.0).edges[[0, -1]]
    assert ends == pytest.approx([-math.sqrt(50.0), 10.0], abs=1e-4)


def test_sawtooth_on_a_ring_decays() -> None:
    """A(t) = A0 / (1 + 2 A0 t / L): 1/4 for A0 = 1, L = 2, t = 3. From memory: Lax 1957; computed.

    From 1 on [0, 1), -1 on [1, 2) the fan fills the ring at time 1, which is when the sawtooth's clock
    starts.
    """
    levels = 1025
    start = wk.Profile([0.0, 1.0], [1.0, -1.0])
    history = wk.track(wk.burgers(), start, 4.0, levels=levels, ring=(0.0, 2.0))
    front = strongest(history, 4.0)
    assert [front["left"], front["right"]] == pytest.approx([0.25, -0.25], abs=2.0 / (levels - 1))
    assert place(front, 4.0) == 1.0
    assert history.total_variation(4.0) == pytest.approx(1.0, abs=4.0 / (levels - 1))
    assert history.mass(4.0) == pytest.approx(0.0, abs=1e-13)


# Laws that bend both ways


@pytest.mark.parametrize("side", [1.0, -1.0])
def test_cubic_law_makes_a_shock_and_a_fan(side: float) -> None:
    """f = u^3: 1 | -1 gives a shock 1 | -1/2 at 3/4 and a fan up to speed 3; mirrored from -1 | 1.

    Computed.
    """
    levels = 1025
    h = 2.0 / (levels - 1)
    history = wk.track(wk.cubic(), wk.Profile([0.0], [side, -side]), 1.0, levels=levels)
    shock = strongest(history, 1.0)
    assert shock["speed"] == pytest.approx(0.75, abs=3 * h * h)
    assert shock["right"] == pytest.approx(-0.5 * side, abs=h)
    assert history.at(1.0).edges[-1] == pytest.approx(3.0, abs=3 * h)


def test_third_of_the_cubic_law() -> None:
    """f = u^3 / 3: the shock from 1 | -1 moves at 1/4.

    Seen: a solved problem, newbetuts 2539265 (its data).
    """
    law = wk.Law(lambda u: u**3 / 3.0, (-1.0, 1.0), inflections=(0.0,))
    history = wk.track(law, wk.Profile([0.0], [1.0, -1.0]), 1.0, levels=1025)
    assert strongest(history, 1.0)["speed"] == pytest.approx(0.25, abs=1e-5)
    assert history.at(1.0).edges[-1] == pytest.approx(1.0, abs=2e-3)


def quartic() -> wk.Law:
    bend = math.sqrt(5.0 / 6.0)  # f'' = 3 u^2 - 5 / 2
    return wk.Law(lambda u: (u * u - 1.0) * (u * u - 4.0) / 4.0, (-3.0, 3.0), inflections=(-bend, bend))


def test_quartic_law_between_two_and_minus_two() -> None:
    """Shocks to +-.215250437022 at +-.528152947731 and a fan between them.

    The law from memory: Harten, Engquist, Osher and Chakravarthy 1987; the figures computed.
    """
    levels = 2001
    h = 4.0 / (levels - 1)
    history = wk.track(quartic(), wk.Profile([0.0], [2.0, -2.0]), 1.0, levels=levels)
    first, last = shocks(history, 1.0)[[0, -1]]
    assert (first["left"], last["right"]) == (2.0, -2.0)
    assert [first["right"], last["left"]] == pytest.approx([0.215250437022, -0.215250437022], abs=h)
    assert [first["speed"], last["speed"]] == pytest.approx([-0.528152947731, 0.528152947731], abs=5 * h * h)


def test_quartic_law_between_minus_three_and_three() -> None:
    """Fans out to +-19.5 and a standing shock -1.58113883008 | 1.58113883008 (sqrt(5/2)).

    Law and data as above.
    """
    levels = 2001
    h = 6.0 / (levels - 1)
    history = wk.track(quartic(), wk.Profile([0.0], [-3.0, 3.0]), 1.0, levels=levels)
    shock = strongest(history, 1.0)
    assert shock["speed"] == pytest.approx(0.0, abs=1e-12)
    assert [shock["left"], shock["right"]] == pytest.approx([-math.sqrt(2.5), math.sqrt(2.5)], abs=h)
    assert history.at(1.0).edges[[0, -1]] == pytest.approx([-19.5, 19.5], abs=13 * h)  # f''(3) h / 2


def test_law_that_misleads_sharp_schemes() -> None:
    """0 | 1 from x = .25, t = 1: shock 0 | sqrt(3/8) at x = .362372435696, fan to x = .75.

    Law and data from memory: Kurganov, Petrova and Popov, SIAM J. Sci. Comput. 29 (2007); figures computed.
    """
    law = wk.Law(
        lambda u: np.where(u < 0.5, u * (1.0 - u) / 4.0, u * (u - 1.0) / 2.0 + 3.0 / 16.0),
        (0.0, 1.0),
        inflections=(0.5,),
    )
    levels = 1025
    h = 1.0 / (levels - 1)
    history = wk.track(law, wk.Profile([0.25], [0.0, 1.0]), 1.0, levels=levels)
    shock = strongest(history, 1.0)
    assert place(shock, 1.0) == pytest.approx(0.362372435696, abs=h * h)
    assert shock["right"] == pytest.approx(math.sqrt(3.0 / 8.0), abs=h)
    assert history.at(1.0).edges[-1] == pytest.approx(0.75, abs=h)


# Two-phase displacement: Buckley and Leverett 1942, Welge 1952


@pytest.mark.parametrize(
    "m, tangent, flux, speed",
    [
        (1.0 / 3.0, 0.5, 0.75, 1.5),
        (9.0 / 16.0, 0.6, 0.8, 4.0 / 3.0),
        (1.0, 0.707106781187, 0.853553390593, 1.20710678119),
        (0.5, 0.57735026919, 0.788675134595, 1.36602540378),
        (0.2, 0.408248290464, 0.704124145232, 1.72474487139),
        (2.0, 0.816496580928, 0.908248290464, 1.1123724357),
    ],
)
def test_front_of_a_quadratic_displacement(m: float, tangent: float, flux: float, speed: float) -> None:
    """s* = sqrt(M / (1 + M)), v = (1 + sqrt(1 + 1/M)) / 2, mean saturation at breakthrough 1 / v.

    The tangent construction seen: Fanchi, Principles of Applied Reservoir Simulation, section 5.2; the closed
    form and the figures computed.
    """
    levels = 1025
    h = 1.0 / (levels - 1)
    law = wk.corey(viscosity_ratio=m)
    history = wk.track(law, wk.Profile([0.0], [1.0, 0.0]), 1.0, levels=levels)
    front = strongest(history, 1.0)
    assert front["speed"] == pytest.approx(speed, abs=5 * h * h)
    assert front["left"] == pytest.approx(tangent, abs=h)
    assert float(law.flux(np.array([tangent]))[0]) == pytest.approx(flux, abs=1e-11)
    mean = history.averages([0.0, 1.0], 1.0 / speed)[0, 0]
    assert mean == pytest.approx(1.0 / speed, abs=history.cumulative_bound(1.0))


def test_displacement_after_breakthrough() -> None:
    """M = 1/2, outlet at .7: 1.36297619048 pore volumes injected, mean saturation .814642857143 (Welge).

    Computed.
    """
    levels = 1025
    history = wk.track(wk.corey(viscosity_ratio=0.5), wk.Profile([0.0], [1.0, 0.0]), 1.5, levels=levels)
    t = 1.36297619048
    assert float(history.at(t)(1.0)) == pytest.approx(0.7, abs=1.0 / (levels - 1))
    mean = history.averages([0.0, 1.0], t)[0, 0]
    assert mean == pytest.approx(0.814642857143, abs=history.cumulative_bound(t))


DAKE = np.array(
    [
        (0.20, 0.0, 0.800), (0.25, 0.002, 0.610), (0.30, 0.009, 0.470), (0.35, 0.020, 0.370),
        (0.40, 0.033, 0.285), (0.45, 0.051, 0.220), (0.50, 0.075, 0.163), (0.55, 0.100, 0.120),
        (0.60, 0.132, 0.081), (0.65, 0.170, 0.050), (0.70, 0.208, 0.027), (0.75, 0.251, 0.010),
        (0.80, 0.300, 0.0),
    ]
)  # fmt: skip


@pytest.mark.parametrize(
    "oil, water, state, flux, slope, mean, published",
    [
        (50.0, 0.5, 0.30, 0.656934306569, 6.56934306569, 0.352222222222, None),
        (5.0, 0.5, 0.45, 0.698630136986, 2.79452054795, 0.557843137255, (0.45, 0.70, 0.55)),
        (0.4, 1.0, 0.80, 1.0, 1.66666666667, 0.8, (0.80, 1.0, 0.80)),
    ],
)
def test_displacement_by_a_measured_table(
    oil: float, water: float, state: float, flux: float, slope: float, mean: float,
    published: tuple[float, float, float] | None,
) -> None:  # fmt: skip
    """L. P. Dake, Fundamentals of Reservoir Engineering 1978, exercise 10.1, from memory; the rest computed.

    As a polygon the table is exact. The book's graphical answers (from memory; front saturation, flux,
    mean) are met to their two digits in the second and third case; in the first its tangent falls between
    two rows.
    """
    s, krw, kro = DAKE.T
    fractional = np.zeros(len(s))
    fractional[1:] = 1.0 / (1.0 + kro[1:] / krw[1:] * water / oil)
    law = wk.table_law(s, fractional)
    history = wk.track(law, wk.Profile([0.0], [0.8, 0.2]), 1.0)
    front = history.fronts[history.alive(1.0)][-1]
    assert front["left"] == state and front["right"] == 0.2
    assert front["speed"] == pytest.approx(slope, rel=1e-11)
    assert float(law.flux(np.array([state]))[0]) == pytest.approx(flux, rel=1e-11)
    at_breakthrough = history.averages([0.0, 1.0], 1.0 / slope, fans="steps")[0, 0]
    assert at_breakthrough == pytest.approx(mean, rel=1e-10)
    assert history.error_bound(1.0) == 0.0
    if published:
        assert (front["left"], flux, at_breakthrough) == pytest.approx(published, abs=0.01)


@pytest.mark.parametrize("until", [0.4, 0.449489742783])
def test_pulse_in_an_s_shaped_law(until: float) -> None:
    """u = 1 on [-1/2, 0]: shocks from both edges, each behind a fan.

    f = 4u^2 / (4u^2 + (1-u)^2), t = .4: shocks at .647213595 and -.076393202, states 1/sqrt 5 and .105572809
    (a usual test of sharp schemes, from memory). M = 1/2: the left shock is at 0 at t = sqrt 6 - 2 (a
    textbook example, from memory). All figures computed.
    """
    m = 0.25 if until == 0.4 else 0.5
    levels = 2049
    h = 1.0 / (levels - 1)
    history = wk.track(wk.corey(viscosity_ratio=m), wk.Profile([-0.5, 0.0], [0.0, 1.0, 0.0]), until, levels=levels)
    left, right = shocks(history, until)[[0, -1]]
    if m == 0.25:
        assert [place(left, until), place(right, until)] == pytest.approx([-0.076393202, 0.647213595], abs=5 * h * h)
        assert [left["left"], right["left"]] == pytest.approx([0.105572809, 1.0 / math.sqrt(5.0)], abs=h)
        assert [left["speed"], right["speed"]] == pytest.approx([1.05901699437, 1.61803398875], abs=10 * h * h)
    else:
        assert [left["left"], right["left"]] == pytest.approx([0.183503419072, 0.57735026919], abs=h)
        assert [left["speed"], right["speed"]] == pytest.approx([1.1123724357, 1.36602540378], abs=10 * h * h)
        assert place(left, until) == pytest.approx(0.0, abs=5 * h * h)


# Sorption in a column (Langmuir; Rhee, Aris and Amundson, from memory)


def langmuir() -> wk.Law:
    """n = 5 c / (1 + c), phase ratio .5, v .5, place and time exchanged: state c, "flux" (c + n / 2) / v."""
    return wk.Law(lambda c: (c + 2.5 * c / (1.0 + c)) / 0.5, (0.0, 1.0), inflections=())


def test_feed_and_elution_of_one_sorbed_component() -> None:
    """Column of 10: the feed front c = 1 leaves at 45; elution lasts from 32.5 to 70. Computed, exact."""
    feed = wk.track(langmuir(), wk.Profile([0.0], [0.0, 1.0]), 10.0, levels=129)
    assert feed.at(10.0).edges == pytest.approx([45.0], rel=1e-15)
    levels = 4001
    elution = wk.track(langmuir(), wk.Profile([0.0], [1.0, 0.0]), 10.0, levels=levels)
    ends = elution.at(10.0).edges[[0, -1]]
    assert ends == pytest.approx([32.5, 70.0], abs=50.0 / (levels - 1))  # f''(0) h / 2 times 10


def test_pulse_of_one_sorbed_component() -> None:
    """A feed of 6: the fan meets the shock at z 4.8, t 21.6; it leaves at 47.3589838486 with c .530011547175.

    The tail ends at 76. Computed (closed form and ODE agree).
    """
    levels = 4001
    h = 1.0 / (levels - 1)
    history = wk.track(langmuir(), wk.Profile([0.0, 6.0], [0.0, 1.0, 0.0]), 10.0, levels=levels)
    first = history.collisions[0]
    assert (first["t"], first["x"]) == (pytest.approx(4.8, abs=6 * h), pytest.approx(21.6, abs=30 * h))
    front = strongest(history, 10.0)
    assert place(front, 10.0) == pytest.approx(47.3589838486, abs=100 * h * h)
    assert front["right"] == pytest.approx(0.530011547175, abs=h)
    assert history.at(10.0).edges[-1] == pytest.approx(76.0, abs=50 * h)


# Settling: Kynch 1952, Richardson and Zaki 1954


def test_settling_of_spheres_to_a_bed() -> None:
    """Interface .39 mm/s (3.897e-4), seen: M. Rhodes, Introduction to Particle Technology, exercise 3.1.

    Bed rising at .26 mm/s from memory; 3.89727565559e-4 and 2.59818377039e-4 computed. Spheres of 100 um and
    1200 kg/m3 in water: 1.1 mm/s alone, exponent 4.65, from .2 to a bed of .5 (flux 0 there).
    """
    phi = np.concatenate([np.arange(0, 50) / 100.0, [0.5]])
    flux = 1.1e-3 * phi * (1.0 - phi) ** 4.65
    flux[-1] = 0.0
    history = wk.track(wk.table_law(phi, flux), wk.Profile([0.0, 1.0], [0.0, 0.2, 0.5]), 2000.0)
    interface, bed = history.fronts[history.alive(100.0)]
    assert interface["speed"] == pytest.approx(3.89727565559e-4, rel=1e-11)
    assert interface["speed"] == pytest.approx(3.897e-4, abs=0.0005e-4)
    assert bed["speed"] == pytest.approx(-2.59818377039e-4, rel=1e-11)
    assert bed["speed"] == pytest.approx(-0.26e-3, abs=0.005e-3)
    assert history.at(2000.0).edges == pytest.approx([0.6], rel=1e-14)  # a bed of .4 holds what .2 held in 1


def test_settling_with_a_compound_wave() -> None:
    """Cubic flux phi (1 - phi)^2 from .2 (G. J. Kynch, Trans. Faraday Soc. 48 (1952) 166: the theory).

    Computed, rational: shock to .9 rising at .17, top falling at .64, meeting at t = 1/.81 at height
    .20987654321; later the surface passes the height .20099989795 at t = 10.2030405061.
    """
    levels = 4001
    h = 1.0 / (levels - 1)
    law = wk.Law(lambda p: p * (1.0 - p) ** 2, (0.0, 1.0), inflections=(2.0 / 3.0,))
    history = wk.track(law, wk.Profile([0.0, 1.0], [0.0, 0.2, 1.0]), 10.2030405061, levels=levels)
    top, compound = shocks(history, 1.0)[[0, 1]]
    assert top["speed"] == pytest.approx(0.64, rel=1e-14)
    assert compound["speed"] == pytest.approx(-0.17, abs=2 * h * h)
    assert compound["right"] == pytest.approx(0.9, abs=h)
    first = history.collisions[0]
    assert first["t"] == pytest.approx(1.0 / 0.81, abs=4 * h * h)
    assert 1.0 - first["x"] == pytest.approx(0.20987654321, abs=4 * h * h)
    assert 1.0 - history.at(history.until).edges[0] == pytest.approx(0.20099989795, abs=1e-7)


# Traffic: Lighthill and Whitham 1955, Richards 1956


def road(*points: tuple[float, float]) -> wk.Law:
    """Return the polygon through densities (vehicles/mile) and flows (vehicles/hour)."""
    k, q = np.array(points).T
    return wk.table_law(k, q)


def test_platoon_behind_a_truck() -> None:
    """Rear 2.5 mph, 1.58 mi when the truck leaves, front -6.0 mph, gone in .186 h (11.2 min).

    Seen: CIVL 262 tutorial quiz 4, 2009 (coursehero 6746960). 1000 veh/h at 50 mph; truck at 12 mph for 2 mi,
    platoon at 100 veh/mi; discharge 1500 veh/h at 30 mph. Computed: 19/12 mi, 19/102 h, at 15/17 mi.
    """
    law = road((0, 0), (20, 1000), (50, 1500), (100, 1200))
    rear = wk.track(law, wk.Profile([0.0], [20.0, 100.0]), 1.0 / 6.0)
    end = rear.at(1.0 / 6.0).edges[0]
    assert rear.fronts["speed"].tolist() == [2.5]
    assert 2.0 - end == pytest.approx(19.0 / 12.0, rel=1e-14)
    assert 2.0 - end == pytest.approx(1.58, abs=0.005)
    free = wk.track(law, wk.Profile([end, 2.0], [20.0, 100.0, 0.0]), 0.5)
    assert free.fronts["speed"][1] == -6.0
    first = free.collisions[0]
    assert first["t"] == pytest.approx(19.0 / 102.0, rel=1e-14)
    assert first["x"] == pytest.approx(15.0 / 17.0, rel=1e-14)
    assert 60.0 * first["t"] == pytest.approx(11.2, abs=0.05)


def test_queue_behind_a_slow_truck() -> None:
    """-6.7 mph, growing at 26.7 mph, 3.3 mi.

    Seen: scribd 38631680 (330 veh there is the rounding of 3.3 mi).
    """
    law = road((0, 0), (25, 1500), (100, 1000))
    history = wk.track(law, wk.Profile([0.0], [25.0, 100.0]), 2.5 / 20.0)
    queue = 2.5 - history.at(2.5 / 20.0).edges[0]
    assert history.fronts["speed"][0] == pytest.approx(-20.0 / 3.0, rel=1e-14)
    assert history.fronts["speed"][0] == pytest.approx(-6.7, abs=0.05)
    assert 20.0 - history.fronts["speed"][0] == pytest.approx(26.7, abs=0.05)
    assert queue == pytest.approx(10.0 / 3.0, rel=1e-14) and queue == pytest.approx(3.3, abs=0.05)


def test_closure_of_a_motorway() -> None:
    """Closed: -15.7895 mph, 3.95 mi in 15 min; partly open: -7.2 mph, 4.8 mi in 40 min.

    Seen: an I-90 problem (homeworksource). 3000 veh/h at 50 veh/mi, jam 240 veh/mi, then 2100 veh/h at 175.
    """
    law = road((0, 0), (50, 3000), (175, 2100), (240, 0))
    closed = wk.track(law, wk.Profile([0.0], [50.0, 240.0]), 0.25)
    assert closed.fronts["speed"].tolist() == [pytest.approx(-15.7895, abs=5e-5)]
    assert closed.at(0.25).edges.tolist() == [pytest.approx(-3.95, abs=0.005)]
    partly = wk.track(law, wk.Profile([0.0], [50.0, 175.0]), 2.0 / 3.0)
    assert partly.fronts["speed"].tolist() == [pytest.approx(-7.2, rel=1e-14)]
    assert partly.at(2.0 / 3.0).edges.tolist() == [pytest.approx(-4.8, rel=1e-14)]


@pytest.mark.parametrize(
    "saturation, discharge, farthest, clear",
    [(1950.0, -28.2608695652, 5643.05, 136.143), (2000.0, -28.9855072464, 5068.06282723, 119.214659686)],
)
def test_signal_queue(saturation: float, discharge: float, farthest: float, clear: float) -> None:
    """40 mph, 44 veh/mi, jam 120, red 30 s, 51 veh/mi at saturation: queue of 1018.947 ft at the end of red.

    Data seen (askfilo, of the Garber and Hoel type; the saturation flow is misprinted there); figures
    computed.
    """
    mile, red = 5280.0, 30.0 / 3600.0
    law = road((0, 0), (44, 1760), (51, saturation), (120, 0))
    end = wk.track(law, wk.Profile([0.0], [44.0, 120.0]), red).at(red).edges[0]
    assert -mile * end == pytest.approx(1018.94736842, rel=1e-11)
    green = wk.track(law, wk.Profile([end, 0.0], [44.0, 120.0, 0.0]), 0.1)
    assert green.fronts["speed"][:2] == pytest.approx([-23.1578947368, discharge], rel=1e-11)
    first = green.collisions[0]
    assert -mile * first["x"] == pytest.approx(farthest, rel=2e-6)
    assert 3600.0 * first["t"] == pytest.approx(clear, rel=5e-6)


@pytest.mark.parametrize("free_speed, jam, flow", [(60.0, 180.0, 2700.0), (80.0, 100.0, 2000.0)])
def test_capacity_of_a_linear_road(free_speed: float, jam: float, flow: float) -> None:
    """Most flow at half the jam density. Seen: Univ. Idaho traffic manual (2700 veh/h at 90 veh/mi).

    The discharge of a queue passes the stop line with just that flow: Greenshields 1935.
    """
    law = wk.greenshields(free_speed=free_speed, jam_density=jam)
    history = wk.track(law, wk.Profile([0.0], [jam, 0.0]), 1.0, levels=257)
    at_line = float(history.at(1.0)(0.0))
    assert at_line == pytest.approx(jam / 2.0, abs=jam / 256)
    assert float(law.flux(np.array([jam / 2.0]))[0]) == pytest.approx(flow, rel=1e-14)
    passed = history.averages([0.0, 1.01 * free_speed], 1.0, fans="steps")[0, 0] * 1.01 * free_speed
    assert passed == pytest.approx(flow, abs=history.cumulative_bound(1.0))


def test_red_light_on_a_triangular_road() -> None:
    """60 km/h, jam 150/km, 1800 veh/h, arrivals 600 veh/h, red 40 s. Computed, exact.

    End of queue 4.28571428571 km/h back, farthest 66.6666666667 m at 56 s, past the stop line at 60 s.
    """
    law = wk.triangular(free_speed=60.0, jam_density=150.0, capacity=1800.0)
    red = 40.0 / 3600.0
    end = wk.track(law, wk.Profile([0.0], [10.0, 150.0]), red).at(red).edges[0]
    green = wk.track(law, wk.Profile([end, 0.0], [10.0, 150.0, 0.0]), 40.0 / 3600.0)
    assert green.fronts["speed"][:2] == pytest.approx([-4.28571428571, -15.0], rel=1e-11)
    first = green.collisions[0]
    assert 1000.0 * first["x"] == pytest.approx(-66.6666666667, rel=1e-11)
    assert 3600.0 * first["t"] + 40.0 == pytest.approx(56.0, rel=1e-13)
    assert green.at(20.0 / 3600.0).edges[0] == pytest.approx(0.0, abs=1e-14)


def test_red_light_on_a_linear_road() -> None:
    """20 m/s, jam .125/m, arrivals .025/m, red 40 s. Computed (closed form and ODE agree).

    The fan meets the end of the queue at t 50, x -200; farthest -213.333333333 at 57.7777777778; past the
    stop line at 111.111111111.
    """
    law = wk.greenshields(free_speed=20.0, jam_density=0.125)
    levels = 2001
    step = 40.0 / (levels - 1)  # of speed between neighbouring fronts of the fan
    start = wk.Profile([-160.0, 0.0], [0.025, 0.125, 0.0])
    history = wk.track(law, start, 80.0, levels=levels)
    hits = history.collisions[history.collisions["left"] == 0.025]
    assert hits["t"][0] + 40.0 == pytest.approx(50.0, abs=step)
    assert hits["x"][0] == pytest.approx(-200.0, abs=10 * step)
    farthest = int(np.argmin(hits["x"]))
    assert hits["x"][farthest] == pytest.approx(-213.333333333, abs=0.5 * step**2)
    assert hits["t"][farthest] + 40.0 == pytest.approx(57.7777777778, abs=0.2)  # the least is flat
    later = int(np.searchsorted(hits["x"][farthest:], 0.0)) + farthest
    (t0, t1), (x0, x1) = hits["t"][later - 1 : later + 1], hits["x"][later - 1 : later + 1]
    crossing = t0 - x0 * (t1 - t0) / (x1 - x0)
    assert crossing + 40.0 == pytest.approx(111.111111111, abs=step**2)


# Kinematic waves


@pytest.mark.parametrize("exponent, ratio", [(5.0 / 3.0, 5.0 / 3.0), (1.5, 1.5), (3.0, 3.0)])
def test_small_wave_outruns_the_water(exponent: float, ratio: float) -> None:
    """Celerity over velocity: 5/3 wide Manning, 3/2 wide Chezy, 3 laminar.

    Seen: V. M. Ponce, Engineering Hydrology, kinematic wave pages (jon.sdsu.edu).
    """
    law = wk.Law(lambda h: 2.0 * h**exponent, (0.0, 3.0), inflections=())
    history = wk.track(law, wk.Profile([0.0], [1.0 + 1e-6, 1.0]), 1.0)
    assert history.fronts["speed"][0] / 2.0 == pytest.approx(ratio, rel=2e-6)


def test_recession_after_an_impulse() -> None:
    """q = alpha (L / (alpha m t))^(m / (m - 1)). Seen: J. A.

    Ramirez, Colorado State, kinematic wave notes.
    """
    m, levels = 5.0 / 3.0, 1025
    h = 1.0 / (levels - 1)
    law = wk.Law(lambda d: d**m, (0.0, 1.0), inflections=())
    history = wk.track(law, wk.Profile([0.0, 1.0], [0.0, 1.0, 0.0]), 20.0, levels=levels)
    for t in (5.0, 10.0, 20.0):
        depth = float(history.at(t)(2.0))
        expected = (2.0 / (m * t)) ** (m / (m - 1.0))
        assert depth**m == pytest.approx(expected, abs=m * h)
