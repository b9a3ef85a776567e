"""Where a result comes from: what every export says of itself, whatever its format."""

import datetime
from dataclasses import dataclass

from app import __version__
from app.cautions import CAUTIONS
from app.files.fingerprint import fingerprint, short_fingerprint
from geometry.assess import Options
from geometry.machine import JoinedPair, Room
from geometry.scene import Scene
from geometry.setup import Required

_SHORT_CAUTION = (
    "Planning aid only: interlocks and local procedures stand above it; "
    "first run the unloaded machine through the fields."
)


@dataclass(frozen=True)
class Provenance:
    """What a result rests on. It holds nothing that identifies a patient but the name that the user gave the set-up.

    `fingerprint` is that of the set-up with its room, `short_fingerprint` its form for where there is little space,
    `room_fingerprint` that of the room alone. `survey` says in words
    who surveyed the room, or that nobody did. `marks` are what must catch the eye: demonstration, no survey, no travel.
    `no_travel` names the stages that would have to leave their travel.
    """

    room: str
    setup: str
    fingerprint: str
    short_fingerprint: str
    room_fingerprint: str
    version: str
    date: datetime.date
    survey: str
    marks: tuple[str, ...]
    options: Options
    required: Required
    joined: tuple[JoinedPair, ...]
    no_travel: tuple[str, ...]
    cautions: tuple[str, ...]

    @property
    def caution(self) -> str:
        """One sentence for every row of a table, with the marks; for full exports there is `cautions`."""
        return " ".join((_SHORT_CAUTION, *(f"{mark}." for mark in self.marks)))

    @property
    def is_demonstration(self) -> bool:
        """Tell whether room or set-up is invented."""
        return any(mark.startswith("DEMONSTRATION") for mark in self.marks)

    def lines(self) -> tuple[tuple[str, str], ...]:
        """Return everything as (label, text), in the order in which people ask for it; labels may repeat."""
        options = self.options
        return (
            ("Room", self.room),
            ("Set-up", self.setup),
            *(("Mark", mark) for mark in self.marks),
            ("Survey", self.survey),
            ("Fingerprint", f"{self.fingerprint} (set-up with its room)"),
            ("Fingerprint of the room", self.room_fingerprint),
            ("Program", f"Wideberth {self.version}"),
            ("Date", self.date.isoformat()),
            ("Grid", f"gantry every {options.gantry_step_deg:g}°, couch every {options.couch_step_deg:g}°"),
            ("Edge resolution of the proof", f"{options.edge_deg:g}°"),
            (
                "Readout tolerances",
                f"gantry ±{options.gantry_tolerance_deg:g}°, couch ±{options.couch_tolerance_deg:g}°",
            ),
            *required_lines(self.required),
            *(("Joined, not checked", line) for line in joined_lines(self.joined)),
            *(("No travel", excess) for excess in self.no_travel),
            *(("Caution", caution) for caution in self.cautions),
        )


def provenance_of(scene: Scene, options: Options, date: datetime.date) -> Provenance:
    """Return the provenance of anything computed from `scene` with `options` on a day."""
    setup, room = scene.setup, scene.setup.room
    return Provenance(
        room=room.name,
        setup=setup.name,
        fingerprint=fingerprint(setup),
        short_fingerprint=short_fingerprint(setup),
        room_fingerprint=fingerprint(room),
        version=__version__,
        date=date,
        survey=survey_line(room),
        marks=_marks(scene),
        options=options,
        required=setup.required,
        joined=room.joined,
        no_travel=scene.no_travel,
        cautions=CAUTIONS,
    )


def survey_line(room: Room) -> str:
    """Return in words who surveyed a room, or why nobody could or did."""
    if room.demonstration:
        return "demonstration: invented room"
    if room.survey is None:
        return "unsurveyed"
    survey = room.survey
    return (
        f"surveyed by {survey.by} on {survey.on}, {survey.method}, "
        f"±{survey.uncertainty_mm:g} mm (one standard deviation)"
    )


def required_lines(required: Required) -> tuple[tuple[str, str], ...]:
    """Return what must remain, how it comes about, and why, as (label, text)."""
    machine, patient = (_sum_in_words(required, with_patient) for with_patient in (False, True))
    return (
        ("Required clearance, machine and room alone", machine),
        ("Required clearance, with patient or device", patient),
        ("Reason for the required clearance", required.reason),
    )


def joined_lines(joined: tuple[JoinedPair, ...]) -> tuple[str, ...]:
    """Return joined pairs in words: a line for each part with all those that it is joined to for one reason."""
    seconds: dict[tuple[str, str], list[str]] = {}
    for pair in joined:
        seconds.setdefault((pair.first, pair.reason), []).append(pair.second)
    return tuple(f"{first} with {', '.join(others)}: {reason}" for (first, reason), others in seconds.items())


def _sum_in_words(required: Required, with_patient: bool) -> str:
    total = f"{required.of_pair_mm(with_patient):.2f} mm"
    counted = [part for part in required.components if with_patient or not part.patient_only]
    if not counted:
        return total
    squares = " + ".join(f"{part.sd_mm:g}²" for part in counted)
    names = ", ".join(f"{part.name} {part.sd_mm:g}" for part in counted)
    return f"{total} = {required.fixed_mm:g} + {required.k:g} × √({squares}); one standard deviation in mm: {names}"


def _marks(scene: Scene) -> tuple[str, ...]:
    """Return what must catch the eye."""
    room = scene.setup.room
    invented = [word for word, flag in (("room", room.demonstration), ("set-up", scene.setup.demonstration)) if flag]
    marks = []
    if invented:
        marks.append(f"DEMONSTRATION: invented {' and '.join(invented)}")
    if room.survey is None and not room.demonstration:
        marks.append("UNSURVEYED: nobody has surveyed this room")
    if scene.no_travel:
        marks.append("NO TRAVEL: the couch cannot bring this isocentre to its place")
    return tuple(marks)
