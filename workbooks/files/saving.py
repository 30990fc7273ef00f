"""A file written whole or not at all, whatever happens on the way."""

import os
import re
import secrets
import shutil
import stat
from collections.abc import Callable, Iterator
from contextlib import contextmanager, suppress
from pathlib import Path
from typing import BinaryIO, Final

from workbooks.files.cells import LogbookError

try:
    import fcntl
except ImportError:  # Windows, where a file that is open cannot be removed anyway
    fcntl = None  # type: ignore[assignment]

BACKUP: Final = "before-fill"
"""What a backup's name has before its suffix: night.before-fill.xlsx, night.before-fill-2.xlsx"""

Stamp = tuple[int, int, int]
"""What tells one state of a file from another: time of change, size and inode"""


def stamp(status: os.stat_result) -> Stamp:
    """Return what tells this state of a file from another."""
    return status.st_mtime_ns, status.st_size, status.st_ino


def check_target(path: Path, *, overwrite: bool) -> os.stat_result | None:
    """Return what is known of the file that is to be replaced, None where there is none yet.

    Raises LogbookError when `path` exists and `overwrite` is not asked, is read-only, or is open in
    a spreadsheet program.
    """
    target = path.resolve()
    if not target.parent.is_dir():
        raise LogbookError(f"{path} cannot be written: there is no folder {target.parent}")
    for folder, name in {(path.parent, path.name), (target.parent, target.name)}:
        for lock, program in ((f".~lock.{name}#", "LibreOffice"), (f"~${name}", "Excel")):
            if os.path.lexists(folder / lock):
                raise LogbookError(
                    f"{path} is open in {program} (there is a {lock}); close it there first"
                )
    if not target.exists():
        return None
    if not target.is_file():
        raise LogbookError(f"{path} cannot be written: it is not a file")
    if not overwrite:
        raise LogbookError(f"{path} exists and would be overwritten")
    before = target.stat()
    # root passes os.access whatever the mode says, but the mode is somebody's wish.
    if not before.st_mode & 0o222 or not os.access(target, os.W_OK):
        raise LogbookError(f"{path} is read-only")
    return before


def write_whole(
    path: Path,
    content: bytes | Callable[[BinaryIO], None],
    *,
    overwrite: bool = False,
    unchanged: Stamp | None = None,
    backup: bool = False,
) -> os.stat_result:
    """Write a file whole or not at all, and return what is known of it then.

    A new file is written beside the old one, synced, and takes its name; a link stays a link. The
    new one has the old one's owner and mode.
    content: the bytes, or what writes them into the file that it is given
    unchanged: refuse where the file that is there is not in this state
    backup: keep the old one under another name, which is never one that exists
    Raises LogbookError as `check_target` does, and for any failure on the way, after which `path`
    is as it was.
    """
    before = check_target(path, overwrite=overwrite)
    _check_unchanged(path, before, unchanged)
    target = path.resolve()
    with _reported(path):
        _remove_leftovers(target)
        new = target.with_name(f".{target.name}.{secrets.token_hex(4)}.new")
        # O_EXCL so that nobody else's file, or link, is ever written through.
        flags = os.O_RDWR | os.O_CREAT | os.O_EXCL | getattr(os, "O_BINARY", 0)
        descriptor = os.open(new, flags, 0o666)
    try:
        with _reported(path), os.fdopen(descriptor, "w+b") as file:
            if fcntl:
                with suppress(OSError):
                    fcntl.flock(descriptor, fcntl.LOCK_EX | fcntl.LOCK_NB)
            if before:
                with suppress(OSError, AttributeError):
                    os.fchown(descriptor, before.st_uid, before.st_gid)
                with suppress(OSError, AttributeError):
                    os.fchmod(descriptor, stat.S_IMODE(before.st_mode))
            if isinstance(content, bytes):
                file.write(content)
            else:
                content(file)
            file.flush()
            os.fsync(descriptor)
        # Writing takes a while; somebody may have come in between.
        now = check_target(path, overwrite=overwrite)
        _check_unchanged(path, now, stamp(before) if before else None)
        with _reported(path):
            written = new.stat()
            kept = _keep(target) if backup and before else None
            try:
                os.replace(new, target)
            except BaseException:
                if kept:
                    kept.unlink()
                raise
    finally:
        with suppress(OSError):
            new.unlink()
    _sync_folder(target.parent)
    return written


def backups(path: Path) -> list[Path]:
    """Return the backups of a file, the oldest first."""
    target = path.resolve()
    name = re.compile(
        re.escape(f"{target.stem}.{BACKUP}") + r"(?:-(\d+))?" + re.escape(target.suffix) + r"\Z"
    )
    found = [
        (int(match[1] or 1), other)
        for other in target.parent.iterdir()
        if (match := name.match(other.name))
    ]
    return [other for _, other in sorted(found)]


@contextmanager
def _reported(path: Path) -> Iterator[None]:
    try:
        yield
    except OSError as error:
        raise LogbookError(f"{path} was not written: {error.strerror or error}") from error


def _check_unchanged(path: Path, now: os.stat_result | None, wanted: Stamp | None) -> None:
    if wanted is not None and (now is None or stamp(now) != wanted):
        raise LogbookError(f"{path} was changed by someone else since it was opened")


def _keep(target: Path) -> Path:
    """Give the file that is about to be replaced a second name, and return that."""
    number = 1
    while True:
        mark = BACKUP if number == 1 else f"{BACKUP}-{number}"
        kept = target.with_name(f"{target.stem}.{mark}{target.suffix}")
        try:
            os.link(target, kept)
            return kept
        except FileExistsError:
            number += 1
        except OSError:
            # Not every file system knows a second name.
            with target.open("rb") as old, suppress(FileExistsError), kept.open("xb") as copy:
                try:
                    shutil.copyfileobj(old, copy)
                    copy.flush()
                    os.fsync(copy.fileno())
                    shutil.copystat(target, kept)
                except BaseException:
                    kept.unlink()
                    raise
                return kept
            number += 1


def _remove_leftovers(target: Path) -> None:
    """Remove what runs that were killed have left of their new files."""
    if fcntl is None:
        return
    name = re.compile(re.escape(f".{target.name}.") + r"[0-9a-f]{8}\.new\Z")
    for entry in os.scandir(target.parent):
        if not name.match(entry.name):
            continue
        with suppress(OSError):
            descriptor = os.open(entry.path, os.O_RDONLY | os.O_NOFOLLOW)
            try:
                # A run that still writes holds the lock; the system frees it when one dies.
                fcntl.flock(descriptor, fcntl.LOCK_EX | fcntl.LOCK_NB)
                os.unlink(entry.path)
            finally:
                os.close(descriptor)


def _sync_folder(folder: Path) -> None:
    # The rename itself must outlast a power cut; where folders cannot be synced, it is as safe as
    # that system makes it.
    with suppress(OSError):
        descriptor = os.open(folder, os.O_RDONLY)
        try:
            os.fsync(descriptor)
        finally:
            os.close(descriptor)
