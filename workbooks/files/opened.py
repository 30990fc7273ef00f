"""A logbook's file opened for reading, which has to stay what it is while it is read."""

import os
import weakref
import zlib
from collections.abc import Iterator
from pathlib import Path
from typing import Final

from workbooks.files.cells import LogbookError
from workbooks.files.saving import stamp

MOST_PACKED: Final = 512 << 20

BLOCK: Final = 1 << 16
"""Bytes that are read at a time, few enough for their fields to stay in the processor's cache"""


class OpenedFile:
    """A logbook's file, perhaps read more than once, which has to be the same each time.

    It is opened once: who puts another file in its place does not change what is read here.
    """

    def __init__(self, path: Path) -> None:
        """Open `path`; raise LogbookError for what cannot be read."""
        self.path = path
        try:
            if path.exists() and not path.is_file():
                raise LogbookError(f"{path} is a folder or a device, not a workbook")
            self._file = path.open("rb", buffering=0)
            weakref.finalize(self, self._file.close)
            status = os.fstat(self._file.fileno())
        except FileNotFoundError:
            raise LogbookError(f"{path} does not exist") from None
        except OSError as error:
            raise LogbookError(f"{path} cannot be read: {error.strerror}") from error
        if status.st_size > MOST_PACKED:
            raise LogbookError(
                f"{path} has {status.st_size:,} bytes, more than the "
                f"{MOST_PACKED:,} that a workbook may have"
            )
        if not status.st_size:
            raise LogbookError(f"{path} is empty (0 bytes)")
        self.stamp = stamp(status)
        self.size = status.st_size
        self._sums: dict[int, int] = {}

    def content(self) -> bytes:
        """Return all bytes; raise LogbookError where the file changes meanwhile."""
        return b"".join(self.chunks(size=self.size))

    def chunks(self, begin: int = 0, size: int = 0) -> Iterator[bytes]:
        """Yield the bytes from `begin` on, `size` or BLOCK of them at a time.

        Raises LogbookError where they are not what they were.
        """
        if self._file.closed:
            raise LogbookError(f"{self.path} was written since it was opened; open it again")
        at, checksum = begin, 0
        while True:
            try:
                self._file.seek(at)
                chunk = self._file.read(size or BLOCK)
                now = stamp(os.fstat(self._file.fileno()))
            except OSError as error:
                raise LogbookError(f"{self.path} cannot be read: {error.strerror}") from error
            if now != self.stamp:
                raise self.changed()
            if not chunk:
                break
            at += len(chunk)
            checksum = zlib.crc32(chunk, checksum)
            yield chunk
        # The time of a change is told no finer than the system's clock ticks.
        if self._sums.setdefault(begin, checksum) != checksum:
            raise self.changed()

    def head(self, count: int, begin: int = 0) -> bytes:
        """Return the first bytes from `begin` on, `count` of them if there are as many."""
        found = b""
        for chunk in self.chunks(begin):
            found += chunk
            if len(found) >= count:
                break
        return found[:count]

    def changed(self) -> LogbookError:
        """Return what to raise where the file is not what it was."""
        if not self._sums:
            return LogbookError(
                f"{self.path} was being written by another program while it was read; try again"
            )
        return LogbookError(f"{self.path} was changed by someone else since it was opened")

    def close(self) -> None:
        """Close the file, which is not read again."""
        self._file.close()
