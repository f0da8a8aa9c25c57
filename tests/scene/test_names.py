"""Suggestions for names that are nearly right."""

from __future__ import annotations

import pytest

from resonate.scene.faults import keys_of
from resonate.scene.model import BodySpec, MaterialSpec, StrikeSpec
from resonate.scene.names import choose, listing, nearest


@pytest.mark.parametrize(
    ("name", "expected"),
    [
        ("matrial", "material"),
        ("Material", "material"),
        ("suport", "support"),
        ("naem", "name"),
        ("xyzzy", None),
        ("", None),
    ],
)
def test_nearest(name, expected):
    assert nearest(name, keys_of(BodySpec)) == expected


def test_choosing_lists_what_is_allowed():
    assert choose("lef", ["left", "right"]) == "did you mean 'left'? Allowed: left, right"
    assert choose("xyzzy", ["left", "right"]) == "Allowed: left, right"
    assert listing([str(k) for k in range(30)], most=3) == "0, 1, 2, ... (30 in all)"


def test_keys_are_those_of_the_file():
    assert {"density", "young", "from"} <= set(keys_of(MaterialSpec))
    assert not {"density_kg_m3", "name", "kind"} & set(keys_of(MaterialSpec))
    assert {"body", "time", "stays"} <= set(keys_of(StrikeSpec))
    assert not {"body index", "body_index"} & set(keys_of(StrikeSpec))
