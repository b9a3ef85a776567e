"""The cautions that stand in the window, in the README and in every export."""

from typing import Final

CAUTIONS: Final = (
    "Wideberth is a planning aid: it advises people and controls no machine.",
    "A room model counts only after a qualified medical physicist has surveyed the room and accepted the model.",
    "The machine's own interlocks and your local procedures stand above everything that Wideberth says.",
    "Run the unloaded machine through the fields before the first treatment, and watch the patient throughout.",
    "A clearance figure is no guarantee against a patient who moved, a device not in the model or a wrong set-up.",
)
