"""What a set-up states, and the couch position that follows from it, in words."""

from geometry.machine import Axis
from geometry.scene import Scene
from geometry.setup import Setup, Surface


def setup_lines(scene: Scene) -> tuple[tuple[str, str], ...]:
    """Return the inputs of a set-up as (label, text): what a colleague checks before believing the result."""
    setup, couch = scene.setup, scene.setup.room.couch
    lateral, longitudinal, vertical = (float(value) for value in scene.couch.T_mm)
    return (
        ("Patient position", setup.patient_position),
        ("Patient envelope", "imported surface" if isinstance(setup.patient, Surface) else "body made from sizes"),
        ("Isocentre", _isocentre(setup)),
        ("Patient on the table", _on_table(setup)),
        ("Couch lateral", _position(lateral, couch.lateral, " mm")),
        ("Couch longitudinal", _position(longitudinal, couch.longitudinal, " mm")),
        ("Couch vertical", _position(vertical, couch.vertical, " mm")),
        ("Couch pitch", _position(setup.pitch_deg, couch.pitch, "°")),
        ("Couch roll", _position(setup.roll_deg, couch.roll, "°")),
        ("Couch eccentric", _position(setup.eccentric_deg, couch.eccentric, "°")),
        ("Collimator", "any angle" if setup.collimator_deg is None else f"{setup.collimator_deg:g}°"),
        ("Accessories fitted", ", ".join(setup.fitted) or "none"),
        *((f"Arm {name}", place) for name, place in _arms(setup)),
        ("Devices on the couch", ", ".join(device.name for device in setup.devices) or "none"),
        ("Gantry travel", f"{setup.room.gantry.low:g}° to {setup.room.gantry.high:g}°, unwrapped"),
        ("Couch travel", f"{couch.turntable.low:g}° to {couch.turntable.high:g}°, unwrapped"),
        ("Greatest excess of a piece", f"{max((part.excess_mm for part in scene.parts), default=0.0):.2f} mm"),
    )


def _isocentre(setup: Setup) -> str:
    isocentre = setup.isocentre
    if isocentre.landmark is None:
        point = isocentre.dicom_mm or ()
        return f"DICOM ({', '.join(f'{value:g}' for value in point)}) mm"
    left, head, front = isocentre.offset_mm
    return f"{isocentre.landmark}, and from there {left:g} mm left, {head:g} mm to the head, {front:g} mm to the front"


def _on_table(setup: Setup) -> str:
    where = setup.on_table
    return (
        f"{where.from_head_end_mm:g} mm from the head end, {where.lateral_mm:g} mm lateral, "
        f"{where.height_mm:g} mm above the table"
    )


def _position(value: float, axis: Axis, unit: str) -> str:
    """Return a stage's place in IEC 61217 and, where it has one, on the machine's own scale."""
    stated = f"{_signless_zero(value):.1f}{unit}"
    if axis.readout.is_iec():
        return stated
    # A slide's scale is no circle: the readout's own method would wrap it at 360.
    shown = axis.readout.zero + axis.readout.sense * value
    return f"{stated}; the machine shows {_signless_zero(shown):.1f}{unit}"


def _arms(setup: Setup) -> tuple[tuple[str, str], ...]:
    chosen = dict(setup.arm_positions)
    places = []
    for arm in setup.room.arms:
        place = chosen.get(arm.name)
        if place is None:
            place = arm.positions[0].name if arm.positions else (arm.travel_mm or (0.0, 0.0))[0]
        places.append((arm.name, place if isinstance(place, str) else f"{place:g} mm along its slide"))
    return tuple(places)


def _signless_zero(value: float) -> float:
    return 0.0 if abs(value) < 0.05 else value
