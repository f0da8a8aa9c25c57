"""What holds a body, against statics, springs and pendulums in closed form."""

from __future__ import annotations

import numpy as np
import pytest
import scipy.linalg
import scipy.sparse.linalg
from numpy.testing import assert_allclose

from resonate.errors import BodyError, ResonateError
from tests.body.samples import STEEL, build, read, rigid

YOUNG, SHEAR, DENSITY = 200e9, 200e9 / 2.6, 7850.0
GRAVITY = 9.80665


def held(*entries):
    """Supports as a scene writes them: (where, hold)."""
    rows = ", ".join(f"{{where = {where}, hold = {hold}}}" for where, hold in entries)
    return f"support = [{rows}]\n"


def lowest(body, count):
    """First angular frequencies, rad/s, and their shapes over all freedoms."""
    forms = body.forms()
    value, shape = scipy.linalg.eigh(
        forms.stiffness.toarray(), forms.mass.toarray(), subset_by_index=[0, count - 1]
    )
    return np.sqrt(np.maximum(value, 0.0)), forms.basis @ shape


def upward(body, count):
    """First angular frequencies, rad/s, of a line that only bends along y and that nothing clamps."""
    forms = body.forms()
    kept = np.isin(np.arange(body.freedoms) % 6, [1, 5])
    stiffness, mass = (matrix.toarray()[np.ix_(kept, kept)] for matrix in (forms.stiffness, forms.mass))
    value = scipy.linalg.eigh(stiffness, mass, eigvals_only=True, subset_by_index=[0, count - 1])
    return np.sqrt(np.maximum(value, 0.0))


def pushed(body, point, force):
    """Displacement (3,) of the point that a steady force (3,) on it makes."""
    forms = body.forms()
    rows = body.probe(np.array([point])) @ forms.basis
    # A pinned line may spin about its axis: the least motion of those that balance the force is taken.
    moved, *_ = np.linalg.lstsq(forms.stiffness.toarray(), rows.T @ np.array(force), rcond=1e-14)
    return rows @ moved


# Beams under a force: Roark's Formulas for Stress and Strain, table 8.1 (bending), with Timoshenko's shear deflection
# (Strength of Materials, part 1, sec. 39) added.

LENGTH, WIDTH, HEIGHT = 0.4, 0.03, 0.012
BEAM = f'shape = "bar"\nlength = {LENGTH}\nwidth = {WIDTH}\nheight = {HEIGHT}\n{STEEL}'
AREA = WIDTH * HEIGHT
KAPPA = 10 * 1.3 / (12 + 11 * 0.3)
BENT = LENGTH**3 / (YOUNG * WIDTH * HEIGHT**3 / 12)
BENT_ACROSS = LENGTH**3 / (YOUNG * HEIGHT * WIDTH**3 / 12)
SHEARED = LENGTH / (KAPPA * SHEAR * AREA)
LEFT, RIGHT = '"left"', '"right"'

STATIC = {
    # ends, where it is pushed as a share of the length, compliance by bending and by shear.
    "cantilever": ([(LEFT, '"clamped"')], 1.0, 1 / 3, 1.0),
    "clamped-clamped": ([(LEFT, '"clamped"'), (RIGHT, '"clamped"')], 0.5, 1 / 192, 1 / 4),
    "pinned-pinned": ([(LEFT, '"pinned"'), (RIGHT, '"pinned"')], 0.5, 1 / 48, 1 / 4),
    "clamped-guided": ([(LEFT, '"clamped"'), (RIGHT, '"guided"')], 1.0, 1 / 12, 1.0),
    "guided-pinned": ([(LEFT, '"guided"'), (RIGHT, '"pinned"')], 0.0, 1 / 3, 1.0),
    "pinned-fixed turn": ([(LEFT, '"pinned"'), (RIGHT, '{fix = ["rx", "ry", "rz"]}')], 1.0, 1 / 3, 1.0),
}


@pytest.mark.parametrize("case", STATIC)
def test_beams_give_way_as_in_the_tables(case):
    ends, at, bending, shear = STATIC[case]
    point = [at * LENGTH, 0.0, 0.0]
    # The slope has a kink at the force: a spring of next to nothing puts the end of an element there.
    body = build(BEAM + held(*ends, (f"{{point = {point}}}", "{spring = 1e-6}")))

    up = pushed(body, point, [0.0, 1.0, 0.0])
    across = pushed(body, point, [0.0, 0.0, 1.0])

    assert_allclose(up[1], bending * BENT + shear * SHEARED, rtol=1e-8)
    assert_allclose(across[2], bending * BENT_ACROSS + shear * SHEARED, rtol=1e-8)


def test_a_support_at_a_point_of_a_beam():
    # Overhanging beam: pinned at the left and at 0.25, pushed at the right: F a^2 (l + a)/(3 E I), shear F a (l + a)/l.
    body = build(BEAM + held((LEFT, '"pinned"'), ("{point = [0.25, 0, 0]}", '"pinned"')))
    over, span = 0.15, 0.25

    found = pushed(body, [LENGTH, 0.0, 0.0], [0.0, 1.0, 0.0])[1]

    stiff = YOUNG * WIDTH * HEIGHT**3 / 12
    expected = over**2 * (span + over) / (3 * stiff) + over * (span + over) / span / (KAPPA * SHEAR * AREA)
    assert_allclose(found, expected, rtol=1e-8)


def test_a_fixed_turn_holds_twist_alone():
    # G J/L against a torque at the other end.
    body = build(f'shape = "bar"\nlength = 0.4\ndiameter = 0.02\n{STEEL}' + held((LEFT, '"clamped"')))
    forms = body.forms()
    rows = (body.motion(np.array([[0.4, 0.0, 0.0]])) @ forms.basis)[3]

    turned = rows @ scipy.sparse.linalg.spsolve(forms.stiffness.tocsc(), rows.T.toarray().ravel())

    assert_allclose(turned, 0.4 / (SHEAR * np.pi / 32 * 0.02**4), rtol=1e-9)


def test_a_string_pushed_aside():
    # F a (L - a)/(T L), less the rounding of the kink: F b/(2 T), b = sqrt(E I/T) (Timoshenko, part 2, sec. 6), shear
    # left out (here 5e-5).
    text = f'shape = "string"\nlength = 0.6\ndiameter = 1e-3\ntension = 200\n{STEEL}'
    ends = ('["left", "right"]', '"pinned"')
    body = build(text + held(ends, ("{point = [0.2, 0, 0]}", "{spring = 1e-6}")), most=60)
    rounded = np.sqrt(YOUNG * np.pi / 64 * 1e-12 / 200)

    found = pushed(body, [0.2, 0.0, 0.0], [0.0, 1.0, 0.0])

    assert_allclose(found[1], 0.2 * 0.4 / (200 * 0.6) - rounded / 400, rtol=1e-4)


# Circular plates under a uniform load q: Timoshenko & Woinowsky-Krieger, Plates and Shells, eqs. 62, 68; shear adds
# q R^2/(4 kappa G h) to both (sec. 20, with Reissner's 5/6).
DISC = f'shape = "plate"\noutline = {{circle = 0.3}}\nthickness = 0.004\n{STEEL}'
STIFF = YOUNG * 0.004**3 / 12 / (1 - 0.09)
DISC_SHEAR = 0.15**2 / (4 * 5 / 6 * SHEAR * 0.004)


def loaded(body):
    """Deflection of the centre under a uniform unit pressure."""
    forms, at = body.forms(), body.grid.quadrature()
    fields = body.freedoms // len(body.grid.nodes_m)
    load = np.zeros(body.freedoms)
    np.add.at(load, body.grid.elements * fields + (1 if fields > 1 else 0), at.weight @ at.value)
    moved = scipy.sparse.linalg.spsolve(forms.stiffness.tocsc(), forms.basis.T @ load)
    return (body.probe(np.zeros((1, 3))) @ forms.basis @ moved)[1]


@pytest.mark.parametrize(
    ("hold", "factor"),
    [("clamped", 1.0), ("pinned", 5.3 / 1.3), ("sliding", 5.3 / 1.3), ('{fix = ["y", "rx", "rz"]}', 1.0)],
)
def test_discs_give_way_as_in_the_tables(hold, factor):
    hold = hold if hold.startswith("{") else f'"{hold}"'
    rest = "" if "sliding" not in hold and "fix" not in hold else ', {where = {point = [0, 0, 0]}, hold = {fix = ["x", "z"]}}'
    rest += "" if not rest else ', {where = {point = [0.1, 0, 0]}, hold = {fix = ["z"]}}'
    body = build(DISC + f'support = [{{where = "outer", hold = {hold}}}{rest}]\n')

    assert_allclose(loaded(body), factor * 0.15**4 / (64 * STIFF) + DISC_SHEAR, rtol=1e-6)


def test_a_guided_rim_lets_a_disc_rise_without_tilting():
    # Held at the centre by a spring only: all of the load goes into it.
    spring = ("{point = [0, 0, 0]}", "{spring = 1e3}")
    body = build(DISC + held(('"outer"', '"guided"'), spring))

    # 1e3 N/m under pi R^2; the plate itself gives way by 1e-4 of that.
    assert_allclose(loaded(body), np.pi * 0.15**2 / 1e3, rtol=1e-3)


def test_a_skin_under_pressure():
    # q R^2/(4 T): any text on membranes.
    body = build(f'shape = "membrane"\noutline = {{circle = 0.3}}\nthickness = 2e-4\ntension = 2000\n{STEEL}')

    assert_allclose(loaded(body), 0.15**2 / (4 * 2000), rtol=1e-7)


# Stiff bodies on soft springs: six motions of a rigid body. Thomson, Theory of Vibration, ch. 5.

BLOCK = f'shape = "bar"\nlength = 0.1\nwidth = 0.04\nheight = 0.03\n{STEEL}'


def test_a_bar_bounces_and_tilts_on_end_springs():
    k, mass = 5e2, DENSITY * 0.1 * 0.04 * 0.03
    body = build(BLOCK + held((LEFT, f"{{spring = {k}}}"), (RIGHT, f"{{spring = {k}}}")), most=4)

    omega, _ = lowest(body, 7)

    pitch, yaw = mass * (0.1**2 + 0.03**2) / 12, mass * (0.1**2 + 0.04**2) / 12
    bounce = [2 * k / mass] * 3
    tilt = [2 * k * 0.05**2 / pitch, 2 * k * 0.05**2 / yaw]
    # Springs on the axis leave its spin free; the bar's own give is 1e-7 of theirs.
    assert omega[0] < 1e-2 * np.sqrt(min(bounce))
    assert_allclose(omega[1:6], np.sqrt(np.sort(bounce + tilt)), rtol=1e-5)
    assert omega[6] > 1e3 * omega[5]


def test_a_bar_on_two_posts_does_not_roll_off():
    # A strip of width w and stiffness k turns by k w^2/12 (its own integral); the bar's roll is about its axis.
    k, mass = 5e2, DENSITY * 0.1 * 0.04 * 0.03
    posts = [(f"{{point = [{x}, 0, 0]}}", f"{{spring = {k}}}") for x in (0.02, 0.08)]
    body = build(BLOCK + held(*posts), most=4)

    omega, _ = lowest(body, 7)

    roll = 2 * k * 0.04**2 / 12 / (mass * (0.04**2 + 0.03**2) / 12)
    pitch, yaw = mass * (0.1**2 + 0.03**2) / 12, mass * (0.1**2 + 0.04**2) / 12
    tilt = [2 * k * 0.03**2 / pitch, 2 * k * (0.03**2 + 0.04**2 / 12) / yaw]
    expected = np.sqrt(np.sort([2 * k / mass] * 3 + tilt + [roll]))
    assert_allclose(omega[:6], expected, rtol=1e-5)
    assert omega[6] > 1e3 * omega[5]


def test_a_plate_on_four_feet():
    # Springs of 200 N/m each way under points at (+-p, +-q), below its middle by half its thickness.
    k, p, q, thick = 200.0, 0.08, 0.05, 0.01
    feet = [(f"{{point = [{x}, {-thick / 2}, {z}]}}", f"{{spring = {k}}}") for x in (-p, p) for z in (-q, q)]
    text = f'shape = "plate"\noutline = {{rectangle = [0.2, 0.12]}}\nthickness = {thick}\n{STEEL}'
    body = build(text + held(*feet), most=4)
    mass = DENSITY * 0.2 * 0.12 * thick
    tensor = mass / 12 * np.array([0.12**2 + thick**2, 0.2**2 + 0.12**2, 0.2**2 + thick**2])

    # K of springs at r: sum of k [1, -S; S, -S S] with S the cross product with r.
    stiffness = np.zeros((6, 6))
    for x in (-p, p):
        for z in (-q, q):
            arm = np.array([[0, -z, -thick / 2], [z, 0, -x], [thick / 2, x, 0]])
            row = np.hstack([np.eye(3), -arm])
            stiffness += k * row.T @ row
    expected = scipy.linalg.eigh(stiffness, np.diag([mass] * 3 + tensor.tolist()), eigvals_only=True)
    omega, _ = lowest(body, 6)
    assert_allclose(omega, np.sqrt(expected), rtol=2e-5)


@pytest.mark.parametrize("most", [4, 40])
def test_a_spread_spring_is_the_same_on_every_mesh(most):
    # The whole box: k in all, so that a rigid rise stores k/2, and a turn about z k/2 of the mean square of x.
    k = 1e4
    box = ("{box = [[0.1, -1, -1], [0.3, 1, 1]]}", f"{{spring = {k}}}")
    body = build(BEAM + held(box), most=most)

    springs = body.supports.springs
    motion = rigid(body)
    assert_allclose(motion[:, 1] @ springs @ motion[:, 1], k, rtol=1e-12)
    assert_allclose(motion[:, 5] @ springs @ motion[:, 5], k * (0.3**3 - 0.1**3) / (3 * 0.2), rtol=1e-12)


@pytest.mark.parametrize("most", [4, 60])
@pytest.mark.parametrize("outline", ["{rectangle = [0.4, 0.25]}", "{polygon = [[-0.2, -0.125], [-0.2, 0.125], [0.2, 0.125], [0.2, -0.125]]}"])
def test_a_spring_along_an_edge_is_the_same_on_every_mesh(most, outline):
    # Along z = 0.125: mean of z^2 is its square, mean of x^2 is a^2/12.
    k = 1e4
    edge = '"z+"' if "rectangle" in outline else '"edge2"'
    body = build(f'shape = "plate"\noutline = {outline}\nthickness = 0.004\n{STEEL}' + held((edge, f"{{spring = {k}}}")), most=most)

    springs, motion = body.supports.springs, rigid(body)

    assert_allclose(motion[:, 1] @ springs @ motion[:, 1], k, rtol=1e-12)
    assert_allclose(motion[:, 5] @ springs @ motion[:, 5], k * 0.4**2 / 12, rtol=1e-12)
    assert_allclose(motion[:, 3] @ springs @ motion[:, 3], k * 0.125**2, rtol=1e-12)


@pytest.mark.parametrize("most", [4, 60])
def test_a_spring_round_a_rim_is_the_same_on_every_mesh(most):
    k = 1e4
    body = build(DISC + held(('"outer"', f"{{spring = {k}}}")), most=most)
    springs, motion = body.supports.springs, rigid(body)

    assert_allclose(motion[:, 1] @ springs @ motion[:, 1], k, rtol=1e-12)
    # Mean of x^2 round a circle is half its radius squared; the rim is drawn to 1e-8.
    assert_allclose(motion[:, 5] @ springs @ motion[:, 5], k * 0.15**2 / 2, rtol=1e-7)


@pytest.mark.parametrize("most", [4, 60])
def test_a_box_of_a_plate_is_nearly_the_same_on_every_mesh(most):
    # A box that cuts elements takes the nodes inside it: what it takes in all is exact, where it takes it is not.
    k = 1e4
    text = f'shape = "plate"\noutline = {{rectangle = [0.4, 0.25]}}\nthickness = 0.004\n{STEEL}'
    body = build(text + held(("{box = [[-0.1, -1, -0.1], [0.1, 1, 0.1]]}", f"{{spring = {k}}}")), most=most)
    springs, motion = body.supports.springs, rigid(body)

    assert_allclose(motion[:, 1] @ springs @ motion[:, 1], k, rtol=1e-12)
    assert_allclose(motion[:, 5] @ springs @ motion[:, 5], k * 0.2**2 / 12, rtol=0.5)


def test_a_bar_on_an_elastic_bed():
    # Winkler: a bed of k/L a metre adds k/m to the square of every bending mode of a slender bar (Timoshenko & Young,
    # Vibration Problems in Engineering, sec. 5.13), apart from rotary inertia: some (height/length)^2.
    text = f'shape = "bar"\nlength = 1.0\nwidth = 0.004\nheight = 0.003\n{STEEL}'
    k, mass = 2e3, DENSITY * 0.004 * 0.003
    bed = held(("{box = [[0, -1, -1], [1, 1, 1]]}", f"{{spring = {k}}}"))

    free, laid = (upward(build(text + support, most=6), 6) for support in ("", bed))

    assert_allclose(laid**2, free**2 + k / mass, rtol=1e-4, atol=1e-4 * k / mass)


def test_dashpots_take_what_they_should():
    # zeta = c/(2 sqrt(k m)) of a body that bounces on k with c beside it.
    k, c, mass = 5e2, 0.4, DENSITY * 0.1 * 0.04 * 0.03
    body = build(BLOCK + held((LEFT, f"{{spring = {k}, damper = {c}}}"), (RIGHT, f"{{spring = {k}, damper = {c}}}")), most=4)
    forms = body.forms()
    omega, _ = lowest(body, 7)
    _, shape = scipy.linalg.eigh(forms.stiffness.toarray(), forms.mass.toarray(), subset_by_index=[0, 6])

    damping = shape.T @ (forms.damper_rows.T @ (forms.damper_ns_m[:, None] * (forms.damper_rows @ shape)))

    bounce = np.abs(omega - np.sqrt(2 * k / mass)) < 1e-4 * omega
    assert bounce.sum() == 3
    assert_allclose(np.diag(damping)[bounce] / (2 * omega[bounce]), 2 * c / (2 * np.sqrt(2 * k * mass)), rtol=1e-5)


@pytest.mark.parametrize("most", [4, 60])
def test_a_spread_dashpot_is_the_same_on_every_mesh(most):
    c = 7.0
    body = build(DISC + held(('"outer"', f"{{spring = 1e4, damper = {c}}}")), most=most)
    rows, motion = body.supports.damper_rows, rigid(body)

    power = motion.T @ (rows.T @ (body.supports.damper_ns_m[:, None] * (rows @ motion)))

    assert_allclose(np.diag(power)[:3], c, rtol=1e-12)
    assert_allclose(power[5, 5], c * 0.15**2 / 2, rtol=1e-7)


# Impossible supports.

REFUSED = [
    (BEAM, ("{point = [0.2, 0.3, 0]}", '"pinned"'), "0.294 m off the body", "its own frame"),
    (BEAM, ("{box = [[0.5, -1, -1], [0.6, 1, 1]]}", '"clamped"'), "holds no part", "from x = 0 to 0.4 m"),
    (BEAM, ("{box = [[0, 0.1, -1], [0.4, 1, 1]]}", '"clamped"'), "holds no part", "from x = 0 to 0.4 m"),
    (DISC, ("{point = [0.25, 0, 0]}", '"pinned"'), "0.1 m off the body", "its own frame"),
    (DISC, ("{point = [0, 0.1, 0]}", '"pinned"'), "0.098 m off the body", "its own frame"),
    (DISC, ("{box = [[0.2, -1, -1], [0.3, 1, 1]]}", "{spring = 1e3}"), "holds no point", "larger"),
    (DISC, ("{box = [[-1, 0.1, -1], [1, 1, 1]]}", "{spring = 1e3}"), "holds no point", "larger"),
]


@pytest.mark.parametrize(("text", "entry", "what", "fix"), REFUSED)
def test_supports_beside_the_body_are_refused(text, entry, what, fix):
    with pytest.raises(BodyError) as caught:
        build(text + held(entry)).forms()

    (fault,) = caught.value.faults
    assert what in fault.what
    assert "sample" in fault.where
    assert fix in fault.fix


@pytest.mark.parametrize(
    ("text", "entry", "what"),
    [
        (BEAM, ('"rim"', '"clamped"'), "not a place"),
        (DISC, ('"left"', '"clamped"'), "not a place"),
        (DISC, ('["outer", "outer"]', '"clamped"'), "twice"),
        (BEAM, (LEFT, "{spring = -1}"), "-1"),
        (BEAM, (LEFT, '{fix = ["y", "w"]}'), "not an axis"),
        (BEAM, ("{box = [[1, 0, 0], [0, 1, 1]]}", '"clamped"'), "inside out"),
    ],
)
def test_supports_that_mean_nothing_are_refused_by_the_scene(text, entry, what):
    with pytest.raises(ResonateError, match=what):
        read(text + held(entry))
