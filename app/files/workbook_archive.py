"""Saving a workbook so that the same content gives the same bytes."""

import datetime
import shutil
import zipfile
from pathlib import Path
from typing import BinaryIO

from openpyxl import Workbook
from openpyxl.writer.excel import ExcelWriter

# The first moment that a zip archive can name.
_NO_TIME = (1980, 1, 1, 0, 0, 0)


class _TimelessArchive(zipfile.ZipFile):
    """A zip archive whose entries bear no time of day, unlike those of its base."""

    def writestr(self, zinfo_or_arcname, data, compress_type=None, compresslevel=None) -> None:  # type: ignore[no-untyped-def] # noqa: ANN001
        name = zinfo_or_arcname if isinstance(zinfo_or_arcname, str) else zinfo_or_arcname.filename
        super().writestr(_entry(name), data, compress_type, compresslevel)

    def write(self, filename, arcname=None, compress_type=None, compresslevel=None) -> None:  # type: ignore[no-untyped-def] # noqa: ANN001, ARG002
        with Path(filename).open("rb") as source, self.open(_entry(str(arcname or filename)), "w") as target:
            shutil.copyfileobj(source, target)


def save_workbook(workbook: Workbook, stream: BinaryIO, date: datetime.date) -> None:
    """Write a finished workbook to a binary stream, dated by the day alone."""
    noon = datetime.datetime.combine(date, datetime.time(12))
    workbook.properties.created = noon
    # The library's own way to save would put the moment of saving here.
    workbook.properties.modified = noon
    with _TimelessArchive(stream, "w", zipfile.ZIP_DEFLATED) as archive:
        ExcelWriter(workbook, archive).save()


def _entry(name: str) -> zipfile.ZipInfo:
    entry = zipfile.ZipInfo(name, _NO_TIME)
    entry.compress_type = zipfile.ZIP_DEFLATED
    return entry
