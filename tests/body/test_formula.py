"""Energies written by hand: modes against closed forms, derivatives against another library, and what is refused."""

from __future__ import annotations

import time

import numpy as np
import pytest
from numpy.testing import assert_allclose

from resonate.body.build import build_body
from resonate.body.tape import evaluate
from resonate.errors import BodyError, SceneError
from resonate.modes.solve import solve_modes
from resonate.scene.expression import CODES, FUNCTIONS, read_expression
from resonate.scene.read import parse_scene
from resonate.scene.refused import RefusedError

GRAVITY = 9.80665


def text(coordinates, kinetic, potential, *, position='["x", "y", "z"]', parameters="{}", mesh="{points = [[0, 0, 0]]}", more=""):
    return (
        '[take]\nlength = "1 s"\n[[body]]\nname = "thing"\nshape = "formula"\nmaterial = "brass"\n'
        f"coordinates = {coordinates}\nparameters = {parameters}\nposition = {position}\n"
        f'kinetic = "{kinetic}"\npotential = "{potential}"\nmesh = {mesh}\n{more}'
    )


def built(*args, **kwargs):
    return build_body(parse_scene(text(*args, **kwargs)).bodies[0])


def omega(*args, **kwargs):
    return solve_modes(built(*args, **kwargs)).omega


# Physical pendulums: a rod about its end, 2 pi sqrt(2 L/(3 g)); a ring and a disc about a point of the rim,
# 2 pi sqrt(2 R/g) and 2 pi sqrt(3 R/(2 g)) (Kater, Huygens; Landau & Lifshitz, Mechanics, sec. 32).
PERIODS_S = {
    "rod": ("m*l^2*a'^2/6", "m*g*l*(1 - cos(a))/2", "{m = 0.3, l = 1, g = 9.80665}", 1.638226327),
    "ring": ("m*r^2*a'^2", "m*g*r*(1 - cos(a))", "{m = 0.3, r = 0.2, g = 9.80665}", 1.268964657),
    "disc": ("0.75*m*r**2*a'**2", "-m*g*r*cos(a)", '{m = "300 g", r = "20 cm", g = "9.80665 m/s^2"}', 1.098955629),
}


@pytest.mark.parametrize("name", PERIODS_S)
def test_physical_pendulums(name):
    kinetic, potential, parameters, period_s = PERIODS_S[name]

    assert_allclose(2 * np.pi / omega('{a = "50 deg"}', kinetic, potential, parameters=parameters), [period_s], rtol=1e-8)


def test_a_double_pendulum():
    # Equal bobs and rods: w^2 = (2 -+ sqrt 2) g/l (Landau & Lifshitz, Mechanics, sec. 5 problem 1, sec. 23 problem 2).
    found = omega(
        "{a = 0.3, b = -0.2}",
        "m*l^2*(a'^2 + b'^2/2 + a'*b'*cos(a - b))",
        "-m*g*l*(2*cos(a) + cos(b))",
        parameters="{m = 0.1, l = 0.3, g = 9.80665}",
    )

    assert_allclose(found, np.sqrt((2 + np.array([-1, 1]) * np.sqrt(2)) * GRAVITY / 0.3), rtol=1e-10)


def test_a_bead_in_a_paraboloid_bowl():
    # Height c (u^2 + w^2): w = sqrt(2 g c), twice.
    found = omega(
        "{u = 0.02, w = -0.01}",
        "m/2*(u'^2 + w'^2 + (2*c*(u*u' + w*w'))^2)",
        "m*g*c*(u^2 + w^2)",
        parameters="{m = 0.02, g = 9.80665, c = 3}",
        position='["x + u", "y + c*(u^2 + w^2)", "z + w"]',
    )

    assert_allclose(found, [np.sqrt(2 * GRAVITY * 3)] * 2, rtol=1e-10)


def test_a_bifilar_lamp_turns():
    # A rod of half-length b on two cords of length l at its ends: twisting w = sqrt(3 g/l), (bifilar suspension; Routh,
    # Dynamics of a System of Rigid Bodies, art. 93), at rest where V is least: cords' height sqrt(l^2 - 4 b^2 sin^2(t/2)).
    found = omega(
        "{t = 0.4}",
        "m/2*(b^2/3*t'^2 + (b^2*sin(t)*t')^2/(l^2 - 2*b^2*(1 - cos(t))))",
        "-m*g*sqrt(l^2 - 2*b^2*(1 - cos(t)))",
        parameters="{m = 1.2, b = 0.15, l = 0.8, g = 9.80665}",
    )

    assert_allclose(found, [np.sqrt(3 * GRAVITY / 0.8)], rtol=1e-10)


def test_a_rest_that_is_not_where_it_begins():
    # Duffing's double well -k q^2/2 + e q^4/4: rest at sqrt(k/e), w = sqrt(2 k/m).
    body = built("{q = 0.01}", "m*q'^2/2", "-k*q^2/2 + e*q^4/4", parameters="{m = 2, k = 50, e = 800}")

    assert_allclose(body.rest.place, [0.25], rtol=1e-12)
    assert_allclose(solve_modes(body).omega, [np.sqrt(50.0)], rtol=1e-10)


def test_a_mesh_moves_as_position_says():
    body = built(
        '{a = "5 deg"}',
        "i*a'^2/2",
        "m*g*l*(1 - cos(a))",
        parameters="{i = 0.01, m = 0.4, l = 0.1, g = 9.80665}",
        position='["x*cos(a) - y*sin(a)", "x*sin(a) + y*cos(a)", "z"]',
        mesh="{points = [[0, 0, 0], [-0.1, -0.2, 0], [0.1, -0.2, 0]], edges = [[1, 2], [1, 3]], faces = [[1, 2, 3]]}",
    )
    points = body.surface.points_m
    moved = np.asarray(body.probe(points).todense()).reshape(-1, 3)

    # A turn about z: dx/da = (-y, x, 0), for points of balls, rods and faces alike.
    assert_allclose(moved, np.stack((-points[:, 1], points[:, 0], 0 * points[:, 0]), axis=1), atol=1e-12)


# The language against SymPy, where it is installed: value, first and second derivatives.
FORMULAS = [
    "a^3*b - 2*a/b + pi", "sin(a*b)^2 + cos(a)^2*tan(b)", "exp(-a^2)*log(b + 2)", "sqrt(1 + a^2 + b**4)",
    "asin(a/3) + acos(b/3) - atan(a*b)", "sinh(a) + cosh(b)*tanh(a - b)", "-a^2^1.5 + 2^-b", "(a + b)^b/(1 + abs(a - 7))",
]  # fmt: skip


@pytest.mark.parametrize("formula", FORMULAS)
def test_derivatives_against_central_differences(formula):
    tape, at = read_expression(formula, ["a", "b"], {}), np.array([0.7, 1.3])
    found = evaluate(tape, at[None], by=2)
    step = 1e-4
    corners = np.array([[i, j] for i in (-1, 0, 1) for j in (-1, 0, 1)]) * step
    values = evaluate(tape, at + corners, by=2)
    slope = [(values.value[7] - values.value[1]) / (2 * step), (values.value[5] - values.value[3]) / (2 * step)]
    curve = [(values.slope[7] - values.slope[1]) / (2 * step), (values.slope[5] - values.slope[3]) / (2 * step)]

    # Central differences err by step^2 times a third derivative.
    assert_allclose(found.slope[0], slope, rtol=1e-6, atol=1e-6)
    assert_allclose(found.curve[0], curve, rtol=1e-6, atol=1e-6)


@pytest.mark.parametrize("formula", FORMULAS)
def test_derivatives_against_another_library(formula):
    sympy = pytest.importorskip("sympy")
    a, b = sympy.symbols("a b", real=True)
    exact = sympy.parse_expr(formula.replace("^", "**"), {"a": a, "b": b, "abs": sympy.Abs})
    found = evaluate(read_expression(formula, ["a", "b"], {}), np.array([[0.7, 1.3]]), by=2)
    here = {a: sympy.Float("0.7", 30), b: sympy.Float("1.3", 30)}

    assert_allclose(found.value[0], float(exact.subs(here)), rtol=1e-13)
    for i, one in enumerate((a, b)):
        assert_allclose(found.slope[0, i], float(exact.diff(one).subs(here)), rtol=1e-12, atol=1e-14)
        for j, other in enumerate((a, b)):
            assert_allclose(found.curve[0, i, j], float(exact.diff(one, other).doit().subs(here)), rtol=1e-11, atol=1e-13)


ATTACKS = [
    "__import__('os').system('true')", "().__class__.__bases__[0]", "a.__class__", "eval('1')", "exec('a = 1')",
    "open('/etc/passwd')", "lambda: 0", "[a for a in a]", "{a}", "a[0]", "a;a", "a\nimport os", "import os", "getattr(a, 'b')",
    "globals()", "print(a)", "f'{a}'", '"a"', "a if a else a", "a := 1", "a == a", "a and a", "not a", "a % a", "a // a", "a @ a",
    "~a", "a << 9", "a, a", "$(id)", "`id`", "a\\b", "\u0430", "a\u2212a", "a\x00", "9**9**9**9**9", "1e308*1e308", "1" + "0" * 400,
    "(" * 5000 + "a" + ")" * 5000, "(" * 300 + "a" + ")" * 300, "sin(" * 200 + "a" + ")" * 200, "a" + "^a" * 400, "-" * 1500 + "a",
    "+".join(f"{k}*a" for k in range(2, 400)), "a" + "*(a+1)" * 3000, "a''", "a'", "_a", "a__b", "sin", "sin a", "cos(a", "a)", "", "   ",
    "2a", "a b", "3..4", "1e", "factorial(9999999)", "pow(a, 9)", "oo", "I", "nan", "inf", "diff(a, a)", "Symbol('a')",
]  # fmt: skip


@pytest.mark.parametrize("attack", ATTACKS, ids=range(len(ATTACKS)))
def test_texts_that_are_no_formulas_are_refused(attack):
    with pytest.raises(RefusedError) as caught:
        read_expression(attack, ["a"], {})
    assert len(caught.value.what) < 400


def test_the_list_of_attacks_is_long_and_none_takes_long():
    assert len(ATTACKS) >= 40
    begin = time.process_time()
    for attack in ATTACKS:
        with pytest.raises(RefusedError):
            read_expression(attack, ["a"], {})
    # A log, no limit: machines differ.
    print(f"{len(ATTACKS)} refusals in {1e3 * (time.process_time() - begin):.1f} ms")


def test_nothing_on_a_tape_but_what_is_listed():
    tape = read_expression("+".join(f"{name}(a)" for name in FUNCTIONS), ["a"], {})

    assert set(tape.code) <= set(CODES.values())
    assert all(0 <= entry < place or not place for place, entry in enumerate(tape.left) if tape.code[place] > 1)


@pytest.mark.parametrize(
    ("old", "new", "what"),
    [
        ('kinetic = "m*q\'^2/2"', 'kinetic = "m*p\'^2/2"', "not known here"),
        ('potential = "k*q^2/2"', 'potential = "k*q\'^2/2"', "a rate in"),
        ('potential = "k*q^2/2"', 'potential = "kk*q^2/2"', "did you mean 'k'"),
        ("{q = 0}", "{x = 0}", "given twice"),
        ("{q = 0}", "{sin = 0}", "word of the language"),
        ("{q = 0}", '{"q\'" = 0}', "cannot name"),
        ("{q = 0}", "[]", "no coordinate"),
        ("k = 5", 'k = "5 furlongs"', "unit"),
        ("k = 5", "q = 5", "both a coordinate and a parameter"),
        ('["x", "y", "z"]', '["x", "y"]', "not a place"),
        ("[[0, 0, 0]]", "[]", "no list of points"),
        ("[[0, 0, 0]]", "[[0, 0, 0]], edges = [[1, 2]]", "joins no points"),
        ("mesh =", 'support = [{where = {point = [0, 0, 0]}, hold = "pinned"}]\nmesh =', "a formula with support"),
    ],
)
def test_scenes_that_make_no_sense_are_refused(old, new, what):
    whole = text("{q = 0}", "m*q'^2/2", "k*q^2/2", parameters="{m = 2, k = 5}")
    assert old in whole
    with pytest.raises(SceneError, match=what):
        parse_scene(whole.replace(old, new, 1))


@pytest.mark.parametrize(
    ("coordinates", "kinetic", "potential", "what"),
    [
        ("{q = 0}", "q'^2", "q", "no rest"),
        ("{q = 0.5}", "q'^2", "-q^2", "no rest"),
        ("{q = 0}", "q'^2", "-q^2", "unstable"),
        ("{a = 3.141592653589793}", "a'^2", "-cos(a)", "unstable"),
        ("{q = 0.1}", "q'^2", "abs(q)", "no rest|kink"),
        ("{q = 0.1}", "q'^2", "exp(-q)", "no rest"),
        ("{q = -1}", "q'^2", "sqrt(q)", "no value"),
        ("{q = 0}", "q'^2 + q'", "q^2", "quadratic form"),
        ("{q = 0}", "q'^2 + 1", "q^2", "quadratic form"),
        ("{q = 0}", "q'^4", "q^2", "quadratic form"),
        ("{q = 0}", "-q'^2", "q^2", "no kinetic energy"),
        ("{q = 0, p = 0}", "q'^2", "q^2 + p^2", "no kinetic energy"),
        ("{q = 0}", "q'^2/q", "q^2", "not a number"),
        ("{q = 0}", "1e200*q'^2", "q^2", "slip of the unit"),
    ],
)
def test_energies_that_make_no_body_are_refused(coordinates, kinetic, potential, what):
    with pytest.raises(BodyError, match=what):
        _ = built(coordinates, kinetic, potential).rest


def test_a_mesh_that_position_forgets_is_refused():
    with pytest.raises(BodyError, match="one place"):
        _ = built("{u = 0}", "u'^2", "u^2", position='["u", "0", "0"]', mesh="{points = [[0, 0, 0], [1, 0, 0]]}").surface
