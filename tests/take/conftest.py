"""A small take made by hand: closed-form sound and motion, written by the real writers."""

from __future__ import annotations

import dataclasses
from fractions import Fraction
from pathlib import Path
from types import SimpleNamespace

import numpy as np
import pytest

from resonate.body.body import Surface
from resonate.motion.channels import BodyCurves, Curves
from resonate.scene.read import parse_scene
from resonate.sound.levels import Delivered, measure
from resonate.take.deliver import heading
from resonate.take.excerpt import excerpts_of
from resonate.take.glb import write_glb
from resonate.take.manifest import Arrivals, Heard, write_manifest
from resonate.take.tables import write_curves, write_events
from resonate.take.wave import write_wave

SCENE = """
title = "Galley mug"
[take]
length = "{length}"
seed = 11
[picture]
rate = "{rate}"
start = "{start}"
handles = 8
up = "{up}"
unit = "{unit}"
[sound]
rate = "{sample_rate} Hz"
format = "{format}"
[[body]]
name = "mug"
shape = "bar"
length = 0.3
width = 0.03
height = 0.008
material = "brass"
[[strike]]
body = "mug"
time = 0.3111
striker = "steel ball"
speed = 1.5
[[strike]]
body = "mug"
time = 1.0
striker = "steel ball"
speed = 1.0
"""
HITS_S = (0.3111, 1.0)
CONTACT_S = 2e-4


def make_scene(
    *,
    rate="24000/1001",
    start="01:00:00:00",
    up="y",
    unit="m",
    sample_rate=48000,
    format="24-bit",
    length="2 s",
):
    text = SCENE.format(
        rate=rate, start=start, up=up, unit=unit, sample_rate=sample_rate, format=format, length=length
    )
    return parse_scene(text)


def make_record(hits_s=HITS_S):
    events = [
        SimpleNamespace(
            kind="strike",
            body="mug",
            other="steel ball",
            begin_s=begin,
            end_s=begin + CONTACT_S,
            place_m=np.array([0.1, 0.2, -0.3]),
            impulse_ns=0.0123456789012,
            peak_n=98.7,
            closing_speed_m_s=1.5,
            leaving_speed_m_s=-0.0,
            strike=number,
        )
        for number, begin in enumerate(hits_s)
    ]
    return SimpleNamespace(events=tuple(events), ledger=Ledger(), warnings=())


@dataclasses.dataclass(frozen=True)
class Ledger:
    """Entries as a run leaves them, made up but closing."""

    given: float = 0.005
    modal_left: float = 0.002
    lost_material: float = 0.003 - 1e-10
    residual: float = 1e-10
    scale: float = 0.005


def box(size_m=0.04):
    corners = size_m * np.array([(x, y, z) for x in (-1, 1) for y in (-1, 1) for z in (-1, 1)], dtype=float)
    faces = [(0, 1, 3), (0, 3, 2), (4, 6, 7), (4, 7, 5), (0, 4, 5), (0, 5, 1)]
    faces += [(2, 3, 7), (2, 7, 6), (0, 2, 6), (0, 6, 4), (1, 5, 7), (1, 7, 3)]
    return Surface(corners, corners / np.linalg.norm(corners, axis=1)[:, None], np.array(faces))


def make_curves(scene, record):
    clock = scene.clock
    frames = np.array([float(k / clock.frame.fraction) for k in range(clock.frame_count)])
    contacts = [float(Fraction(event.begin_s) - clock.begin) for event in record.events]
    keys = np.unique(np.concatenate([frames, contacts]))
    places = np.searchsorted(keys, frames)
    turn = np.column_stack([0.1 + 0 * keys, np.sin(keys), 0.2 * np.sin(keys), np.cos(keys)])
    turn /= np.linalg.norm(turn, axis=1)[:, None]
    place = np.column_stack([0.3 * keys, 1.0 - 0.1 * keys**2, np.sin(keys)])
    weights = np.column_stack([np.sin(9 * keys), np.cos(7 * keys)])
    rng = np.random.default_rng(2)
    body = BodyCurves(
        name="mug",
        place_m=place[places],
        turn=turn[places],
        weights=weights[places],
        mode_numbers=np.array([1, 3]),
        labels=("mode_1", "mode_3"),
        kinds=("ring", "ring"),
        ring="readable",
        gain=250.0,
        true_hz=np.array([440.0, 1210.5]),
        shown_hz=np.array([1.2, 3.4]),
        unresolved_m=1e-7 * np.exp(-frames),
        force_peak_n=np.where(np.arange(len(frames)) == 15, 98.7, 0.0),
        mesh=box(),
        targets=1e-3 * rng.normal(size=(2, 8, 3)),
        key_place_m=place,
        key_turn=turn,
        key_weights=weights,
    )
    return Curves(times_s=frames, key_times_s=keys, frame_keys=places, bodies=(body,))


def make_sound(scene, record):
    """Decaying partials from each hit on, at the exact sample times."""
    times = np.arange(scene.clock.sample_count) / scene.clock.sample_rate
    out = np.zeros(len(times))
    for event in record.events:
        since = times - float(Fraction(event.begin_s) - scene.clock.begin)
        for hertz, decay, part in ((440.0, 20.0, 0.5), (1210.5, 30.0, 0.3), (5003.0, 60.0, 0.2)):
            ring = part * np.exp(-decay * np.maximum(since, 0.0)) * np.sin(2 * np.pi * hertz * since)
            out += np.where(since >= 0.0, ring, 0.0)
    return 0.6 * out[:, None]


def make_take(out, *, scene=None, record=None, late_samples=0):
    """Write a whole take by hand; the sound may be made late on purpose."""
    scene = scene or make_scene()
    record = record or make_record()
    take = Path(out) / "Galley mug"
    take.mkdir()
    path = {end: take / f"Galley mug{end}" for end in (".wav", ".curves.csv", ".events.csv", ".glb", ".json")}
    samples = np.roll(make_sound(scene, record), late_samples, axis=0)
    levels = measure(Delivered(samples, scene.clock.sample_rate, 20.0))
    curves = make_curves(scene, record)
    write_wave(
        path[".wav"],
        samples,
        rate_hz=scene.clock.sample_rate,
        sample_format=scene.sound.format,
        heading=heading(scene, record, levels),
    )
    write_curves(path[".curves.csv"], curves, scene)
    write_events(path[".events.csv"], record, scene)
    write_glb(path[".glb"], curves, scene, record)
    inertia = SimpleNamespace(mass_kg=0.6)
    modes = SimpleNamespace(
        heard=20, heard_hz=20e3, count=45, solved_hz=80e3, swing=0, residual=np.array([1e-12, 3e-11])
    )
    names = tuple(mic.name for mic in scene.mics)
    still = make_sound(scene, record)
    begins = [[float(Fraction(event.begin_s) - scene.clock.begin)] for event in record.events]
    pieces = excerpts_of(20.0 * still, np.array(begins), rate_hz=scene.clock.sample_rate, channels=names)
    late = Arrivals(0.003, {"mug": dict.fromkeys(names, 0.0)}, {"mug": 0.0})
    write_manifest(
        path[".json"],
        scene,
        record,
        bodies=[SimpleNamespace(name="mug", family="line", inertia=inertia)],
        modes=[modes],
        heard=Heard(levels, names, late, pieces),
        curves=curves,
        warnings=["body 'mug': a word to the wise"],
        files=[file for end, file in path.items() if end != ".json"],
    )
    return take


@pytest.fixture
def kit():
    """The makers above, for tests that cannot import this file."""
    return SimpleNamespace(
        scene=make_scene,
        record=make_record,
        curves=make_curves,
        sound=make_sound,
        take=make_take,
        ledger=Ledger,
    )
