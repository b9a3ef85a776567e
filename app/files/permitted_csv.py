"""The permitted-angle table as comma-separated values.

One row is a span of gantry angles at one couch angle; a couch angle with nothing permitted has a row with empty
gantry angles and extent 0. After the columns of `COLUMNS` come those of the room's own scales, for the axes that
have one: `couch_readout_deg`, then `gantry_from_readout_deg`, `gantry_to_readout_deg`.
"""

from dataclasses import asdict
from pathlib import Path
from typing import Final

from app.files.delimited import Cell, write_table
from app.files.permitted_rows import PermittedRow, permitted_rows
from app.files.provenance import Provenance
from app.files.readings import own_scales
from geometry.assess import Assessment

_OF_SPAN: Final = (
    "couch_deg",
    "gantry_from_deg",
    "gantry_to_deg",
    "gantry_extent_deg",
    "least_clearance_mm",
    "machine_part",
    "couch_part",
    "required_mm",
)
_OF_WHOLE: Final = (
    "gantry_tolerance_deg",
    "couch_tolerance_deg",
    "edge_deg",
    "version",
    "date",
    "caution",
    "room",
    "setup",
    "fingerprint",
)
COLUMNS: Final = (*_OF_SPAN, *_OF_WHOLE)


def write_permitted_csv(assessment: Assessment, provenance: Provenance, path: Path) -> None:
    """Write the table. Raises BadInput where it cannot be written."""
    readouts = _readout_columns(assessment)
    whole = _of_whole(provenance)
    rows = permitted_rows(assessment)
    cells = ((*_picked(row, _OF_SPAN), *whole, *_picked(row, readouts)) for row in rows)
    write_table(path, (*COLUMNS, *readouts), cells)


def _readout_columns(assessment: Assessment) -> tuple[str, ...]:
    scales = own_scales(assessment.scene.setup.room)
    of_couch = ("couch_readout_deg",) if scales.couch is not None else ()
    of_gantry = ("gantry_from_readout_deg", "gantry_to_readout_deg") if scales.gantry is not None else ()
    return (*of_couch, *of_gantry)


def _of_whole(provenance: Provenance) -> tuple[Cell, ...]:
    options = provenance.options
    return (
        options.gantry_tolerance_deg,
        options.couch_tolerance_deg,
        options.edge_deg,
        provenance.version,
        provenance.date.isoformat(),
        provenance.caution,
        provenance.room,
        provenance.setup,
        provenance.fingerprint,
    )


def _picked(row: PermittedRow, names: tuple[str, ...]) -> tuple[Cell, ...]:
    values = asdict(row)
    return tuple(values[name] for name in names)
