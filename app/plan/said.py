"""What people say is fitted, to the fields that they mean."""

from collections.abc import Mapping, Sequence
from typing import Final

from app.files.wording import did_you_mean, printable
from app.plan.fitting import Fitted, Unfit, fitted_from
from geometry.errors import BadInput, Fault
from geometry.setup import Setup
from geometry.treatment.data import PlanField

# Of every field, in the place of a field's name.
EVERY: Final = "all"


def said_of(
    fields: Sequence[PlanField], fits: Mapping[str, tuple[str, ...]], setup: Setup, source: str
) -> dict[int, Fitted]:
    """Return what is said to be fitted, by field; what is said to the program counts over what a list says."""
    found: dict[int, Fitted] = {}
    faults: list[Fault] = []
    as_given = Fitted(None, ())
    for k, field in enumerate(fields):
        words = field.fitted
        place, file = f"{field.place}, fitted", source
        own = [name for name in dict.fromkeys((str(k + 1), field.name)) if name in fits]
        if len({fits[name] for name in own}) > 1:
            found_twice = " and ".join(f"'{printable(name)}'" for name in own)
            faults.append(Fault("command line", "--fit", f"{found_twice}, which are one field", "each field once"))
        for name in (*((EVERY,) if EVERY in fits else ()), *own):
            words, place, file = fits[name], f"--fit {name}", "command line"
        if words is None:
            continue
        try:
            found[k] = fitted_from(words, setup.room) if words else as_given
        except Unfit as error:
            faults.append(Fault(file, place, error.found, error.allowed))
    known = {EVERY, *(str(k + 1) for k in range(len(fields))), *(field.name for field in fields)}
    for name in fits:
        by_number = {k for k in range(len(fields)) if name in (str(k + 1), EVERY)}
        by_name = {k for k, field in enumerate(fields) if field.name == name}
        if by_number and by_name and by_number != by_name:
            shown = printable(name)
            faults.append(
                Fault(
                    "command line",
                    "--fit",
                    f"'{shown}', which is the name of one field and stands for another one too",
                    "its number where a name is meant, its name where a number is",
                )
            )
        if name not in known:
            allowed = did_you_mean(name, [field.name for field in fields][:50])
            faults.append(Fault("command line", "--fit", f"no field '{printable(name)}'", allowed))
    if faults:
        raise BadInput(list(dict.fromkeys(faults))[:20])
    return found
