"""A zip archive opened with suspicion; parts are exchanged, every other one kept as it is."""

import io
import zipfile
import zlib
from collections.abc import Callable, Iterable, Iterator, Mapping
from concurrent.futures import Future, ThreadPoolExecutor
from pathlib import Path
from typing import IO, BinaryIO, Final

from lxml import etree

from workbooks.files.cells import LogbookError
from workbooks.files.opened import OpenedFile
from workbooks.files.saving import check_target, stamp, write_whole
from workbooks.files.xml_check import check_xml

# A year's logbook unpacks to some tens of megabytes, its densest part perhaps 30 to 1.
MOST_UNPACKED = 1 << 30
MOST_ENTRIES = 10_000
MOST_RATIO = 200
RATIO_MATTERS_FROM = 16 << 20

CHUNK: Final = 1 << 20
QUICK: Final = 2
CFB_MAGIC = bytes.fromhex("d0cf11e0a1b11ae1")
ENCRYPTED_FLAG = 0x1
ZIP64_FIELD = b"\x01\x00"

Content = bytes | Callable[[], Iterable[bytes]]
"""The bytes of a part, or what gives them piece by piece"""


class Archive:
    """The parts of a zip archive.

    The file is read once and kept packed, so that what is saved later is what was checked here.
    """

    def __init__(self, path: Path, kind: str) -> None:
        """Open and check `path`; raise LogbookError, naming `kind`, where it is not sound."""
        self.path = path
        file = OpenedFile(path)
        self._packed, self._stamp = file.content(), file.stamp
        file.close()
        if self._packed.startswith(CFB_MAGIC):
            raise LogbookError(
                f"{path} is encrypted or in the old .xls format; "
                "save it as .xlsx without a password"
            )
        if not self._packed.startswith(b"PK"):
            raise LogbookError(f"{path} is not an {kind} workbook, whatever its name says")
        self._archive, self._entries = self._open_archive()

    def _open_archive(self) -> tuple[zipfile.ZipFile, dict[str, zipfile.ZipInfo]]:
        try:
            archive = zipfile.ZipFile(io.BytesIO(self._packed))
        except (zipfile.BadZipFile, ValueError, NotImplementedError, OSError) as error:
            raise LogbookError(f"{self.path} is cut short or damaged: {error}") from error
        # zipfile does not mind when the archive's comment, its very end, is missing.
        end = self._packed.rfind(b"PK\x05\x06")
        comment_size = int.from_bytes(self._packed[end + 20 : end + 22], "little")
        if end + 22 + comment_size > len(self._packed):
            raise LogbookError(f"{self.path} is cut short or damaged: its last bytes are missing")
        infos = archive.infolist()
        if len(infos) > MOST_ENTRIES:
            raise LogbookError(
                f"{self.path} holds {len(infos):,} parts, more than the {MOST_ENTRIES:,} allowed"
            )
        unpacked = sum(info.file_size for info in infos)
        if unpacked > MOST_UNPACKED:
            raise LogbookError(
                f"{self.path} would unpack to {unpacked:,} bytes, more than the "
                f"{MOST_UNPACKED:,} allowed"
            )
        entries: dict[str, zipfile.ZipInfo] = {}
        for info in infos:
            self._check_entry(info)
            # Part names are compared without regard to case (ECMA-376 part 2, section 6.2.2.3).
            if info.filename.casefold() in entries:
                raise LogbookError(f"{self.path} holds the part {info.filename!r} twice")
            entries[info.filename.casefold()] = info
        return archive, entries

    def _check_entry(self, info: zipfile.ZipInfo) -> None:
        name = info.filename
        segments = name.removesuffix("/").split("/")
        if "\\" in name or ":" in name or any(part in ("", ".", "..") for part in segments):
            raise LogbookError(f"{self.path} holds a part with a bad name, {name!r}")
        if info.flag_bits & ENCRYPTED_FLAG:
            raise LogbookError(f"{self.path} is encrypted: its part {name!r} needs a password")
        if info.compress_type not in (zipfile.ZIP_STORED, zipfile.ZIP_DEFLATED):
            raise LogbookError(f"{self.path} packs its part {name!r} in a way no workbook may")
        if info.file_size > max(RATIO_MATTERS_FROM, MOST_RATIO * info.compress_size):
            raise LogbookError(
                f"{self.path} would unpack its part {name!r} from {info.compress_size:,} to "
                f"{info.file_size:,} bytes, which no honest workbook does"
            )

    def has(self, part: str) -> bool:
        """Say whether the archive holds a part of that name."""
        return part.casefold() in self._entries

    @property
    def parts(self) -> list[str]:
        """The names of all parts, in the archive's order."""
        return [info.filename for info in self._entries.values()]

    def size(self, name: str) -> int:
        """Return the number of bytes that a part says it has, unpacked."""
        return self._entries[name.casefold()].file_size

    def part(self, name: str) -> bytes:
        """Return the unpacked bytes of a part."""
        return b"".join(self.chunks(name))

    def chunks(self, name: str, size: int = CHUNK) -> Iterator[bytes]:
        """Yield the unpacked bytes of a part, `size` of them at a time."""
        info = self._entries[name.casefold()]
        left = info.file_size
        try:
            # Never more than the checked size, whatever the packed stream would go on to give.
            with self._archive.open(info) as file:
                while left and (chunk := file.read(min(size, left))):
                    left -= len(chunk)
                    yield chunk
                # zipfile compares the checksum where it meets the end.
                file.read(1)
        # zipfile lets whatever a damaged header provokes through, hence the long list.
        except (
            zipfile.BadZipFile,
            zlib.error,
            EOFError,
            ValueError,
            NotImplementedError,
            RuntimeError,
            OSError,
        ) as error:
            raise LogbookError(
                f"{self.path} is damaged: its part {name!r} cannot be unpacked"
            ) from error
        if left:
            raise LogbookError(f"{self.path} is damaged: its part {name!r} is cut short")

    def xml(self, part: str) -> etree._Element:
        """Return the root of a small XML part, read without entities and without network."""
        parser = etree.XMLParser(
            resolve_entities=False, no_network=True, load_dtd=False, huge_tree=False
        )
        content = self.part(part)
        check_xml(content, self.path, part)
        try:
            return etree.fromstring(content, parser)
        except (etree.XMLSyntaxError, ValueError) as error:
            raise LogbookError(
                f"{self.path} is damaged: its part {part!r} is not readable XML"
            ) from error

    def save(
        self,
        path: Path,
        replaced: Mapping[str, Content],
        *,
        overwrite: bool = False,
        backup: bool = False,
    ) -> None:
        """Write the archive to `path` with the parts in `replaced` exchanged, whole or not at all.

        Raises LogbookError when `path` exists and `overwrite` is not asked, is read-only, is open
        in a spreadsheet program, or was changed since it was opened here; and for any failure on
        the way, after which `path` is as it was.
        """
        check_target(path, overwrite=overwrite)
        ours = path.resolve() == self.path.resolve()
        if replaced and any(
            part.casefold() == "meta-inf/documentsignatures.xml"
            or part.casefold().startswith("_xmlsignatures/")
            for part in self.parts
        ):
            raise LogbookError(f"{self.path} is digitally signed, and an edit would void that")
        written = write_whole(
            path,
            (lambda file: self._repack(file, replaced)) if replaced else self._packed,
            overwrite=overwrite,
            unchanged=self._stamp if ours and path.exists() else None,
            backup=backup and ours,
        )
        if ours:
            self._stamp = stamp(written)

    def _repack(self, file: BinaryIO, replaced: Mapping[str, Content]) -> None:
        contents = {part.casefold(): content for part, content in replaced.items()}
        with zipfile.ZipFile(file, "w") as archive:
            archive.comment = self._archive.comment
            for key, old in self._entries.items():
                info = zipfile.ZipInfo(old.filename, old.date_time)
                for trait in (
                    "compress_type",
                    "comment",
                    "create_system",
                    "external_attr",
                    "internal_attr",
                ):
                    setattr(info, trait, getattr(old, trait))
                # zipfile writes its own size field where one is due.
                if ZIP64_FIELD not in old.extra:
                    info.extra = old.extra
                content = contents.get(key)
                chunks: Iterable[bytes]
                if content is None:
                    chunks = self.chunks(old.filename)
                else:
                    # A third as much work as the usual level, for a seventh more bytes.
                    info._compresslevel = QUICK  # type: ignore[attr-defined]
                    chunks = [content] if isinstance(content, bytes) else content()
                large = old.file_size > MOST_UNPACKED // 2
                with archive.open(info, "w", force_zip64=large) as part:
                    # zipfile gives a mode of its own to what has none.
                    info.external_attr = old.external_attr
                    pack_beside(part, chunks)


def pack_beside(file: IO[bytes], chunks: Iterable[bytes]) -> None:
    """Write chunks into a file that packs them, while the next ones are made."""
    # zlib lets other threads run, so that packing costs nothing where there is a second core.
    with ThreadPoolExecutor(1) as packing:
        before: Future[int] | None = None
        for chunk in chunks:
            after = packing.submit(file.write, chunk)
            if before:
                before.result()
            before = after
        if before:
            before.result()
