"""Facts of single laws against figures from outside, each with its source beside it.

"Seen" means that a page or excerpt with the figure was read; "from memory" that it was not; "computed" that the
figure was worked out apart from the engine (30 digits), from the published formula.
"""

from __future__ import annotations

import math

import numpy as np
import pytest
import wavekin as wk
from scipy.optimize import brentq
from wavekin.laws import NAMED, Law

FOOT = 0.3048


def at(function: object, state: float) -> float:
    return float(np.asarray(function(np.array([state])))[0])  # type: ignore[operator]


def capacity(law: Law, low: float, high: float) -> tuple[float, float]:
    """Return the state and the flux where f' vanishes."""
    top = brentq(lambda k: at(law.derivative, k), low, high, xtol=1e-14, rtol=1e-14)
    return top, at(law.flux, top)


def tangent(law: Law, foot: float, low: float, high: float) -> float:
    """Return the state whose tangent passes through the foot: the front of a displacement (Welge 1952)."""

    def miss(s: float) -> float:
        return at(law.derivative, s) * (s - foot) - (at(law.flux, s) - at(law.flux, foot))

    return float(brentq(miss, low, high, xtol=1e-15, rtol=1e-14))


# Two-phase displacement


@pytest.mark.parametrize("m", [1 / 3, 9 / 16, 1.0, 0.5, 0.2, 2.0])
def test_welge_tangent_of_quadratic_relative_permeabilities(m: float) -> None:
    """s* = sqrt(M / (1 + M)), speed (1 + sqrt(1 + 1/M)) / 2.

    Construction: Welge 1952; seen in Fanchi, Principles of Applied Reservoir Simulation, section 5.2. Closed form:
    computed.
    """
    law = wk.corey(viscosity_ratio=m)
    s = tangent(law, 0.0, law.inflections[0], 1.0 - 1e-9)
    assert s == pytest.approx(math.sqrt(m / (1.0 + m)), rel=1e-12)
    assert at(law.derivative, s) == pytest.approx(0.5 * (1.0 + math.sqrt(1.0 + 1.0 / m)), rel=1e-12)


@pytest.mark.parametrize(
    "parameters, figures",
    [
        # Data seen: petrosmartacademy.com 2024 (answers not visible); figures computed.
        (
            {
                "viscosity_ratio": 0.8 / 5.0,
                "exponent_displacing": 2.0,
                "exponent_displaced": 3.0,
                "endpoint_ratio": 0.85 / 0.40,
                "connate": 0.2,
                "residual": 0.25,
            },
            (0.444715220485, 0.772974400182, 3.1586690793, 0.516589036361),
        ),
        # Computed.
        (
            {
                "viscosity_ratio": 1.0 / 5.0,
                "exponent_displacing": 4.0,
                "exponent_displaced": 2.0,
                "endpoint_ratio": 0.8 / 0.3,
                "connate": 0.2,
                "residual": 0.2,
            },
            (0.646724656732, 0.898260745797, 1.0 / 0.497321806416, 0.697321806416),
        ),
    ],
)
def test_front_of_corey_displacements_in_true_saturations(parameters: dict, figures: tuple) -> None:
    """Front saturation, fractional flow, slope and mean saturation behind it (Welge 1952)."""
    law = wk.corey(**parameters)
    s = tangent(law, 0.2, law.inflections[0], law.range[1] - 1e-9)
    speed = at(law.derivative, s)
    mean = s + (1.0 - at(law.flux, s)) / speed
    assert (s, at(law.flux, s), speed, mean) == pytest.approx(figures, rel=2e-11)


def test_outlet_after_breakthrough() -> None:
    """M = 1/2, outlet saturation 0.7: f, pore volumes injected, mean saturation. Computed; Welge 1952."""
    law = wk.corey(viscosity_ratio=0.5)
    volumes = 1.0 / at(law.derivative, 0.7)
    flow = at(law.flux, 0.7)
    assert (flow, volumes, 0.7 + volumes * (1.0 - flow)) == pytest.approx(
        (0.915887850467, 1.36297619048, 0.814642857143), rel=1e-11
    )


# Traffic


@pytest.mark.parametrize(
    "free_speed, jam, top, flow",
    [
        (60.0, 180.0, 90.0, 2700.0),  # seen: Univ. Idaho traffic lab manual (mph, veh/mi)
        (80.0, 100.0, 50.0, 2000.0),  # seen there too (km/h)
        (46.0, 46.0 / 0.236, 97.5, 2242.5),  # v = 46 - .236 k: Greenshields 1935, from memory; his jam rounded to 195
    ],
)
def test_capacity_of_greenshields_road(free_speed: float, jam: float, top: float, flow: float) -> None:
    law = wk.greenshields(free_speed=free_speed, jam_density=jam)
    density, most = capacity(law, 0.0, jam)
    assert density == pytest.approx(top, rel=5e-4 if free_speed == 46.0 else 1e-13)
    assert most == pytest.approx(flow, rel=5e-4 if free_speed == 46.0 else 1e-13)
    assert most / density == pytest.approx(free_speed / 2.0, rel=1e-13)


@pytest.mark.parametrize(
    "speed, jam, top, flow",
    [
        (17.2, 228.0, 83.8765125871, 1442.6760165),  # Lincoln Tunnel, Greenberg 1959: law from memory, figures computed
        (18.2, 220.0, 80.9334770577, 1472.98928245),  # law seen: Univ. of the Cordilleras CE 425; figures computed
    ],
)
def test_capacity_of_greenbergs_road(speed: float, jam: float, top: float, flow: float) -> None:
    law = NAMED["greenberg"](optimum_speed=speed, jam_density=jam)
    assert capacity(law, 1.0, jam) == pytest.approx((top, flow), rel=1e-11)


def test_capacities_of_underwoods_and_smulders_roads() -> None:
    """v_f k_m / e at k_m (Underwood 1961), v_f k_c (1 - k_c / k_j) at k_c (Smulders 1990). Formulas from memory."""
    law = NAMED["underwood"](free_speed=90.0, optimum_density=30.0, largest_density=140.0)
    assert capacity(law, 1.0, 59.0) == pytest.approx((30.0, 90.0 * 30.0 / math.e), rel=1e-13)
    kinked = NAMED["smulders"](free_speed=90.0, jam_density=140.0, critical_density=28.0)
    k = np.linspace(0.0, 140.0, 14001)
    assert k[int(np.argmax(kinked.flux(k)))] == pytest.approx(28.0)
    assert at(kinked.flux, 28.0) == pytest.approx(90.0 * 28.0 * 0.8, rel=1e-14)


def test_speeds_of_a_triangular_road() -> None:
    """60 km/h, 150 veh/km, 1800 veh/h: queues dissolve at 15 km/h, 600 veh/h queue at 4.28571428571 km/h. Computed."""
    law = wk.triangular(free_speed=60.0, jam_density=150.0, capacity=1800.0)
    assert float(law.speed(30.0, 150.0)) == pytest.approx(-15.0, rel=1e-13)
    assert float(law.speed(10.0, 150.0)) == pytest.approx(-4.28571428571, rel=1e-11)


# Settling


def test_interface_of_settling_spheres() -> None:
    """Spheres at 0.2, 1.1 mm/s, n 4.65: clear interface 0.39 mm/s (3.897e-4 m/s).

    Seen: M. Rhodes, Introduction to Particle Technology, exercise 3.1 (solutions). More digits computed; rise of
    a bed of 0.5 that lets nothing through 0.26 mm/s from memory.
    """
    law = wk.richardson_zaki(terminal_velocity=1.1e-3)
    assert float(law.speed(0.0, 0.2)) == pytest.approx(3.897e-4, abs=5e-8)
    assert float(law.speed(0.0, 0.2)) == pytest.approx(3.89727565559e-4, rel=1e-11)
    assert at(law.flux, 0.2) / (0.5 - 0.2) == pytest.approx(2.59818377039e-4, rel=1e-11)


def test_single_particle_from_a_hindered_one_and_back() -> None:
    """4.44 um/s at 0.30 with n 4.5 means 22.1 um/s alone. Seen: curioustab; digits computed.

    1.7 of 17 mm/s with n 4.5: at 0.400515749681. Data seen: examveda; figure computed.
    """
    alone = 22.1025198894e-6
    hindered = wk.richardson_zaki(terminal_velocity=alone, exponent=4.5)
    assert float(hindered.speed(0.0, 0.3)) == pytest.approx(4.44e-6, rel=1e-11)
    law = wk.richardson_zaki(terminal_velocity=17e-3, exponent=4.5)
    share = brentq(lambda p: at(law.flux, p) / p - 1.7e-3, 0.1, 0.9, xtol=1e-14)
    assert share == pytest.approx(0.400515749681, rel=1e-11)


def test_tangent_of_a_concentrated_bed() -> None:
    """phi (1 - phi)^4.65 up to 0.5: the wave to the bed is compound, tangent at .454238853221. Computed."""
    law = wk.richardson_zaki(terminal_velocity=1.0)
    assert tangent(law, 0.2, law.inflections[0], 0.9) == pytest.approx(0.454238853221, rel=1e-11)


def test_kynch_cubic() -> None:
    """phi (1 - phi)^2 from 0.2: compound wave to 1 - phi0/2 = 0.9 rising at 0.17, surface falling at 0.64.

    Kynch 1952 (method; opening pages seen); figures computed, rational.
    """
    law = wk.richardson_zaki(terminal_velocity=1.0, exponent=2.0)
    assert tangent(law, 0.2, law.inflections[0], 1.0) == pytest.approx(0.9, rel=1e-12)
    assert at(law.derivative, 0.9) == pytest.approx(-0.17, rel=1e-12)
    assert float(law.speed(0.0, 0.2)) == pytest.approx(0.64, rel=1e-14)


def test_vesilind_thickener() -> None:
    """v = 8 exp(-.45 C): most flux at 1/r, inflection at 2/r, jump 3 to 10, limiting load with 0.5 m/h. Computed."""
    law = NAMED["vesilind"](velocity=8.0, decay=0.45, maximum=20.0)
    assert capacity(law, 0.5, 4.0) == pytest.approx((2.22222222222, 6.54007895416), rel=1e-11)
    assert law.inflections == pytest.approx((4.44444444444,), rel=1e-11)
    assert float(law.speed(3.0, 10.0)) == pytest.approx(-0.761863790349, rel=1e-11)
    fed = NAMED["vesilind"](velocity=8.0, decay=0.45, maximum=20.0, underflow=0.5)
    limiting, load = capacity(fed, 4.5, 15.0)
    assert (limiting, load, load / 0.5) == pytest.approx((8.45207492182, 5.7334879273, 11.4669758546), rel=1e-10)


# Sorption


def test_one_langmuir_component() -> None:
    """n = 5c/(1+c), F .5, L 10, v .5, feed 1: shock leaves at 45, elution from 32.5 to 70. Computed, exact."""
    law = wk.langmuir(velocity=0.5, phase_ratio=0.5, capacity=5.0, affinity=1.0, largest=1.0)
    assert law.range[1] == pytest.approx(2.25, rel=1e-14)
    assert 10.0 / float(law.speed(0.0, law.range[1])) == pytest.approx(45.0, rel=1e-13)
    assert 10.0 / at(law.derivative, law.range[1]) == pytest.approx(32.5, rel=1e-13)
    assert 10.0 / at(law.derivative, 0.0) == pytest.approx(70.0, rel=1e-13)


def test_freundlich_shock_leaves_when_the_column_is_full() -> None:
    """A feed c leaves after (L / v) (1 + F K c^(p-1)): balance of mass (Rhee, Aris and Amundson 1986, from memory)."""
    law = NAMED["freundlich"](velocity=0.5, phase_ratio=0.5, coefficient=2.0, exponent=0.6, largest=1.7)
    leaves = 10.0 / float(law.speed(0.0, law.range[1]))
    assert leaves == pytest.approx(20.0 * (1.0 + 0.5 * 2.0 * 1.7 ** (0.6 - 1.0)), rel=1e-13)


# Kinematic waves


@pytest.mark.parametrize(
    "law, ratio",
    [
        (wk.manning(slope=1e-3, roughness=0.03), 5 / 3),
        (wk.chezy(slope=1e-3, coefficient=50.0), 3 / 2),
        (NAMED["laminar"](slope=1e-2), 3.0),
        (NAMED["trapezoidal"](slope=1e-3, roughness=0.03, bottom_width=0.0, side_slope=2.0), 4 / 3),
    ],
    ids=["manning", "chezy", "laminar", "triangular section"],
)
def test_celerity_over_velocity(law: Law, ratio: float) -> None:
    """5/3 wide Manning, 3/2 wide Chezy, 3 laminar. Seen: V. M. Ponce, Engineering Hydrology (jon.sdsu.edu).

    4/3 for a triangular section: computed.
    """
    state = 0.37 * law.range[1]
    assert at(law.derivative, state) / (at(law.flux, state) / state) == pytest.approx(ratio, rel=1e-13)


@pytest.mark.parametrize("side_slope", [0.0, 1.5])
def test_celerity_of_a_prismatic_channel(side_slope: float) -> None:
    """c = 5V/3 - (2/3) V R dP/dA. Seen: CE 374K notes (scribd 426418682)."""
    b, h = 4.0, 1.3
    law = NAMED["trapezoidal"](slope=1e-3, roughness=0.03, bottom_width=b, side_slope=side_slope)
    bank = math.sqrt(1.0 + side_slope**2)
    area, perimeter, surface = (b + side_slope * h) * h, b + 2.0 * h * bank, b + 2.0 * side_slope * h
    velocity = math.sqrt(1e-3) / 0.03 * (area / perimeter) ** (2.0 / 3.0)
    assert at(law.flux, area) == pytest.approx(velocity * area, rel=1e-13)
    wanted = 5.0 * velocity / 3.0 - 2.0 / 3.0 * velocity * area / perimeter * 2.0 * bank / surface
    assert at(law.derivative, area) == pytest.approx(wanted, rel=1e-13)


def test_plane_of_overland_flow() -> None:
    """50 mm/h on 100 m, n .02, S .01: alpha 5; equilibrium at 529.116123733 s, depth .00734883505185 m. Computed.

    Formulas seen: J. A. Ramirez, Colorado State, kinematic wave notes.
    """
    law = wk.manning(slope=0.01, roughness=0.02)
    assert at(law.flux, 1.0) == pytest.approx(5.0, rel=1e-14)
    rain = 0.05 / 3600.0
    depth = brentq(lambda h: at(law.flux, h) - 100.0 * rain, 1e-6, 1.0, xtol=1e-16, rtol=1e-14)
    assert depth == pytest.approx(0.00734883505185, rel=1e-11)
    assert depth / rain == pytest.approx(529.116123733, rel=1e-11)
    assert at(law.flux, 300.0 * rain) == pytest.approx(0.000539450087839, rel=1e-11)


@pytest.mark.parametrize("flow, minutes", [(2000.0, 25.039), (3000.0, 21.290), (4000.0, 18.976), (6000.0, 16.135)])
def test_travel_times_of_a_wide_channel(flow: float, minutes: float) -> None:
    """Channel 200 ft wide, 15,000 ft long, slope .01, n .035.

    Chow, Maidment and Mays, Applied Hydrology 1988, example 9.4.1, from memory; digits computed. The book's wetted
    perimeter is the width, and its factor 1.49 stands for 1 / 0.3048^(1/3) = 1.4859.
    """
    law = wk.manning(slope=0.01, roughness=0.035 * FOOT ** (-1.0 / 3.0) / 1.49)
    unit_flow = flow / 200.0 * FOOT**2
    depth = brentq(lambda h: at(law.flux, h) - unit_flow, 1e-3, 10.0, xtol=1e-15)
    assert 15000.0 * FOOT / at(law.derivative, depth) / 60.0 == pytest.approx(minutes, abs=5.01e-4)


def test_drainage_exponent_of_brooks_and_corey() -> None:
    """K falls with the power 3 + 2 / lambda of the saturation: Brooks and Corey 1964, from memory."""
    law = NAMED["brooks_corey"](conductivity=0.6, pore_index=2.0, saturated=0.4, residual=0.1)
    assert at(law.flux, 0.25) == pytest.approx(0.6 * 0.5**4, rel=1e-13)
    assert at(law.flux, 0.4) == 0.6
