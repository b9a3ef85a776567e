"""What can be said of a pair of angles."""

from enum import StrEnum
from typing import Final


class State(StrEnum):
    """The first that holds, in this order, except that `UNPROVED` also stands for "no valid distance"."""

    NO_TRAVEL = "no travel"
    CONTACT = "contact"
    SHORT = "short"
    UNPROVED = "unproved"
    PERMITTED = "permitted"


# Arrays of states hold places in this tuple.
STATES: Final = tuple(State)
CODE_OF: Final = {state: code for code, state in enumerate(STATES)}
