"""The workbook: permitted angles, every pair, inputs and cautions."""

from pathlib import Path
from typing import BinaryIO

from openpyxl import Workbook

from app.files.atomic import write_atomically
from app.files.provenance import Provenance
from app.files.workbook_archive import save_workbook
from app.files.workbook_matrix import add_matrix
from app.files.workbook_spans import add_spans
from app.files.workbook_story import add_story
from geometry.assess import Assessment


def write_workbook(assessment: Assessment, provenance: Provenance, path: Path) -> None:
    """Write the workbook. Raises BadInput where the file cannot be written."""
    workbook = Workbook(write_only=True)
    workbook.properties.title = f"{provenance.setup}, {provenance.room}"
    workbook.properties.creator = f"Wideberth {provenance.version}"
    workbook.properties.description = provenance.caution
    add_spans(workbook, assessment, provenance)
    add_matrix(workbook, assessment, provenance)
    add_story(workbook, assessment.scene, provenance)

    def write(stream: BinaryIO) -> None:
        save_workbook(workbook, stream, provenance.date)

    write_atomically(path, write)
