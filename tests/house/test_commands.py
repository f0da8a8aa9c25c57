"""Every command through the real command line: exit codes, both streams, JSON."""

from __future__ import annotations

import json
import math
import os
import signal
import subprocess
import sys
import time

import pytest

COMMANDS = ["take", "modes", "presets", "new", "check", "play"]
DAMPING = ["material", "thermoelastic", "support", "radiation"]


@pytest.fixture(scope="session")
def taken(tmp_path_factory, cache):
    """A finished take of the small scene, made by the command."""
    from tests.house.conftest import SMALL, Shell

    folder = tmp_path_factory.mktemp("takes")
    (folder / "spoon.toml").write_text(SMALL, encoding="utf-8")
    outcome = Shell(folder, cache).run("take", "spoon.toml", "--out", "takes")
    assert outcome.code == 0, outcome.err
    return folder / "takes" / "Galley spoon", outcome


LOADED = """
import sys
before, code = set(sys.modules), 0
try:
    from resonate.cli import main
    main(sys.argv[1:])
except SystemExit as leaving:
    code = leaving.code
print("\\n", *sorted({name.split(".")[0] for name in set(sys.modules) - before}), file=sys.stderr)
sys.exit(code)
"""


@pytest.mark.parametrize("words", [["--help"], ["-h"], ["--version"], *([name, "--help"] for name in COMMANDS)])
def test_help_loads_nothing_but_the_standard_library_and_click(shell, words):
    done = subprocess.run(
        [sys.executable, "-c", LOADED, *words],
        capture_output=True, check=False, text=True, cwd=shell.folder, env=shell.environment,
    )  # fmt: skip
    assert done.returncode == 0
    assert done.stdout.strip()
    loaded = set(done.stderr.split())
    assert "click" in loaded
    # colorama is how click writes colours on Windows.
    assert loaded - sys.stdlib_module_names == {"click", "resonate"} | (loaded & {"colorama"})


def test_help_names_every_command_on_one_whole_line_of_a_narrow_terminal(shell):
    text = shell.run("--help", environment={"COLUMNS": "80"}).out
    assert all(f"\n  {name} " in text for name in COMMANDS)
    assert "..." not in text.partition("Commands:")[2]
    for name in COMMANDS:
        told = shell.run(name, "--help", environment={"COLUMNS": "80"}).out
        assert max(map(len, told.splitlines())) <= 80


def test_modes_say_in_which_way_they_move(shell, small):
    # A free bar of 20 x 4 mm: bending over the thin side is 5 times lower than over the wide one, and frequencies of
    # stretching are n c / 2 L with c = sqrt(E / rho) (any text on vibration). Steel, 200 mm: E = 2.1e11, 7850.
    text = small.read_text(encoding="utf-8").replace('heard = "6 kHz", solved = "12 kHz", most = 20', 'heard = "20 kHz"')
    small.write_text(text, encoding="utf-8")
    for _ in range(2):  # solved, then from the store
        (body,) = json.loads(shell.run("modes", small.name, "--json").out)["bodies"]
        by_motion = {}
        for mode in body["modes"]:
            by_motion.setdefault(mode["motion"], []).append(mode["frequency_hz"])
        assert set(by_motion) == {"up", "across", "along", "twist"}
        assert by_motion["across"][0] == pytest.approx(5.0 * by_motion["up"][0], rel=0.05)
        assert by_motion["along"][0] == pytest.approx(math.sqrt(2.1e11 / 7850) / 0.4, rel=5e-3)
    shown = shell.run("modes", small.name).out
    assert " twist " in shown
    assert "6 rigid motions" in shown


def test_what_is_one_is_not_called_many(shell, small):
    # A bar that is hinged at one end about one axis swings, and does nothing else as a whole.
    hinge = 'support = [{where = "left", hold = {fix = ["x", "y", "z", "rx", "ry"]}}]'
    text = small.read_text(encoding="utf-8").replace("floating = true", hinge)
    small.write_text(text, encoding="utf-8")
    assert "1 rigid motion\n" in shell.run("modes", small.name).out.replace("  ", "\n")


def test_importing_the_package_loads_nothing_heavy(shell):
    code = "import sys, resonate; print(resonate.__version__); print(*{n.split('.')[0] for n in sys.modules})"
    done = subprocess.run(
        [sys.executable, "-c", code], capture_output=True, check=True, text=True, env=shell.environment
    )
    version, loaded = done.stdout.splitlines()
    assert version.count(".") == 2
    heavy = {"numpy", "scipy", "numba", "pydantic", "librosa", "soundfile", "sounddevice", "skfem", "rich", "click"}
    assert heavy & set(loaded.split()) == set()


def test_take_says_where_it_is_and_what_it_holds(taken):
    folder, outcome = taken
    first, *rest = outcome.out.splitlines()
    assert first.replace("\\", "/") == "takes/Galley spoon"
    assert [line.split()[0] for line in rest] == ["events", "peak", "ledger"]
    # Warnings, and nothing else, while no terminal shows progress.
    assert all(line.startswith("warning: ") for line in outcome.err.splitlines())
    endings = ["", ".curves.csv", ".events.csv", ".glb", ".json", ".wav"]
    assert sorted(file.name for file in folder.iterdir()) == [f"Galley spoon{ending}" for ending in endings[1:]]
    assert [entry.name for entry in folder.parent.iterdir()] == ["Galley spoon"]


def test_a_take_is_kept_unless_replace_is_given(shell, small):
    assert shell.run("take", small.name).code == 0
    sound = shell.folder / "Galley spoon" / "Galley spoon.wav"
    before = sound.read_bytes()
    sound.write_bytes(b"kept")
    refused = shell.run("take", small.name)
    assert refused.code == 2
    assert "--replace" in refused.err
    assert refused.out == ""
    assert sound.read_bytes() == b"kept"
    assert shell.run("take", small.name, "--replace").code == 0
    assert sound.read_bytes() == before


def test_modes_as_json_are_what_is_promised(shell, small):
    outcome = shell.run("modes", small.name, "--json")
    assert outcome.code == 0
    told = json.loads(outcome.out)
    assert list(told) == ["bodies"]
    (body,) = told["bodies"]
    assert list(body) == ["name", "mass_kg", "modes"]
    assert body["name"] == "spoon"
    # 200 x 20 x 4 mm of steel at 7850 kg/m^3 (EN 1993-1-1, 3.2.6).
    assert body["mass_kg"] == pytest.approx(0.1256, rel=2e-3)
    assert len(body["modes"]) > 8
    for number, mode in enumerate(body["modes"], 1):
        assert list(mode) == ["number", "frequency_hz", "motion", "t60_s", "damping"]
        assert mode["number"] == number
        assert list(mode["damping"]) == DAMPING
        assert all(rate >= 0.0 for rate in mode["damping"].values())
        # 60 dB are a factor of a thousand in amplitude.
        assert mode["t60_s"] == pytest.approx(math.log(1e3) / sum(mode["damping"].values()), rel=1e-9)
    frequencies = [mode["frequency_hz"] for mode in body["modes"]]
    assert frequencies == sorted(frequencies)
    assert frequencies[0] > 100.0  # motion as a whole is left out


def test_modes_that_never_decay_have_no_time(shell, small):
    text = small.read_text(encoding="utf-8").replace('"steel"', '{density = 7850, young = "2e11 Pa", loss = 0}')
    small.write_text(text, encoding="utf-8")
    (body,) = json.loads(shell.run("modes", small.name, "--json").out)["bodies"]
    assert {mode["t60_s"] for mode in body["modes"]} == {None}
    assert shell.run("modes", small.name).code == 0


def rows(text):
    """Numbers of the modes that a table shows."""
    cells = [line.replace("\N{BOX DRAWINGS LIGHT VERTICAL}", "|").split("|") for line in text.splitlines()]
    return [int(parts[1]) for parts in cells if len(parts) > 2 and parts[1].strip().isdigit()]


def test_the_table_of_modes_stays_readable(shell, small):
    text = small.read_text(encoding="utf-8").replace('heard = "6 kHz", solved = "12 kHz", most = 20', "most = 60")
    small.write_text(text, encoding="utf-8")
    count = len(json.loads(shell.run("modes", small.name, "--json").out)["bodies"][0]["modes"])
    assert count > 40
    short = shell.run("modes", small.name)
    assert rows(short.out) == list(range(1, 25))
    assert f"and {count - 24} more" in short.out
    assert f"--most {count}" in short.out
    assert f"{count} modes (" in short.out
    whole = shell.run("modes", small.name, "--most", count)
    assert rows(whole.out) == list(range(1, count + 1))
    assert " more" not in whole.out
    assert rows(shell.run("modes", small.name, "--most", 3).out) == [1, 2, 3]
    told = json.loads(shell.run("modes", small.name, "--most", 3, "--json").out)
    assert [mode["number"] for mode in told["bodies"][0]["modes"]] == [1, 2, 3]
    assert shell.run("modes", small.name, "--most", 0).code == 2


def test_presets_are_listed_by_kind(shell):
    everything = json.loads(shell.run("presets", "--json").out)
    assert list(everything) == ["materials", "strikers"]
    assert len(everything["materials"]) >= 40
    assert len(everything["strikers"]) >= 15
    plain = shell.run("presets").out
    for kind, names in everything.items():
        table = json.loads(shell.run("presets", kind, "--json").out)
        assert list(table) == names
        shown = shell.run("presets", kind)
        assert shown.code == 0
        assert f"{kind} ({len(names)})" in shown.out
        assert f"{kind} ({len(names)}): " in plain
    unknown = shell.run("presets", "materiel")
    assert unknown.code == 2
    assert "did you mean 'materials'?" in unknown.err


def test_a_terminal_without_the_letters_still_lists(shell):
    for words in (["presets", "materials"], ["presets", "strikers", "--json"], ["presets"]):
        outcome = shell.run(*words, environment={"PYTHONIOENCODING": "ascii", "PYTHONUTF8": "0"})
        assert outcome.code == 0, outcome.err
        assert outcome.out


def test_new_writes_a_scene_that_runs(shell):
    outcome = shell.run("new", "quay")
    assert (outcome.code, outcome.out) == (0, "quay.toml\n")
    before = (shell.folder / "quay.toml").read_bytes()
    refused = shell.run("new", "quay")
    assert refused.code == 2
    assert "exists and is kept" in refused.err
    assert (shell.folder / "quay.toml").read_bytes() == before
    assert shell.run("take", "quay.toml").code == 0
    assert shell.run("check", "quay").code == 0
    assert shell.run("new", "nowhere/quay").code == 2


@pytest.mark.parametrize("name", ["", ".", "..", "stores/.."])
def test_new_refuses_what_names_no_file(shell, name):
    outcome = shell.run("new", name)
    assert outcome.code == 2
    assert "names no file" in outcome.err
    assert list(shell.folder.rglob("*")) == []


@pytest.mark.parametrize("name", ['my "quay"', "quay.toml", "a{b}c", "50 % off"])
def test_new_takes_any_name(shell, name):
    if os.name == "nt" and '"' in name:
        pytest.skip("not a file name on this system")
    outcome = shell.run("new", name)
    assert outcome.code == 0, outcome.err
    assert outcome.out == f"{name.removesuffix('.toml')}.toml\n"
    assert shell.run("modes", outcome.out.strip(), "--most", 1).code == 0


def test_new_copies_an_example(shell, root):
    assert shell.run("new", "rack", "--from", "galley_rack").code == 0
    assert (shell.folder / "rack.toml").read_bytes() == (root / "examples" / "galley_rack.toml").read_bytes()
    unknown = shell.run("new", "other", "--from", "galley")
    assert unknown.code == 2
    assert "galley_rack" in unknown.err
    assert not (shell.folder / "other.toml").exists()


def test_check_finds_a_sound_take_sound(taken, shell):
    folder, _ = taken
    outcome = shell.run("check", folder)
    assert outcome.code == 0
    assert outcome.err == ""
    assert all(line.startswith("ok ") for line in outcome.out.splitlines())
    told = json.loads(shell.run("check", folder, "--json", "--again").out)
    assert list(told) == ["take", "ok", "findings"]
    assert told["ok"] is True
    assert set(told["findings"][0]) == {"name", "measured", "limit", "ok", "where", "fix"}
    assert any(finding["name"].startswith("sound at") for finding in told["findings"])


def test_check_finds_a_broken_take_broken(shell, small):
    assert shell.run("take", small.name).code == 0
    sound = shell.folder / "Galley spoon" / "Galley spoon.wav"
    bytes_ = bytearray(sound.read_bytes())
    bytes_[-100] ^= 0x40
    sound.write_bytes(bytes_)
    outcome = shell.run("check", "Galley spoon")
    assert outcome.code == 1
    assert "FAULT" in outcome.out
    assert "fix: " in outcome.err
    assert "Traceback" not in outcome.err
    told = shell.run("check", "Galley spoon", "--json")
    assert told.code == 1
    assert json.loads(told.out)["ok"] is False
    sound.unlink()
    assert shell.run("check", "Galley spoon").code == 1
    (shell.folder / "Galley spoon" / "Galley spoon.json").write_text("{", encoding="utf-8")
    assert shell.run("check", "Galley spoon").code == 1


@pytest.mark.parametrize(
    ("words", "said"),
    [
        ([], "Usage"),
        (["tak"], "No such command 'tak'"),
        (["take"], "Missing argument"),
        (["take", "a.toml", "--ouy", "b"], "No such option"),
        (["modes", "a.toml", "b.toml"], "unexpected extra argument"),
        (["play", "a.toml", "--gain-db", "99"], "not in the range"),
        (["take", "a.toml"], "no such file"),
        (["modes", "."], "folder"),
        (["check", "a"], "no such folder"),
        (["check", "."], "no manifest"),
    ],
)
def test_what_the_command_line_does_not_know_is_bad_input(shell, words, said):
    outcome = shell.run(*words)
    assert outcome.code == 2
    assert said in outcome.err
    assert outcome.out == ""
    assert "Traceback" not in outcome.err


BOOM = "import resonate.scene.read as room\ndef boom(path): raise ArithmeticError('rope parted')\nroom.read_scene = boom"


@pytest.mark.parametrize("words", [["take", "a.toml"], ["modes", "a.toml"]])
def test_a_defect_of_ours_is_owned(shell, words):
    outcome = shell.run(*words, before=BOOM)
    assert outcome.code == 3
    assert "defect: ArithmeticError: rope parted" in outcome.err
    assert "--debug" in outcome.err
    assert "Traceback" not in outcome.err
    for line in (["--debug", *words], [*words, "--debug"]):
        outcome = shell.run(*line, before=BOOM)
        assert outcome.code == 3
        assert "Traceback" in outcome.err
        assert "in boom" in outcome.err


def test_debug_shows_where_bad_input_was_refused(shell):
    outcome = shell.run("modes", "nowhere.toml", "--debug")
    assert outcome.code == 2
    assert "Traceback" in outcome.err


def test_a_stop_inside_compiled_code_is_no_defect(shell):
    boom = "def boom(path):\n try: raise KeyboardInterrupt\n except BaseException as e: raise SystemError from e"
    outcome = shell.run("modes", "a.toml", before=BOOM.replace("def boom(path): raise ArithmeticError('rope parted')", boom))
    assert (outcome.code, outcome.err) == (130, "stopped\n")


def test_too_little_memory_is_not_called_a_defect(shell, small):
    before = "import resonate.run.engine as room\ndef boom(*a, **k): raise MemoryError('80 GiB')\nroom.run = boom"
    outcome = shell.run("take", small.name, before=before)
    assert outcome.code == 2
    assert "not enough memory: 80 GiB" in outcome.err
    assert "take.length" in outcome.err
    assert [entry.name for entry in shell.folder.iterdir()] == [small.name]


def test_a_reader_that_leaves_early_is_no_error(shell):
    process = shell.start("presets", "materials", "--json")
    process.stdout.close()
    _, err = process.communicate(timeout=60)
    assert (process.returncode, err) == (0, b"")


@pytest.mark.skipif(os.name == "nt", reason="no such terminals there")
def test_warnings_do_not_run_into_the_live_line_of_a_terminal(shell, root):
    import pty

    ours, theirs = pty.openpty()
    process = subprocess.Popen(
        shell.command("modes", root / "examples" / "landing_boards.toml", "--most", "1"),
        stdout=subprocess.PIPE, stderr=theirs, cwd=shell.folder, env=shell.environment | {"TERM": "xterm"},
    )  # fmt: skip
    os.close(theirs)
    said = b""
    with os.fdopen(ours, "rb", buffering=0) as terminal, process.stdout:
        while True:
            try:
                part = terminal.read(4096)
            except OSError:  # how some systems tell that the other end is closed
                break
            if not part:
                break
            said += part
        process.stdout.read()
    assert process.wait() == 0
    assert b"warning: " in said
    # Each begins where the live line was taken away.
    assert said.count(b"\x1b[2Kwarning: ") + said.count(b"\nwarning: ") == said.count(b"warning: ")


@pytest.mark.skipif(os.name == "nt", reason="signals are another matter there")
@pytest.mark.parametrize("later_s", [0.0, 0.6, 1.2, 1.8, 2.4])
def test_stopped_by_hand_leaves_nothing(shell, small, later_s):
    text = small.read_text(encoding="utf-8").replace('"0.4 s"', '"900 s"')
    small.write_text(text, encoding="utf-8")
    process = shell.start("take", small.name, "--out", "takes")
    while not list(shell.folder.glob("takes/*.partial-*")):
        assert process.poll() is None
        time.sleep(0.01)
    time.sleep(later_s)
    process.send_signal(signal.SIGINT)
    out, err = process.communicate(timeout=60)
    # A library whose import was cut short lets the interpreter die of the signal, which shells call 130 too.
    assert process.returncode in (130, -signal.SIGINT)
    assert out == b""
    assert err.decode().splitlines()[-1] == "stopped"
    assert b"Traceback" not in err
    assert [entry.name for entry in shell.folder.iterdir()] == [small.name]
