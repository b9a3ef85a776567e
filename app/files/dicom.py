"""What DICOM files tell of a patient's surface and a plan."""

from pathlib import Path

from geometry.imported import ContourStack


def read_external_contour(path: Path | str, roi_name: str | None = None) -> ContourStack:
    """Return the external contour of an RT Structure Set."""
    raise NotImplementedError


def structure_patient_position(path: Path | str) -> str | None:
    """Return the patient position of an RT Structure Set."""
    raise NotImplementedError


def read_plan_isocentres(path: Path | str) -> tuple[tuple[float, float, float], ...]:
    """Return the isocentres of an RT Plan."""
    raise NotImplementedError


def read_plan_patient_position(path: Path | str) -> str | None:
    """Return the patient position of an RT Plan."""
    raise NotImplementedError
