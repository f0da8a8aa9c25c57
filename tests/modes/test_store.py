"""The store: hits, misses, damage, strangers, crowds and locked doors."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from resonate.modes import store as store_module
from resonate.modes.solve import solve_modes
from resonate.modes.store import ModeStore, content_key, default_store

ROOT = Path(__file__).resolve().parents[2]
ARRAYS = ("omega", "shape", "rigid", "residual")


def same(one, two):
    assert (one.body, one.key, one.heard, one.swing) == (two.body, two.key, two.heard, two.swing)
    assert (one.heard_hz, one.solved_hz, one.warnings) == (two.heard_hz, two.solved_hz, two.warnings)
    for name in ARRAYS:
        assert getattr(one, name).tobytes() == getattr(two, name).tobytes()
    for cause in store_module.CAUSES:
        assert getattr(one.decay, cause).tobytes() == getattr(two.decay, cause).tobytes()


@pytest.fixture
def body(make):
    return make.Body(*make.spar(20), free=True, loss=((500.0, 1e-3), (5000.0, 3e-3)), warnings=("thin",))


@pytest.fixture
def store(tmp_path):
    return ModeStore(tmp_path / "kept")


def test_second_solution_is_read_and_equal_to_the_bit(body, store):
    first = solve_modes(body, store=store)
    second = solve_modes(body, store=store)

    assert body.assembled == 1
    same(first, second)
    same(first, solve_modes(body))
    assert "thin" in first.warnings


@pytest.mark.parametrize(
    "change",
    [
        {"key": "post-2"},
        {"loss": ((500.0, 2e-3),)},
        {"heard_hz": 1e6},
        {"solved_hz": 5.0},
        {"most": 12},
    ],
)
def test_whatever_modes_depend_on_makes_another_entry(make, body, store, change):
    solve_modes(body, store=store)
    for name, value in change.items():
        if hasattr(body.bands, name):
            body.bands = make.Bands(**{name: value})
        else:
            setattr(body, name, value)

    changed = solve_modes(body, store=store)

    assert body.assembled == 2
    same(changed, solve_modes(body))


def test_the_name_is_not_part_of_the_content(body, store):
    solve_modes(body, store=store)
    body.name = "other post"

    assert solve_modes(body, store=store).body == "other post"
    assert body.assembled == 1


def test_any_flipped_bit_is_noticed_and_repaired(body, store):
    good = solve_modes(body, store=store)
    (path,) = store.path.iterdir()
    sound = path.read_bytes()
    generator = np.random.default_rng(4)
    # Everywhere in the file, and densely where the zip directory and the array headers are.
    ends = np.arange(1, 300, 3)
    places = np.r_[generator.integers(0, len(sound), 150), ends, len(sound) - ends]
    for place in places:
        damaged = bytearray(sound)
        damaged[place] ^= 1 << int(generator.integers(8))
        path.write_bytes(damaged)
        entry = store.load("modes", path.stem.removeprefix("modes-"))
        if entry is not None:  # a byte that means nothing, such as the time in the zip directory
            for name in ARRAYS:
                assert entry.arrays[name].tobytes() == getattr(good, name).tobytes()

    # In the arrays themselves nothing goes unnoticed.
    middle = bytearray(sound)
    middle[len(sound) // 2] ^= 4
    path.write_bytes(middle)
    before = body.assembled
    same(solve_modes(body, store=store), good)
    assert body.assembled == before + 1
    assert path.read_bytes() == sound


@pytest.mark.parametrize("length", [0, 1, 100, 5000, -1])
def test_truncated_entry_is_rebuilt(body, store, length):
    good = solve_modes(body, store=store)
    (path,) = store.path.iterdir()
    path.write_bytes(path.read_bytes()[:length])

    same(solve_modes(body, store=store), good)
    assert body.assembled == 2


def test_entry_of_another_body_under_this_name_is_a_miss(make, body, store):
    solve_modes(body, store=store)
    (path,) = store.path.iterdir()
    other = make.Body(*make.chain(7), key="buoy")
    solve_modes(other, store=store)
    (foreign,) = set(store.path.iterdir()) - {path}
    path.write_bytes(foreign.read_bytes())

    assert solve_modes(body, store=store).count != 7
    assert body.assembled == 2


def test_entry_of_another_version_is_a_miss(body, store, monkeypatch):
    solve_modes(body, store=store)
    monkeypatch.setattr(store_module, "FORMAT", store_module.FORMAT + 1)

    solve_modes(body, store=store)

    assert body.assembled == 2


def test_other_solver_has_other_keys(body, store, monkeypatch):
    solve_modes(body, store=store)
    monkeypatch.setattr(store_module, "SOLVER", store_module.SOLVER + 1)

    solve_modes(body, store=store)

    assert len(list(store.path.iterdir())) == 2


def test_something_that_is_no_archive_is_a_miss(store):
    store.path.mkdir()
    rubbish = (b"", b"not an archive", b"PK\x03\x04" + bytes(60), b"\x93NUMPY\x01\x00v\x00{")
    for number, text in enumerate(rubbish):
        store.place("modes", str(number)).write_bytes(text)
        assert store.load("modes", str(number)) is None
    store.place("modes", "folder").mkdir()
    assert store.load("modes", "folder") is None
    # A lone array, and an archive that would need unpickling.
    np.save(store.path / "x.npy", np.zeros(3))
    (store.path / "x.npy").rename(store.place("modes", "lone"))
    assert store.load("modes", "lone") is None
    np.savez(store.place("modes", "pickle"), header=np.array([{}], dtype=object))
    assert store.load("modes", "pickle") is None


def test_folder_that_cannot_be_written_is_a_warning(body, tmp_path):
    (tmp_path / "file").write_text("in the way")

    modes = solve_modes(body, store=ModeStore(tmp_path / "file" / "kept"))

    assert modes.count > 0
    (warning,) = (note for note in modes.warnings if "could not be kept" in note)
    assert "RESONATE_CACHE" in warning


def test_full_disk_leaves_nothing_behind(body, store, monkeypatch):
    def full(*_, **__):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(store_module.np, "savez", full)

    modes = solve_modes(body, store=store)

    assert any("No space left on device" in note for note in modes.warnings)
    assert list(store.path.iterdir()) == []


WRITER = """
import sys
import numpy as np
from resonate.modes.store import ModeStore
store = ModeStore(sys.argv[1])
arrays = {"x": np.arange(40_000.0) + int(sys.argv[2])}
seen = 0
for _ in range(60):
    assert store.save("modes", "same", arrays) == ""
    entry = store.load("modes", "same")
    assert entry is not None
    first = entry.arrays["x"][0]
    assert np.array_equal(entry.arrays["x"], np.arange(40_000.0) + first)
"""


def test_writers_at_the_same_time_never_mix(store):
    commands = [[sys.executable, "-c", WRITER, str(store.path), str(number)] for number in (1, 2, 3)]
    crowd = [
        subprocess.Popen(command, cwd=ROOT, stderr=subprocess.PIPE, env={"PYTHONPATH": str(ROOT)})
        for command in commands
    ]

    for process in crowd:
        _, errors = process.communicate(timeout=120)
        assert process.returncode == 0, errors.decode()
    assert [path.name for path in store.path.iterdir()] == ["modes-same.npz"]


def test_entry_bytes_are_repeatable(store):
    arrays = {"b": np.arange(5.0), "a": np.eye(2)}
    store.save("side", "k", arrays, facts={"z": 1, "y": "s"})
    first = store.place("side", "k").read_bytes()
    store.save("side", "k", arrays, facts={"y": "s", "z": 1})

    assert store.place("side", "k").read_bytes() == first
    entry = store.load("side", "k")
    assert entry.facts == {"z": 1, "y": "s"}
    np.testing.assert_array_equal(entry.arrays["a"], np.eye(2))
    assert store.load("other", "k") is None


def test_content_key_tells_values_types_and_shapes_apart():
    keys = {
        content_key(*parts)
        for parts in (
            ("a", "b"),
            ("ab",),
            (1, 2),
            (12,),
            (1.0,),
            (1,),
            ("1",),
            (np.zeros(4),),
            (np.zeros((2, 2)),),
            (np.zeros(4, dtype=np.float32),),
            (np.zeros(4), "x"),
        )
    }

    assert len(keys) == 11
    assert content_key(np.arange(3.0), "x") == content_key(np.arange(6.0)[:3], "x")


def test_default_store_follows_the_environment(tmp_path, monkeypatch):
    monkeypatch.setenv("RESONATE_CACHE", str(tmp_path))
    assert default_store().path == tmp_path / "modes"
    monkeypatch.delenv("RESONATE_CACHE")
    assert default_store().path.name == "modes"
    assert "resonate" in default_store().path.parts
