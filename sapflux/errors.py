"""Faults a user can mend, each told as where - what - what would be right."""

from dataclasses import dataclass


@dataclass(frozen=True)
class Fault:
    """One thing that is wrong.

    >>> print(Fault("probes.csv, row 4", "spacing is 0", "Give the distance in mm."))
    probes.csv, row 4: spacing is 0. Give the distance in mm.
    """

    where: str
    what: str
    remedy: str

    def __str__(self):
        return f"{self.where}: {self.what.rstrip('.')}. {self.remedy}".rstrip()


class UserError(Exception):
    """Something the user can mend: printed without a traceback. Carries every fault found."""

    def __init__(self, faults):
        self.faults = tuple([faults] if isinstance(faults, Fault) else faults)
        super().__init__("\n".join(str(fault) for fault in self.faults))


class SiteError(UserError):
    """The site folder or its tables."""


class RecipeError(UserError):
    """The recipe, or a recipe that asks for what the site does not give."""


class DataError(UserError):
    """The raw files."""


def nearest(word, known):
    """A hint that names the closest known word, and all known ones.

    >>> nearest("flux_indx", ["flow_index", "flux_density"])
    "Did you mean 'flow_index'? Known: flow_index, flux_density."
    """
    import difflib

    known = sorted(known)
    close = difflib.get_close_matches(word, known, n=1)
    guess = f"Did you mean '{close[0]}'? " if close else ""
    return f"{guess}Known: {', '.join(known)}."
