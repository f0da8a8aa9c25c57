"""A take appears whole or not at all.

It is built in ``NAME.partial-DIGEST`` beside its place, written through to the disk and then renamed. While a
run builds, it holds a lock on that folder (where the system locks folders); one that nobody
holds was left by a killed run and is removed by the next into the same folder of takes, whatever its title.
"""

from __future__ import annotations

import contextlib
import errno
import os
import re
import shutil
import sys
import unicodedata
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Final

from resonate.errors import TakeError
from resonate.take.swap import exchange

if TYPE_CHECKING:
    from collections.abc import Iterator

# "NAME.partial-0123456789ab" and the longest ending, "NAME.curves.csv", stay below the 255 bytes
# of common file systems.
_MOST_NAME_BYTES: Final = 120
_DIGEST_LENGTH: Final = 12
_UNSAFE: Final = re.compile(r'[<>:"/\\|?*\x00-\x1f\x7f]')
# Names that Windows keeps for devices, up to the first dot, whatever follows it.
_DEVICES: Final = re.compile(
    r"(con|prn|aux|nul|conin\$|conout\$|com[0-9¹²³]|lpt[0-9¹²³])( *)(\..*)?", re.IGNORECASE
)
_LEFTOVER: Final = re.compile(rf"(.+)\.(partial|old)-[0-9a-z]{{{_DIGEST_LENGTH}}}")
_FULL: Final = (errno.ENOSPC, errno.EDQUOT)


def safe_name(title: str) -> str:
    """Make a title a file name on every system.

    >>> safe_name("Galley: mug / 2"), safe_name("aux"), safe_name("nul.wav"), safe_name("...")
    ('Galley_ mug _ 2', 'aux_take', 'nul_take.wav', 'take')
    """
    text = " ".join(unicodedata.normalize("NFC", title).split())
    text = "".join(c if c.isprintable() else " " for c in _UNSAFE.sub("_", text))
    name = " ".join(text.split()).strip(". ")
    while len(name.encode("utf-8")) > _MOST_NAME_BYTES:
        name = name[:-1].rstrip(". ")
    if not name:
        return "take"
    device = _DEVICES.fullmatch(name)
    return f"{device.group(1)}_take{device.group(3) or ''}" if device else name


@dataclass(frozen=True, slots=True)
class Building:
    """A take under construction: write into ``folder``; ``name`` begins every file."""

    folder: Path
    name: str

    def file(self, ending: str) -> Path:
        """Path of one file of the take, ``NAME`` and its ending."""
        return self.folder / f"{self.name}{ending}"


@contextlib.contextmanager
def building(out: Path, name: str, *, digest: str, replace: bool) -> Iterator[Building]:
    """Build a take at ``out / name``; it appears there when the block ends without an error.

    Parameters
    ----------
    out : Path
        Folder that holds takes; made if it is missing.
    name : str
        A safe name.
    digest : str
        Hash of the scene: two scenes of one title do not build in the same folder.
    replace : bool
        Whether a take that is already there gives way, at the last moment and in one step.

    Raises
    ------
    TakeError
        If a take is already there, the folder cannot be written, the disk is full, or another run
        builds the same take. Nothing is left behind.
    """
    target = out / name
    made: list[Path] = []
    try:
        with _explained(target):
            made = _make_folders(out)
            tidy(out, name)
            _check_free(target, replace=replace)
            partial = out / f"{name}.partial-{digest[:_DIGEST_LENGTH]}"
            lock = _claim(partial)
        try:
            with _explained(target):
                yield Building(partial, name)
                _write_through(partial)
                _check_free(target, replace=replace)
                _appear(partial, target, digest=digest)
        except BaseException:
            if _is_same(partial, lock):
                shutil.rmtree(partial, ignore_errors=True)
            raise
        finally:
            _let_go(lock)
    except BaseException:
        for folder in reversed(made):
            with contextlib.suppress(OSError):
                folder.rmdir()
        raise


def tidy(out: Path, name: str) -> None:
    """Remove what killed runs left in a folder of takes, and put takes back that were half swapped.

    What belongs to takes of another name goes only where its lock proves that nobody builds it any more.
    """
    for entry in sorted(out.iterdir()):
        found = _LEFTOVER.fullmatch(entry.name)
        if found is None or entry.is_symlink() or not entry.is_dir():
            continue
        whose, ours = found.group(1), found.group(1) == name
        if not ours and not _holds_only(entry, whose):
            continue
        lock = _try_lock(entry, sure=not ours)
        if lock is None:
            continue
        try:
            if not _is_same(entry, lock):
                continue
            if found.group(2) == "old" and not (out / whose).exists():
                entry.rename(out / whose)
            else:
                shutil.rmtree(entry, ignore_errors=True)
        finally:
            _let_go(lock)


def _holds_only(folder: Path, name: str) -> bool:
    try:
        return all(part.name.startswith(f"{name}.") and part.is_file() for part in folder.iterdir())
    except OSError:
        # It vanished, or is nobody's business.
        return False


def _make_folders(out: Path) -> list[Path]:
    # Outermost first, so that they can be taken back in reverse.
    missing = [folder for folder in (out, *out.parents) if not folder.exists()][::-1]
    made = []
    for folder in missing:
        try:
            folder.mkdir()
        except FileExistsError:
            continue
        made.append(folder)
    if not out.is_dir():
        raise NotADirectoryError(errno.ENOTDIR, os.strerror(errno.ENOTDIR), str(out))
    return made


def _check_free(target: Path, *, replace: bool) -> None:
    if not os.path.lexists(target):
        return
    if not target.is_dir() or target.is_symlink():
        raise TakeError(
            what=f"{target.name!r} is there already and is not a take",
            where=str(target),
            fix="move it away, change the title, or choose another folder with --out",
        )
    if not replace:
        raise TakeError(
            what="a take of this name is there already",
            where=str(target),
            fix="use --replace, change the title, or choose another folder with --out",
        )
    foreign = sorted(entry.name for entry in target.iterdir() if not _is_ours(entry.name, target.name))
    if foreign:
        raise TakeError(
            what=f"the folder holds something that is not part of the take: {', '.join(foreign[:3])}",
            where=str(target),
            fix="move that away, change the title, or choose another folder with --out",
        )


def _is_ours(entry: str, name: str) -> bool:
    # File managers leave their own notes everywhere.
    return entry.startswith((f"{name}.", ".")) or entry.lower() in ("thumbs.db", "desktop.ini")


def _claim(partial: Path) -> int:
    # Another run may tidy the folder between its making and its locking; then begin again.
    for _ in range(10):
        try:
            partial.mkdir()
        except FileExistsError:
            break
        lock = _try_lock(partial)
        if lock is not None and _is_same(partial, lock):
            return lock
    raise TakeError(
        what="another run is building this take",
        where=str(partial),
        fix="wait for it, or choose another folder with --out",
    )


def _try_lock(folder: Path, *, sure: bool = False) -> int | None:
    """Lock a folder and give its descriptor; None if it is held or gone, -1 where folders have no locks.

    With ``sure`` it is None as well where nothing can be locked.
    """
    if sys.platform == "win32":
        return None if sure else -1
    import fcntl

    try:
        descriptor = os.open(folder, os.O_RDONLY)
    except FileNotFoundError:
        return None
    try:
        fcntl.flock(descriptor, fcntl.LOCK_EX | fcntl.LOCK_NB)
    except BlockingIOError:
        os.close(descriptor)
        return None
    except OSError:
        # Some network file systems lock nothing; building still works, one run at a time.
        if not sure:
            return descriptor
        os.close(descriptor)
        return None
    return descriptor


def _is_same(folder: Path, lock: int) -> bool:
    if lock < 0:
        return True
    try:
        here = folder.stat()
    except FileNotFoundError:
        return False
    held = os.fstat(lock)
    return (here.st_ino, here.st_dev) == (held.st_ino, held.st_dev)


def _let_go(lock: int) -> None:
    if lock >= 0:
        os.close(lock)


def _write_through(folder: Path) -> None:
    for entry in sorted(folder.iterdir()):
        with entry.open("rb+") as file:
            os.fsync(file.fileno())
    _sync_folder(folder)


def _sync_folder(folder: Path) -> None:
    if sys.platform == "win32":
        return
    descriptor = os.open(folder, os.O_RDONLY)
    try:
        # Not every file system syncs folders; the files themselves are on the disk by now.
        with contextlib.suppress(OSError):
            os.fsync(descriptor)
    finally:
        os.close(descriptor)


def _appear(partial: Path, target: Path, *, digest: str) -> None:
    if not target.exists():
        partial.rename(target)
        _sync_folder(target.parent)
        return
    # Held, so that no other run tidies it while it is on its way out.
    lock = _try_lock(target)
    try:
        leaving = partial
        if not exchange(partial, target):
            # Without an exchange in one step, both are whole beside each other for a moment; ``tidy``
            # puts the old one back if the run is killed in it.
            leaving = target.with_name(f"{target.name}.old-{digest[:_DIGEST_LENGTH]}")
            target.rename(leaving)
            try:
                partial.rename(target)
            except OSError:
                leaving.rename(target)
                raise
        _sync_folder(target.parent)
        shutil.rmtree(leaving, ignore_errors=True)
    finally:
        if lock is not None:
            _let_go(lock)


@contextlib.contextmanager
def _explained(target: Path) -> Iterator[None]:
    try:
        yield
    except OSError as error:
        place = error.filename
        if (
            isinstance(place, str)
            and target.parent not in (Path(place), *Path(place).parents)
            and not _above(Path(place), target)
        ):
            # Somebody else's file.
            raise
        raise _fault_of(error, target) from error


def _above(folder: Path, target: Path) -> bool:
    return folder in target.parents


def _fault_of(error: OSError, target: Path) -> TakeError:
    where = str(target)
    if error.errno in _FULL:
        return TakeError(
            what="the disk is full, nothing was written",
            where=where,
            fix="free some space, or choose another --out",
        )
    in_the_way = next((folder for folder in target.parents if folder.exists() and not folder.is_dir()), None)
    if in_the_way is not None:
        return TakeError(
            what=f"{in_the_way} is not a folder",
            where=where,
            fix="move it away, or choose another folder with --out",
        )
    if error.errno in (errno.EACCES, errno.EPERM, errno.EROFS):
        return TakeError(
            what="the folder cannot be written",
            where=where,
            fix="make it writable, or choose another folder with --out",
        )
    reason = error.strerror or type(error).__name__
    return TakeError(what=f"the take cannot be written: {reason}", where=where, fix="choose another --out")
