"""Point masses and springs against chains and pendulums in closed form."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose

from resonate.body.build import build_body
from resonate.errors import BodyError, ModesError, SceneError
from resonate.modes.solve import solve_modes
from resonate.scene.read import parse_scene, read_scene

MATTER = "material = {density = 7850, young = 200e9, poisson = 0.3, loss = 0.01}\n"
LINE = '{where = "all", hold = {fix = ["y", "z"]}}'


def read(text, **kwargs):
    return parse_scene(f'[take]\nlength = "1 s"\n[[body]]\nname = "net"\nshape = "lumps"\n{MATTER}{text}', **kwargs).bodies[0]


def solved(text):
    body = build_body(read(text))
    return body, solve_modes(body)


def chain(count, mass, stiffness, *, ends):
    points = ", ".join(f"{{mass = {mass}, place = [{0.1 * k}, 0, 0]}}" for k in range(count))
    springs = ", ".join(f'{{between = ["{k}", "{k + 1}"], stiffness = {stiffness}}}' for k in range(1, count))
    held = f', {{where = ["1", "{count}"], hold = "pinned"}}' if ends else ""
    return f"points = [{points}]\nsprings = [{springs}]\nsupport = [{LINE}{held}]\nmodes = {{heard = 10000}}\n"


def test_a_chain_between_walls():
    # w_j = 2 sqrt(k/m) sin(j pi / (2 (n + 1))), n movable points: Lagrange (1788); Thomson, Theory of Vibration with
    # Applications, sec. 6.
    _, modes = solved(chain(9, 0.02, 5e4, ends=True))

    assert_allclose(modes.omega, 2 * np.sqrt(5e4 / 0.02) * np.sin(np.arange(1, 8) * np.pi / 16), rtol=1e-10)


def test_a_chain_with_free_ends():
    # w_j = 2 sqrt(k/m) sin(j pi / (2 n)), and motion as a whole: the same source.
    _, modes = solved(chain(6, 0.05, 2e3, ends=False))

    assert modes.rigid.shape[1] == 1
    assert_allclose(modes.omega, 2 * np.sqrt(2e3 / 0.05) * np.sin(np.arange(1, 6) * np.pi / 12), rtol=1e-9)


def test_a_ring_of_beads_under_tension_moves_across():
    # A bead on a cord of two springs under tension F, each L long: w = sqrt(2 F/(m L)) across, sqrt(2 k/m) along.
    pull, length, stiffness, mass = 30.0, 0.2, 4e3, 0.01
    text = (
        f"points = [{{mass = 1, place = [0, 0, 0]}}, {{name = 'bead', mass = {mass}, place = [{length}, 0, 0]}}, "
        f"{{name = 'end', mass = 1, place = [{2 * length}, 0, 0]}}]\n"
        f"springs = [{{between = ['1', 'bead'], stiffness = {stiffness}, rest = {length - pull / stiffness}}}, "
        f"{{between = ['bead', 'end'], stiffness = {stiffness}, rest = {length - pull / stiffness}}}]\n"
        "support = [{where = ['1', 'end'], hold = 'pinned'}]\nfloating = true\n"
    )
    _, modes = solved(text)

    across = np.sqrt(2 * pull / (mass * length))
    assert_allclose(modes.omega, [across, across, np.sqrt(2 * stiffness / mass)], rtol=1e-9)


def test_a_mass_on_a_spring_hangs_and_swings():
    # Bounce sqrt(k/m), swing sqrt(g/(L + m g/k)): the pendulum of the stretched length. Weight is part of the rest state.
    mass, stiffness, length, gravity = 0.5, 80.0, 0.4, 9.80665
    text = (
        f"points = [{{name = 'hook', mass = 1, place = [0, 0, 0]}}, {{name = 'bob', mass = {mass}, place = [0, -{length}, 0]}}]\n"
        f"springs = [{{between = ['hook', 'bob'], stiffness = {stiffness}}}]\nsupport = [{{where = 'hook', hold = 'pinned'}}]\n"
    )
    body, modes = solved(text)

    long = length + mass * gravity / stiffness
    assert_allclose(body.rest_m[1], [0, -long, 0], atol=1e-12)
    assert "at rest its point 'bob' is 0.0613 m" in " ".join(modes.warnings)
    assert_allclose(np.sort(modes.omega), np.sort([np.sqrt(gravity / long)] * 2 + [np.sqrt(stiffness / mass)]), rtol=1e-9)


def test_a_double_pendulum_of_stiff_springs():
    # Two equal bobs on equal rods: w^2 = (2 -+ sqrt 2) g/L (Landau & Lifshitz, Mechanics, sec. 23, problem 2).
    text = (
        "points = [{mass = 1, place = [0, 0, 0]}, {mass = 0.1, place = [0, -0.3, 0]}, {mass = 0.1, place = [0, -0.6, 0]}]\n"
        "springs = [{between = ['1', '2'], stiffness = 1e7}, {between = ['2', '3'], stiffness = 1e7}]\n"
        "support = [{where = '1', hold = 'pinned'}, {where = 'all', hold = {fix = ['z']}}]\n"
    )
    _, modes = solved(text)

    expected = np.sqrt((2 + np.array([-1, 1]) * np.sqrt(2)) * 9.80665 / 0.3)
    # Weight lengthens the springs by 1e-7 of their length.
    assert_allclose(modes.omega[:2], expected, rtol=1e-6)


def test_dampers_take_what_they_should():
    # One mass on a spring and a dashpot: rate c/(2 m); the material's loss factor adds eta w/2.
    text = (
        "points = [{mass = 1, place = [0, 0, 0]}, {mass = 0.2, place = [0.1, 0, 0]}]\n"
        "springs = [{between = ['1', '2'], stiffness = 2000, damper = 0.3}]\n"
        f"support = [{LINE}, {{where = '1', hold = 'pinned'}}]\n"
    )
    _, modes = solved(text)

    assert_allclose(modes.decay.support, [0.3 / 0.4], rtol=1e-10)
    assert_allclose(modes.decay.material, [0.005 * 100.0], rtol=1e-10)


TETRAHEDRON = (
    "points = [{mass = 0.1, place = [1, 1, 1]}, {mass = 0.1, place = [1, -1, -1]}, {mass = 0.1, place = [-1, 1, -1]}, "
    "{mass = 0.1, place = [-1, -1, 1]}]\n"
    "springs = ["
    + ", ".join(f"{{between = ['{a}', '{b}'], stiffness = 1000}}" for a in range(1, 5) for b in range(a + 1, 5))
    + "]\n"
)


def test_a_free_tetrahedron():
    # X4 molecule with bond springs only: w^2 = 4 k/m (A1), k/m (E), 2 k/m (F2): Herzberg, Infrared and Raman Spectra
    # (1945), sec. II.4, tetrahedral X4.
    body, modes = solved(TETRAHEDRON)

    assert modes.rigid.shape[1] == 6
    assert_allclose(modes.omega**2 / 1e4, [1, 1, 2, 2, 2, 4], rtol=1e-9)
    assert_allclose(body.inertia.tensor, 0.4 * 2 * np.eye(3), atol=1e-12)


def test_tables_beside_the_scene_say_the_same(tmp_path):
    (tmp_path / "points.csv").write_text("name,mass_kg,x_m,y_m,z_m\na,0.1,0,0,0\nb,0.2,0.1,0,0\n\n")
    (tmp_path / "springs.csv").write_text("from,to,stiffness_n_m,damper_ns_m\na,b,500,\n")
    scene = f'title = "net"\n[take]\nlength = "1 s"\n[[body]]\nname = "net"\nshape = "lumps"\n{MATTER}floating = true\n'
    (tmp_path / "tables.toml").write_text(scene + 'points = "points.csv"\nsprings = "springs.csv"\n')
    (tmp_path / "lists.toml").write_text(
        scene + "points = [{name = 'a', mass = 0.1, place = [0, 0, 0]}, {name = 'b', mass = 0.2, place = [0.1, 0, 0]}]\n"
        "springs = [{between = ['a', 'b'], stiffness = 500}]\n"
    )

    assert read_scene(tmp_path / "tables.toml").digest == read_scene(tmp_path / "lists.toml").digest


@pytest.mark.parametrize(
    ("table", "what"),
    [
        ("name,mass_kg,x_m,y_m\na,1,0,0\n", "begins with"),
        ("name,mass_kg,x_m,y_m,z_m\na,heavy,0,0,0\n", "row 2: mass_kg"),
        ("name,mass_kg,x_m,y_m,z_m\na,1,0,0\n", "row 2 has 4 cells"),
        ("name,mass_kg,x_m,y_m,z_m\na,nan,0,0,0\n", "nan"),
        ("", "begins with"),
    ],
)
def test_tables_that_cannot_be_read_are_refused(tmp_path, table, what):
    (tmp_path / "points.csv").write_text(table)
    with pytest.raises(SceneError, match=what):
        parse_scene(
            f'[take]\nlength = "1 s"\n[[body]]\nname = "net"\nshape = "lumps"\n{MATTER}points = "points.csv"\n',
            where=str(tmp_path / "scene.toml"),
        )


ONE = "points = [{mass = 1, place = [0, 0, 0]}, {mass = 1, place = [0.1, 0, 0]}]\n"


@pytest.mark.parametrize(
    ("text", "what"),
    [
        (ONE + "springs = [{between = ['1', '3'], stiffness = 1}]\n", "there is no point"),
        (ONE + "springs = [{between = ['1', '1'], stiffness = 1}]\n", "joined to itself"),
        (ONE + "springs = [{between = ['1'], stiffness = 1}]\n", "not a pair"),
        (ONE + "springs = [{between = ['1', '2'], stiffness = 0}]\n", "out of range"),
        (ONE.replace("0.1", "0") + "springs = [{between = ['1', '2'], stiffness = 1}]\n", "has no direction"),
        ("points = []\n", "no list of points"),
        ("points = [{mass = 1, name = 'all', place = [0, 0, 0]}]\n", "all stands for"),
        (ONE + "support = [{where = '3', hold = 'pinned'}]\n", "not a place"),
        (ONE + "support = [{where = '1', hold = {cord = 1}}]\n", "do not hang from cords"),
    ],
)
def test_nets_that_make_no_sense_are_refused(text, what):
    with pytest.raises(SceneError, match=what):
        read(text)


def test_what_falls_has_no_rest():
    with pytest.raises(BodyError, match="no place to rest"):
        _ = build_body(read(ONE + "support = [{where = '1', hold = 'pinned'}]\n")).rest_m


def test_what_buckles_or_flops_is_refused():
    pushed = (
        "points = [{mass = 1, place = [0, 0, 0]}, {mass = 1, place = [0.1, 0, 0]}, {mass = 1, place = [0.2, 0, 0]}]\n"
        "springs = [{between = ['1', '2'], stiffness = 1000, rest = 0.12}, {between = ['2', '3'], stiffness = 1000, rest = 0.12}]\n"
        "support = [{where = ['1', '3'], hold = 'pinned'}]\nfloating = true\n"
    )
    with pytest.raises(ModesError, match="unstable"):
        solved(pushed)
    with pytest.raises(ModesError, match="six|6 rigid"):
        solved(TETRAHEDRON.replace("{between = ['1', '2'], stiffness = 1000}, ", ""))
