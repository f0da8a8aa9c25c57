"""Measures a written take again, with other readers than the ones that wrote it."""

from __future__ import annotations

import functools
import hashlib
import json
import struct
from pathlib import Path
from typing import TYPE_CHECKING, Any, Final

from resonate.errors import TakeError
from resonate.take.again import again_findings
from resonate.take.check_motion import curve_findings, event_findings, glb_findings
from resonate.take.check_sound import sound_findings
from resonate.take.readback import UnreadableError
from resonate.take.report import Finding, Report, same_hash, within

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator

    from resonate.modes.store import ModeStore

    Json = dict[str, Any]  # a JSON object holds any JSON value

#: Share of the energy put in that the ledger may leave unexplained.
LEDGER_LIMIT: Final = 1e-6
_MAKE_AGAIN: Final = "make the take again with --replace"
# What a damaged file can raise while it is read.
_DAMAGE: Final = (
    UnreadableError,
    OSError,
    ValueError,
    KeyError,
    TypeError,
    IndexError,
    AttributeError,
    ZeroDivisionError,
    RuntimeError,
    struct.error,
)


def check_take(path: Path | str, *, again: bool = False, store: ModeStore | None = None) -> Report:
    """Measure a take again and compare it with what it promises.

    Parameters
    ----------
    path : Path or str
        The folder of the take.
    again : bool
        Whether to run the scene once more as well, and to compare contacts and sound with that run to a
        small part of a sample. Takes as long as making the take did.
    store : ModeStore, optional
        Where solved modes are kept; used only with ``again``.

    Returns
    -------
    Report
        One finding a measurement; ``report.raise_faults()`` turns those that fail into an error.

    Raises
    ------
    TakeError
        If the folder is not a take at all.
    """
    folder = Path(path)
    if not folder.is_dir():
        raise TakeError(what="there is no such folder", where=str(path), fix="name the folder of a take")
    file = folder / f"{folder.resolve().name}.json"
    if not file.is_file():
        # A renamed folder keeps the names of its files.
        found = sorted(folder.glob("*.json"))
        if len(found) != 1:
            raise TakeError(
                what="the folder has no manifest, so there is nothing to check it against",
                where=str(path),
                fix='name the folder of a take that was made with "manifest" in take.files',
            )
        file = found[0]
    return Report(folder, tuple(_findings(folder, file, again=again, store=store)))


def _findings(
    folder: Path, manifest_file: Path, *, again: bool, store: ModeStore | None
) -> Iterator[Finding]:
    try:
        manifest = json.loads(manifest_file.read_text(encoding="utf-8"))
        listed = [entry["name"] for entry in manifest["files"]]
    except _DAMAGE as error:
        yield _unreadable(manifest_file.name, error)
        return
    yield from _guarded(_promises, manifest_file, manifest)
    measures: dict[str, Callable[[Path, Json], Iterator[Finding]]] = {
        ".events.csv": event_findings,
        ".curves.csv": curve_findings,
        ".glb": glb_findings,
        ".wav": sound_findings,
    }
    for name in listed:
        ending = name.removeprefix(manifest_file.stem)
        if ending in measures and (folder / name).is_file():
            yield from _guarded(measures[ending], folder / name, manifest)
    if again:
        second_run = functools.partial(again_findings, store=store)
        yield from _guarded(second_run, manifest_file, manifest)


def _guarded(
    measure: Callable[[Path, Json], Iterator[Finding]], file: Path, manifest: Json
) -> Iterator[Finding]:
    try:
        yield from measure(file, manifest)
    except _DAMAGE as error:
        yield _unreadable(file.name, error)


def _unreadable(name: str, error: Exception) -> Finding:
    return Finding(
        name="file",
        measured=f"does not read: {type(error).__name__}: {error}",
        limit="a whole file",
        ok=False,
        where=name,
        fix=_MAKE_AGAIN,
    )


def _promises(manifest_file: Path, manifest: Json) -> Iterator[Finding]:
    where = manifest_file.name
    for entry in manifest["files"]:
        yield _file_finding(manifest_file.with_name(entry["name"]), entry)
    scene = manifest["scene"]
    text_hash = hashlib.sha256(scene["text"].encode("utf-8")).hexdigest()
    yield same_hash("hash of the scene", text_hash, scene["text_sha256"], where=where, fix=_MAKE_AGAIN)
    yield _ledger_finding(manifest["ledger"]["joules"], where)


def _file_finding(file: Path, entry: Json) -> Finding:
    promised = _described(entry["bytes"], entry["sha256"])
    ok, measured = False, "missing"
    if file.is_file():
        with file.open("rb") as stream:
            found = hashlib.file_digest(stream, "sha256").hexdigest()
        size = file.stat().st_size
        ok = size == entry["bytes"] and found == entry["sha256"]
        measured = _described(size, found)
    return Finding(
        name="file as it was made",
        measured="unchanged" if ok else measured,
        limit="unchanged" if ok else promised,
        ok=ok,
        where=file.name,
        fix="restore the file, or " + _MAKE_AGAIN,
    )


def _described(size: int, sha256: str) -> str:
    return f"{size} bytes, SHA-256 {sha256[:12]}..."


def _ledger_finding(joules: Json, where: str) -> Finding:
    scale = joules["scale"]
    share = abs(joules["residual"]) / scale if scale > 0.0 else 0.0
    return within(
        "energy ledger, unexplained share",
        share,
        LEDGER_LIMIT,
        unit="",
        where=where,
        fix="this is a defect of the run; report it with the scene",
    )
