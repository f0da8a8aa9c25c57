"""A take appears whole or not at all."""

from __future__ import annotations

import errno
import os
import random
import shutil
import signal
import subprocess
import sys
import threading
import time
from pathlib import Path

import pytest

from resonate.errors import TakeError
from resonate.take import folder as folder_module
from resonate.take.folder import building, safe_name

DIGEST = "0123456789abcdef" * 4
LINUX = sys.platform.startswith("linux")


def make(out, text="first", *, name="Galley mug", digest=DIGEST, replace=False):
    with building(out, name, digest=digest, replace=replace) as place:
        place.file(".wav").write_text(text)
        place.file(".json").write_text(text)
    return out / name


def texts(folder):
    return {entry.name: entry.read_text() for entry in folder.iterdir()}


def test_it_appears_and_nothing_else_does(tmp_path):
    out = tmp_path / "takes" / "galley"
    take = make(out)
    assert texts(take) == {"Galley mug.wav": "first", "Galley mug.json": "first"}
    assert list(out.iterdir()) == [take]


def test_it_is_not_there_before_it_is_whole(tmp_path):
    with building(tmp_path, "mug", digest=DIGEST, replace=False) as place:
        place.file(".wav").write_text("half")
        assert [entry.name for entry in tmp_path.iterdir()] == [f"mug.partial-{DIGEST[:12]}"]
    assert [entry.name for entry in tmp_path.iterdir()] == ["mug"]


@pytest.mark.parametrize("error", [ValueError, KeyboardInterrupt, OSError])
def test_an_error_leaves_nothing_behind(tmp_path, error):
    out = tmp_path / "new" / "takes"
    with pytest.raises((error, TakeError)), building(out, "mug", digest=DIGEST, replace=False) as place:
        place.file(".wav").write_text("half")
        raise error
    assert list(tmp_path.iterdir()) == []


def test_an_error_while_replacing_keeps_the_old_one(tmp_path):
    take = make(tmp_path)
    with pytest.raises(ValueError, match="no"), building(tmp_path, take.name, digest=DIGEST, replace=True):
        raise ValueError("no")
    assert set(texts(take).values()) == {"first"}
    assert list(tmp_path.iterdir()) == [take]


def test_an_existing_take_is_kept(tmp_path):
    take = make(tmp_path)
    with pytest.raises(TakeError, match="already there|is there already") as caught:
        make(tmp_path, "second")
    assert set(texts(take).values()) == {"first"}
    assert "--replace" in caught.value.faults[0].fix
    assert list(tmp_path.iterdir()) == [take]


@pytest.mark.parametrize("at_once", [True, False])
def test_replace_swaps(tmp_path, monkeypatch, at_once):
    if not at_once:
        monkeypatch.setattr(folder_module, "exchange", lambda *_: False)
    take = make(tmp_path)
    (take / "Galley mug.curves.csv").write_text("only in the old one")
    make(tmp_path, "second", replace=True)
    assert texts(take) == {"Galley mug.wav": "second", "Galley mug.json": "second"}
    assert list(tmp_path.iterdir()) == [take]


@pytest.mark.skipif(not LINUX, reason="the one-step exchange is tried on Linux only")
def test_folders_change_places_in_one_step(tmp_path):
    first, second = tmp_path / "a", tmp_path / "b"
    first.mkdir()
    second.mkdir()
    (first / "one").touch()
    if not folder_module.exchange(first, second):
        pytest.skip("this file system cannot exchange")
    assert (second / "one").exists()
    assert not (first / "one").exists()


@pytest.mark.skipif(not LINUX, reason="other systems are allowed a moment between two renames")
def test_the_name_always_shows_a_whole_take(tmp_path):
    take = make(tmp_path, "0")
    (tmp_path / "other").mkdir()
    if not folder_module.exchange(take, tmp_path / "other"):
        pytest.skip("this file system cannot exchange")
    assert folder_module.exchange(take, tmp_path / "other")
    seen, stop = set(), threading.Event()

    def watch():
        while not stop.is_set():
            # Each look goes by the name anew.
            seen.add((take / "Galley mug.wav").exists())
            seen.add((take / "Galley mug.json").exists())

    watcher = threading.Thread(target=watch)
    watcher.start()
    for number in range(60):
        make(tmp_path, str(number), replace=True)
    stop.set()
    watcher.join()
    assert seen == {True}


def test_somebodys_own_files_are_not_replaced(tmp_path):
    take = make(tmp_path)
    (take / "notes.txt").write_text("mine")
    (take / ".DS_Store").write_text("a file manager's")
    with pytest.raises(TakeError, match=r"not part of the take: notes\.txt"):
        make(tmp_path, "second", replace=True)
    assert (take / "notes.txt").read_text() == "mine"
    (take / "notes.txt").unlink()
    make(tmp_path, "second", replace=True)
    assert set(texts(take).values()) == {"second"}


def test_a_file_of_the_same_name_is_not_replaced(tmp_path):
    (tmp_path / "Galley mug").write_text("mine")
    with pytest.raises(TakeError, match="is not a take"):
        make(tmp_path, replace=True)
    assert (tmp_path / "Galley mug").read_text() == "mine"


@pytest.mark.parametrize("below", ["", "deeper/still"])
def test_a_file_where_the_folder_should_be(tmp_path, below):
    blocked = tmp_path / "takes"
    blocked.write_text("a file")
    with pytest.raises(TakeError, match="takes is not a folder"):
        make(blocked / below)
    assert blocked.read_text() == "a file"
    assert list(tmp_path.iterdir()) == [blocked]


@pytest.mark.skipif(not hasattr(os, "geteuid") or os.geteuid() == 0, reason="root may write anywhere")
def test_a_folder_without_leave_to_write(tmp_path):
    tmp_path.chmod(0o500)
    try:
        with pytest.raises(TakeError, match="cannot be written"):
            make(tmp_path)
    finally:
        tmp_path.chmod(0o700)


@pytest.mark.parametrize(
    ("number", "words"),
    [(errno.ENOSPC, "disk is full"), (errno.EACCES, "cannot be written"), (errno.EIO, "cannot be written: ")],
)
def test_a_disk_that_refuses(tmp_path, monkeypatch, number, words):
    def refuse(_):
        raise OSError(number, os.strerror(number))

    monkeypatch.setattr(folder_module.os, "fsync", refuse)
    with pytest.raises(TakeError, match=words) as caught:
        make(tmp_path / "takes")
    assert caught.value.exit_code == 2
    assert list(tmp_path.iterdir()) == []


@pytest.mark.skipif(not Path("/dev/full").exists(), reason="this system has no device that is always full")
def test_a_device_that_is_full(tmp_path):
    with (
        pytest.raises(TakeError, match="disk is full, nothing was written"),
        building(tmp_path, "mug", digest=DIGEST, replace=False) as place,
    ):
        place.file(".wav").symlink_to("/dev/full")
        place.file(".wav").write_bytes(bytes(100_000))
    assert list(tmp_path.iterdir()) == []


def test_trouble_elsewhere_is_not_blamed_on_the_take(tmp_path):
    with pytest.raises(FileNotFoundError), building(tmp_path / "out", "mug", digest=DIGEST, replace=False):
        (tmp_path / "nowhere" / "preset").read_text()
    assert not (tmp_path / "out").exists()


def leave(out, *stems):
    for stem in stems:
        (out / stem).mkdir()
        (out / stem / f"{stem.partition('.')[0]}.wav").write_text("left")


def test_leftovers_are_removed_by_the_next_run(tmp_path):
    make(tmp_path, name="mug")
    leave(tmp_path, "mug.partial-aaaaaaaaaaaa", "mug.old-bbbbbbbbbbbb", "mug.partial-mine")
    make(tmp_path, "second", name="mug", replace=True)
    # What no run names so stays.
    assert sorted(entry.name for entry in tmp_path.iterdir()) == ["mug", "mug.partial-mine"]


@pytest.mark.skipif(sys.platform == "win32", reason="folders are not locked on this system")
def test_leftovers_of_other_takes_go_unless_somebody_builds_them(tmp_path):
    make(tmp_path, name="jug")
    leave(tmp_path, "pot.partial-aaaaaaaaaaaa", "jug.old-bbbbbbbbbbbb", "pan.old-cccccccccccc", "log.partial-dddddddddddd")
    # A folder of somebody's own under such a name.
    (tmp_path / "log.partial-dddddddddddd" / "diary.txt").write_text("kept")
    with building(tmp_path, "cup", digest=DIGEST, replace=False) as place:
        place.file(".wav").write_text("under way")
        make(tmp_path, name="mug")
        left = sorted(entry.name for entry in tmp_path.iterdir())
        # The pan was half swapped: it is whole again.
        assert left == [f"cup.partial-{DIGEST[:12]}", "jug", "log.partial-dddddddddddd", "mug", "pan"]
    assert texts(tmp_path / "cup") == {"cup.wav": "under way"}


@pytest.mark.skipif(sys.platform == "win32", reason="no such locks")
def test_where_nothing_can_be_locked_other_takes_are_left_alone(tmp_path, monkeypatch):
    import fcntl

    def refuse(*_):
        raise OSError(errno.ENOLCK, os.strerror(errno.ENOLCK))

    monkeypatch.setattr(fcntl, "flock", refuse)
    leave(tmp_path, "pot.partial-aaaaaaaaaaaa", "mug.partial-bbbbbbbbbbbb")
    make(tmp_path, name="mug")
    assert sorted(entry.name for entry in tmp_path.iterdir()) == ["mug", "pot.partial-aaaaaaaaaaaa"]


def test_a_take_half_swapped_is_put_back(tmp_path):
    old = tmp_path / "mug.old-bbbbbbbbbbbb"
    make(tmp_path, "old", name="mug").rename(old)
    with pytest.raises(TakeError, match="already"):
        make(tmp_path, "new", name="mug")
    assert set(texts(tmp_path / "mug").values()) == {"old"}
    assert [entry.name for entry in tmp_path.iterdir()] == ["mug"]


@pytest.mark.skipif(sys.platform == "win32", reason="folders are not locked on this system")
def test_a_run_under_way_is_left_alone(tmp_path):
    with building(tmp_path, "mug", digest=DIGEST, replace=False) as place:
        place.file(".wav").write_text("mine")
        with pytest.raises(TakeError, match="another run is building"):
            make(tmp_path, name="mug")
        # Another scene of the same title builds beside it; the first to finish has the name.
        make(tmp_path, "other", name="mug", digest="f" * 64)
        shutil.rmtree(tmp_path / "mug")
    assert texts(tmp_path / "mug") == {"mug.wav": "mine"}


BUILD = """
import sys, time
from pathlib import Path
from resonate.take import folder
if sys.argv[2] == "renames":
    folder.exchange = lambda first, second: False
out, number = Path(sys.argv[1]), 0
print("ready", flush=True)
while True:
    number += 1
    with folder.building(out, "mug", digest="0123456789ab", replace=True) as place:
        for part in range(20):
            place.file(f".{part}").write_text(str(number) * 2000)
"""


@pytest.mark.skipif(sys.platform == "win32", reason="needs SIGKILL")
@pytest.mark.parametrize("how", ["exchange", "renames"])
def test_a_killed_run_leaves_a_whole_take_or_none(tmp_path, how):
    # The moments are drawn at random; what must hold at every one of them is always the same.
    moments = random.Random(4)
    interrupted = 0
    for _ in range(12):
        command = [sys.executable, "-c", BUILD, str(tmp_path), how]
        with subprocess.Popen(command, stdout=subprocess.PIPE, text=True) as run:
            assert run.stdout.readline() == "ready\n"
            time.sleep(moments.uniform(0.0, 0.06))
            run.send_signal(signal.SIGKILL)
        interrupted += any(entry.name != "mug" for entry in tmp_path.iterdir())
        folder_module.tidy(tmp_path, "mug")
        left = sorted(entry.name for entry in tmp_path.iterdir())
        assert left in ([], ["mug"])
        if left:
            contents = texts(tmp_path / "mug")
            assert len(contents) == 20
            assert len(set(contents.values())) == 1
    # Without a single leftover the kills would have shown nothing.
    assert interrupted


@pytest.mark.parametrize(
    ("title", "name"),
    [
        ("Galley mug", "Galley mug"),
        ("  Galley \t mug. ", "Galley mug"),
        ("../../etc/passwd", "_.._etc_passwd"),
        ('a<b>c:d"e/f\\g|h?i*j', "a_b_c_d_e_f_g_h_i_j"),
        ("con", "con_take"),
        ("LPT1.loud", "LPT1_take.loud"),
        ("nul.wav", "nul_take.wav"),
        ("con.x", "con_take.x"),
        ("com1.x.y", "com1_take.x.y"),
        ("Aux .take", "Aux_take.take"),
        ("nullam.x", "nullam.x"),
        ("com10", "com10"),
        ("console", "console"),
        ("...", "take"),
        ("\x00\x1b[31m", "__[31m"),
        ("Kombu\u0308se", "Komb\u00fcse"),
        ("\u202eevil", "evil"),
    ],
)
def test_titles_become_safe_names(title, name):
    assert safe_name(title) == name


def test_long_titles_fit_the_file_system(tmp_path):
    name = safe_name("\u30a8" * 200)
    assert len(name.encode()) <= 120
    assert make(tmp_path, name=name).is_dir()
