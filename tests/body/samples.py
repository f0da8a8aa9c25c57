"""One body of every kind, written as a scene writes it, and what a rigid motion of it is."""

from __future__ import annotations

from functools import cache

import numpy as np

from resonate.body.build import build_body
from resonate.body.spectral import basis
from resonate.scene.read import parse_scene

STEEL = "material = {density = 7850, young = 200e9, poisson = 0.3, loss = 1e-3}\n"
SPRUCE = (
    "material = {density = 390, young = [11.6e9, 0.9e9, 0.5e9], shear = [0.75e9, 0.72e9, 0.04e9], "
    "poisson = [0.37, 0.42, 0.47], loss = 1e-2}\n"
)

BAR = f'shape = "bar"\nlength = 0.4\nwidth = 0.03\nheight = 0.012\n{STEEL}'
ROD = f'shape = "bar"\nlength = 0.4\ndiameter = 0.02\n{STEEL}'
TUBE = f'shape = "tube"\nlength = 0.5\nouter = 0.025\nwall = 0.0015\n{STEEL}'
STRING = f'shape = "string"\nlength = 0.6\ndiameter = 0.001\ntension = 200\n{STEEL}'
SKIN = f'shape = "membrane"\nthickness = 2e-4\ntension = 2000\n{STEEL}'

# The free bodies of the galley, the sail store and the loft.
LINES = {
    "bar": BAR,
    "rod": ROD,
    "tube": TUBE,
    "wooden bar": f'shape = "bar"\nlength = 0.4\nwidth = 0.03\nheight = 0.012\n{SPRUCE}',
    "tapered bar": f'shape = "bar"\nlength = 0.4\nprofile = [[0, 0.02, 0.03], [0.6, 0.01, 0.02], [1, 0.004, 0.01]]\n{STEEL}',
    "wedge": f'shape = "bar"\nlength = 0.4\nwidth = 0.03\nprofile = [[0, 0.02], [1, 0]]\n{STEEL}',
    "undercut bar": (
        'shape = "bar"\nlength = 0.4\nwidth = 0.03\n'
        f"profile = [[0, 0.02], [0.3, 0.02], [0.3, 0.008], [0.7, 0.008], [0.7, 0.02], [1, 0.02]]\n{STEEL}"
    ),
}
OUTLINES = {
    "rectangle": "{rectangle = [0.4, 0.25]}",
    "circle": "{circle = 0.3}",
    "ring": "{ring = [0.3, 0.12]}",
    "triangle": "{polygon = [[0, 0], [0.4, 0], [0.1, 0.3]]}",
    "kite": "{polygon = [[-0.2, 0], [0, -0.1], [0.3, 0.05], [0, 0.2]]}",
    "angle": "{polygon = [[0, 0], [0.3, 0], [0.3, 0.1], [0.1, 0.1], [0.1, 0.3], [0, 0.3]]}",
    "pennant": "{polygon = [[0, 0], [0.5, 0.12], [0.02, 0.3], [0.11, 0.16]]}",
    "hexagon": "{polygon = [[0.2, 0], [0.1, 0.17], [-0.1, 0.17], [-0.2, 0], [-0.1, -0.17], [0.1, -0.17]]}",
}
PLATES = {
    **{f"{name} plate": f'shape = "plate"\noutline = {text}\nthickness = 0.004\n{STEEL}' for name, text in OUTLINES.items()},
    "wooden plate": f'shape = "plate"\noutline = {OUTLINES["rectangle"]}\nthickness = 0.004\n{SPRUCE}',
    "wooden disc": f'shape = "plate"\noutline = {OUTLINES["circle"]}\nthickness = 0.004\n{SPRUCE}',
}
SKINS = {f"{name} skin": f"{SKIN}outline = {text}\n" for name, text in OUTLINES.items()}
FREE = LINES | PLATES
EVERY = FREE | SKINS | {"string": STRING}


def read(text: str, *, head: str = ""):
    """The body of a scene text, not yet built."""
    scene = f'title = "check"\n[take]\nlength = "1 s"\n{head}[[body]]\nname = "sample"\n{text}'
    return parse_scene(scene).bodies[0]


@cache
def build(text: str, *, most: int = 20, **surroundings: float):
    """Build it, with a mesh for so many modes."""
    return build_body(read(f"{text}\nmodes = {{most = {most}}}\n"), **surroundings)


def rigid(body, *, centre_m=(0.0, 0.0, 0.0)) -> np.ndarray:
    """Nodal values (d, 6) of unit motions along x, y, z and unit turns about them through a centre."""
    nodes = body.grid.nodes_m
    places = np.zeros((len(nodes), 3))
    places[:, [0, 2][: nodes.shape[1]]] = nodes
    motions = []
    for axis in range(6):
        push, turn = np.zeros(3), np.zeros(3)
        (push if axis < 3 else turn)[axis % 3] = 1.0
        move = push + np.cross(turn, places - np.asarray(centre_m))
        fields = np.concatenate((move, np.broadcast_to(turn, move.shape)), axis=1)
        motions.append(fields[:, {6: [0, 1, 2, 3, 4, 5], 5: [0, 1, 2, 3, 5], 1: [1]}[body.freedoms // len(nodes)]].ravel())
    return np.stack(motions, axis=1)


def inside(body, generator: np.random.Generator, count: int) -> np.ndarray:
    """Random material points (count, 3) of a body, from shapes of its own elements."""
    grid = body.grid
    element = generator.integers(len(grid.elements), size=count)
    local = generator.uniform(-1.0, 1.0, size=(count, grid.dimension))
    value, _ = basis(grid.order, local)
    place = np.einsum("pk,pkd->pd", value, grid.nodes_m[grid.elements[element]])
    points = np.zeros((count, 3))
    points[:, [0, 2][: grid.dimension]] = place
    if grid.dimension == 2:
        points[:, 1] = generator.uniform(-0.5, 0.5, count) * body.thickness_m
    else:
        section = body.layout.section_at(points[:, 0])
        reach = generator.uniform(0.0, 0.49, count)
        angle = generator.uniform(0.0, 2.0 * np.pi, count)
        points[:, 1] = reach * np.cos(angle) * section.height
        points[:, 2] = reach * np.sin(angle) * section.width
    return points
