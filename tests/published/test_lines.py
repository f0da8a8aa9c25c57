"""Bars, tubes and strings at their default mesh against published frequencies."""

from __future__ import annotations

import numpy as np
import pytest

from tests.published.scenes import LINE, distinct, of_kind, solve, worst

STEEL = "material = {density = 7850, young = 200e9, poisson = 0.3, loss = 1e-3}"
# A slender bar: shear and rotary inertia stay below 1e-4 in its first five modes.
SLENDER = f'shape = "bar"\nlength = 2.0\nwidth = 0.012\nheight = 0.008\n{STEEL}\n'
SLENDER_SCALE = np.sqrt(200e9 * 0.008**2 / 12 / 7850) / (2 * np.pi * 2.0**2)
# Below this the slenderness correction of the five first modes is larger than the table's error.
SHEAR_CORRECTION = 1.5e-3


def hold(*ends: tuple[str, str]) -> str:
    """Supports at named ends."""
    return "support = [" + ", ".join(f'{{where = "{where}", hold = "{how}"}}' for where, how in ends) + "]"


# Roots beta L: Rayleigh, Theory of Sound vol. 1, ch. VIII; Blevins, Formulas for Natural Frequency and Mode
# Shape (1979), Table 8-1. Recomputed from cos x cosh x = +-1, tan x = +-tanh x.
ROOTS = {
    "free": ("", [4.730040744863, 7.853204624096, 10.995607838, 14.13716549126, 17.2787596574]),
    "clamped-clamped": (
        hold(("left", "clamped"), ("right", "clamped")),
        [4.730040744863, 7.853204624096, 10.995607838, 14.13716549126, 17.2787596574],
    ),
    "clamped-free": (
        hold(("left", "clamped")),
        [1.875104068712, 4.694091132974, 7.854757438238, 10.99554073488, 14.13716839105],
    ),
    "pinned-pinned": (hold(("left", "pinned"), ("right", "pinned")), [k * np.pi for k in range(1, 6)]),
    "guided-pinned": (
        hold(("left", "guided"), ("right", "pinned")),
        [(2 * k - 1) * np.pi / 2 for k in range(1, 6)],
    ),
    "clamped-guided": (
        hold(("left", "clamped"), ("right", "guided")),
        [2.365020372431, 5.497803919001, 8.6393798287, 11.78097245102, 14.92256510455],
    ),
}


@pytest.mark.parametrize("case", ROOTS)
def test_slender_bars_follow_the_classical_roots(case):
    support, roots = ROOTS[case]

    hz = of_kind(solve(SLENDER + support), LINE["up"])

    assert worst(hz, [root**2 * SLENDER_SCALE for root in roots]) < SHEAR_CORRECTION


BARS = {
    # Huang, J. Appl. Mech. 28 (1961) 579: free-free Timoshenko bar, shear coefficient 5/6, recomputed.
    "flat bar": (
        f'shape = "bar"\nlength = 0.3\nwidth = 0.02\nheight = 0.005\n{STEEL}',
        "up",
        [287.955871, 792.257445, 1548.83307, 2550.8946, 3793.295],
        1e-3,
    ),
    # The same at a length of five heights; Cowper's coefficient (used here) lies 0.3 % above 5/6 and nearer to 3D.
    "stubby bar": (
        f'shape = "bar"\nlength = 0.1\nwidth = 0.02\nheight = 0.02\n{STEEL}',
        "up",
        [9182.8513, 21462.7732, 35696.2584, 50256.3053],
        5e-3,
    ),
    # Stretching of a thin rod, n c/(2 L) with c = sqrt(E/rho); classical.
    "rod, free": (
        f'shape = "bar"\nlength = 0.5\ndiameter = 0.01\n{STEEL}',
        "along",
        [5047.544651, 10095.0893, 15142.63395],
        1e-6,
    ),
    "rod, fixed at one end": (
        f'shape = "bar"\nlength = 0.5\ndiameter = 0.01\n{STEEL}\n' + hold(("left", "clamped")),
        "along",
        [2523.772326, 7571.316977, 12618.86163],
        1e-6,
    ),
    # Torsion of a round bar, n/(2 L) sqrt(G/rho), exact (Pochhammer); G = 80 GPa.
    "round bar, torsion": (
        'shape = "bar"\nlength = 0.3\ndiameter = 0.02\n'
        "material = {density = 7850, young = 208e9, poisson = 0.3, loss = 1e-3}",
        "twist",
        [5320.57923, 10641.15846, 15961.73769],
        1e-6,
    ),
    # Hung-chime tube; Timoshenko with Cowper's hollow-circle coefficient (1966), recomputed.
    "tube": (
        'shape = "tube"\nlength = 0.5\nouter = 0.025\nwall = 0.0015\n'
        "material = {density = 2700, young = 69e9, poisson = 0.33, loss = 1e-3}",
        "up",
        [590.54456, 1581.1334, 2978.2124, 4690.6758, 6639.9095],
        1e-3,
    ),
    # Double taper, clamped at the thick end, h and b in 4 to 1: Mabie & Rogers, JASA 51 (1972) 1771
    # (printed 23.289, 73.9, 165.23, 299.7, 478.1); recomputed by shooting. lambda (h1/L^2) sqrt(E/12 rho)/(2 pi).
    "double taper": (
        f'shape = "bar"\nlength = 4.0\nprofile = [[0, 0.02, 0.02], [1, 0.005, 0.005]]\n{STEEL}\n'
        + hold(("left", "clamped")),
        "up",
        [
            root * 0.005 / 16.0 * np.sqrt(200e9 / 12 / 7850) / (2 * np.pi)
            for root in (23.292263, 73.918819, 165.28537, 299.77988, 478.18009)
        ],
        1e-3,
    ),
    # Complete wedge (height 0 at the free end): Kirchhoff 1879; Blevins (1979) Table 8-6; J1 I2 + I1 J2 = 0.
    "wedge": (
        f'shape = "bar"\nlength = 2.0\nwidth = 0.02\nprofile = [[0, 0.01], [1, 0]]\n{STEEL}\n'
        + hold(("left", "clamped")),
        "up",
        [
            root * 0.01 / 4.0 * np.sqrt(200e9 / 12 / 7850) / (2 * np.pi)
            for root in (5.315099424, 15.20716796, 30.01980915)
        ],
        1e-3,
    ),
    # Middle 30 % thinned so that the second mode is four times the first: exact step beam (transfer matrix).
    "undercut bar": (
        'shape = "bar"\nlength = 3.0\nwidth = 0.03\n'
        "profile = [[0, 0.012], [0.35, 0.012], [0.35, 0.005101329264], [0.65, 0.005101329264], [0.65, 0.012], "
        f"[1, 0.012]]\n{STEEL}",
        "up",
        [
            root * 0.012 / 9.0 * np.sqrt(200e9 / 12 / 7850) / (2 * np.pi)
            for root in (8.79325749, 35.17303, 98.8446472, 155.218542)
        ],
        1e-3,
    ),
}


@pytest.mark.parametrize("case", BARS)
def test_bars_meet_their_tables(case):
    body, kind, expected, rtol = BARS[case]

    assert worst(of_kind(solve(body), LINE[kind]), expected) < rtol


def test_deep_supported_beam():
    # Abbassian, Dawswell & Knowles, Selected Benchmarks for Natural Frequency Analysis, NAFEMS (1987), test FV5.
    # Bending recomputed with Cowper's coefficient; torsion with St-Venant's J (the 77.542 Hz of some lists uses
    # the polar moment of a round section).
    body = (
        'shape = "bar"\nlength = 10\nwidth = 2\nheight = 2\n'
        "material = {density = 8000, young = 200e9, poisson = 0.3, loss = 1e-3}\n"
        'support = [{where = "left", hold = {fix = ["x", "y", "z", "rx"]}}, '
        '{where = "right", hold = {fix = ["y", "z"]}}]'
    )
    found = solve(body)

    assert worst(of_kind(found, LINE["up"]), [42.644909, 148.14934, 283.46839]) < 1e-3
    assert worst(of_kind(found, LINE["twist"]), [71.196087, 213.58826]) < 1e-3
    assert worst(of_kind(found, LINE["along"]), [125.0]) < 1e-4


def test_ideal_string():
    # f = n/(2 L) sqrt(T/mu): Mersenne, Taylor. Thin enough that stiffness adds less than 1e-3.
    density = 0.0004 / (np.pi / 4 * 0.0003**2)
    body = (
        'shape = "string"\nlength = 0.65\ndiameter = "0.3 mm"\ntension = 80\n'
        f"material = {{density = {density!r}, young = 2e9, poisson = 0.3, loss = 1e-3}}"
    )

    expected = [344.0104581 * number for number in range(1, 13)]

    assert worst(distinct(solve(body).hz), expected) < 1e-3


def test_stiff_string():
    # H. Fletcher, JASA 36 (1964) 203: f_n = n f0 sqrt(1 + B n^2), B = pi^3 E d^4/(64 T L^2), pinned ends.
    body = f'shape = "string"\nlength = 0.62\ndiameter = "1 mm"\ntension = 650\n{STEEL}'
    stiffness, first = 0.0003877956241, 261.8515953

    found = distinct(solve(body).hz)

    expected = [n * first * np.sqrt(1 + stiffness * n * n) for n in range(1, 21)]
    # Shear and rotary inertia, which the formula leaves out, lower the 20th by 3e-5.
    assert worst(found, expected) < 5e-4


def test_nodes_of_a_free_bar_are_where_rayleigh_puts_them():
    # Rayleigh vol. 1; Fletcher & Rossing: x/L = 0.2242; 0.1321, 0.5; 0.0944, 0.3558.
    from resonate.body.build import build_body
    from resonate.modes.solve import solve_modes
    from resonate.scene.read import parse_scene

    scene = parse_scene(f'title = "n"\n[take]\nlength = "1 s"\n[[body]]\nname = "b"\n{SLENDER}')
    body = build_body(scene.bodies[0])
    modes = solve_modes(body)
    x = np.linspace(0.0, 1.0, 4001)
    rows = body.probe(np.stack((2.0 * x, 0 * x, 0 * x), axis=1))
    up = (rows @ modes.shape)[1::3]
    bending = [k for k in range(modes.count) if np.abs(up[:, k]).max() > 0.5 * np.abs(rows @ modes.shape[:, k]).max()]
    expected = [[0.2241575227], [0.1321079552, 0.5], [0.09444284312, 0.355803454]]
    for number, wanted in enumerate(expected):
        shape = up[:, bending[number]]
        zero = x[:-1][np.signbit(shape[1:]) != np.signbit(shape[:-1])]
        np.testing.assert_allclose(zero[: len(wanted)], wanted, atol=1e-3)


@pytest.mark.parametrize("thickness", [1e-4, 1e-5])
def test_fine_wires_keep_the_classical_roots(thickness):
    # Free-free roots as above; thickness/length is so small that rounding in the shear stiffness would drown them.
    body = f'shape = "bar"\nlength = 1.0\ndiameter = {thickness}\n{STEEL}'
    scale = np.sqrt(200e9 * thickness**2 / 16 / 7850) / (2 * np.pi)

    hz = distinct(of_kind(solve(body), LINE["up"], LINE["across"]))

    assert worst(hz, [root**2 * scale for root in ROOTS["free"][1]]) < 1e-3
