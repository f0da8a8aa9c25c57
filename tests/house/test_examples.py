"""The examples run as they are, their takes are sound, and together they show everything there is."""

from __future__ import annotations

import hashlib
import json
from pathlib import Path

import pytest
import soundfile

from resonate.scene.bodies import NAMED_HOLDS
from resonate.scene.model import CordHold, FixHold, NamedHold, SpringHold
from resonate.scene.read import read_scene
from resonate.scene.shapes import OUTLINES, SHAPES
from resonate.take.check import check_take

EXAMPLES = sorted((Path(__file__).resolve().parents[2] / "examples").glob("*.toml"))


@pytest.mark.parametrize("path", EXAMPLES, ids=lambda path: path.stem)
def test_an_example_makes_a_sound_take(shell, path):
    outcome = shell.run("take", path)
    assert outcome.code == 0, outcome.err
    title = outcome.out.splitlines()[0]
    checked = shell.run("check", title)
    assert checked.code == 0, checked.err
    # Loud enough to hear, quiet enough for 24 bit to hold.
    peak = float(outcome.out.split("SPL, ")[1].split(" dBFS")[0])
    assert -40.0 < peak <= 0.0


def test_together_they_show_every_shape_outline_and_support():
    bodies = [body for path in EXAMPLES for body in read_scene(path).bodies]
    # A solid needs a file beside the scene: examples are copied one by one.
    assert {body.shape.kind for body in bodies} == set(SHAPES) - {"solid"}
    outlines = {body.shape.outline.kind for body in bodies if hasattr(body.shape, "outline")}
    assert outlines == set(OUTLINES)
    holds = [entry.hold for body in bodies for entry in body.support]
    assert {hold.kind for hold in holds if isinstance(hold, NamedHold)} == set(NAMED_HOLDS)
    assert {FixHold, SpringHold, CordHold} <= {type(hold) for hold in holds}
    assert any(not body.support for body in bodies)
    assert any(body.floating for body in bodies)
    assert any(body.held for body in bodies)
    bars = [body.shape for body in bodies if body.shape.kind == "bar"]
    assert any(bar.profile for bar in bars)
    assert any(bar.diameter_m for bar in bars)


def test_each_says_where_it_comes_from_and_what_it_shows():
    assert len(EXAMPLES) >= 3
    for path in EXAMPLES:
        lines = path.read_text(encoding="utf-8").splitlines()
        assert lines[0].startswith("# ")
        assert "Saltmarrow" in lines[0] or "Quillhaven" in lines[0]
        assert read_scene(path).strikes


def late(take, samples):
    """Move the sound of a take by so many samples and make the manifest's hash of it true again."""
    sound, manifest = take / f"{take.name}.wav", take / f"{take.name}.json"
    facts = soundfile.info(sound)
    width = facts.channels * {"PCM_16": 2, "PCM_24": 3, "FLOAT": 4}[facts.subtype]
    data = sound.read_bytes()
    begin = data.index(b"data" + (facts.frames * width).to_bytes(4, "little")) + 8
    end = begin + facts.frames * width
    data = data[:begin] + bytes(samples * width) + data[begin : end - samples * width] + data[end:]
    sound.write_bytes(data)
    told = json.loads(manifest.read_text(encoding="utf-8"))
    for entry in told["files"]:
        if entry["name"] == sound.name:
            entry["sha256"] = hashlib.sha256(data).hexdigest()
    manifest.write_text(json.dumps(told), encoding="utf-8")


@pytest.mark.parametrize("path", EXAMPLES, ids=lambda path: path.stem)
def test_a_sound_that_was_moved_is_found_in_every_example(shell, path):
    outcome = shell.run("take", path)
    take = shell.folder / outcome.out.splitlines()[0]
    report = check_take(take)
    measured = [finding for finding in report.findings if finding.name.endswith(("against the run", "the contacts"))]
    assert {finding.ok for finding in measured} == {True}
    late(take, 1)
    found = {finding.name for finding in check_take(take).findings if finding.ok is False}
    assert any(name.endswith("against the run") for name in found)
    # A tenth of a second late is found by the contacts alone as well.
    late(take, round(0.1 * soundfile.info(take / f"{take.name}.wav").samplerate))
    found = {finding.name for finding in check_take(take).findings if finding.ok is False}
    assert any(name.endswith("against the run") for name in found)
    assert any(name.startswith("first sound") for name in found)
