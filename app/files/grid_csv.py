"""Every pair of angles as comma-separated values.

One row is a pair of readings, couch angles in the order of their travel, gantry angles likewise within each. Where
the gantry's travel is more than a turn, the readings at both of its ends are the same pose and have one row, in the
place of the first; it is permitted when it is permitted at either end, as for a single pose. Lengths have up to nine
decimals, so that nothing is lost on the way into another program; where there is no distance, they are empty.
"""

from collections.abc import Iterator
from pathlib import Path
from typing import Final

from app.files.delimited import Cell, write_table
from app.files.permitted_rows import part_label
from app.files.readings import distinct_readings, finite
from geometry.assess import Assessment
from geometry.states import CODE_OF, STATES, State

COLUMNS: Final = (
    "gantry_deg",
    "couch_deg",
    "clearance_mm",
    "slack_mm",
    "state",
    "machine_part",
    "couch_part",
)


def write_grid_csv(assessment: Assessment, path: Path) -> None:
    """Write every pair. Raises BadInput where the file cannot be written."""
    write_table(path, COLUMNS, _rows(assessment))


def _rows(assessment: Assessment) -> Iterator[tuple[Cell, ...]]:
    exact, scene = assessment.map, assessment.scene
    labels = [part_label(scene, index) for index in range(len(scene.parts))]
    permitted = CODE_OF[State.PERMITTED]
    columns = distinct_readings(exact.gantry_deg.tolist())
    for couch_deg, of_couch in distinct_readings(exact.couch_deg.tolist()).items():
        i = of_couch[0]
        for gantry_deg, of_gantry in columns.items():
            j = of_gantry[0]
            machine, other = int(exact.machine_part[i, j]), int(exact.couch_part[i, j])
            anywhere = any(assessment.state[row, column] == permitted for row in of_couch for column in of_gantry)
            code = permitted if anywhere else int(assessment.state[i, j])
            yield (
                gantry_deg,
                couch_deg,
                finite(float(exact.clearance_mm[i, j])),
                finite(float(exact.slack_mm[i, j])),
                STATES[code],
                labels[machine] if machine >= 0 else None,
                labels[other] if other >= 0 else None,
            )
