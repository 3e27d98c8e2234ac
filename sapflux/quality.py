"""Flags: what is known to be wrong with a record, and how a value came to be.

A flag is a bit that is set and never dropped. A masking flag takes the record from every later
step; a noting flag only tells. The measurement itself is never edited.
"""

from dataclasses import dataclass

import numpy as np


@dataclass(frozen=True)
class Flag:
    """One bit of `quality`."""

    name: str
    bit: int
    masks: bool
    meaning: str

    @property
    def mask(self):
        """The bit as a number."""
        return 1 << self.bit


ROWS = [
    Flag("not_installed", 0, True, "no probe was installed"),
    Flag("no_record", 1, True, "the logger has no value here"),
    Flag("conflicting", 2, True, "two downloads give different values"),
    Flag("out_of_range", 3, True, "beyond what the instrument can give"),
    Flag("excluded", 4, True, "excluded by a person, with a reason"),
    Flag("heater_failure", 5, True, "heater off, or its wiring broken"),
    Flag("heater_recovery", 6, True, "wood still warming after the heater was off"),
    Flag("no_baseline", 7, True, "no zero-flow reference near enough"),
    Flag("no_contact", 8, True, "too little of the needle in sapwood to be corrected"),
    Flag("contact_undefined", 9, True, "colder than sapwood contact allows"),
    Flag("log_domain", 10, True, "a temperature rise is not positive"),
    Flag("unusable_offset", 11, True, "zero offset too large, or found on too few nights"),
    Flag("beyond_wound_limit", 12, True, "faster than the wound correction covers"),
    Flag("no_wood_sample", 13, True, "no wood properties for this date, or implausible ones"),
    Flag("above_baseline", 14, False, "warmer than without flow: negative flow"),
    Flag("beyond_calibration", 15, False, "outside the range of the calibration"),
    Flag("partly_missing", 16, False, "part of the step is missing"),
    Flag("incomplete_step", 17, True, "too little of the step is measured"),
    Flag("incomplete_radius", 18, True, "part of the sapwood has no value"),
    Flag("few_trees", 19, True, "fewer live trees than a stratum needs"),
    Flag("borrowed", 20, False, "flux density of a stand-in"),
    Flag("no_wound_width", 21, True, "no wound width, or one that the correction does not cover"),
    Flag("no_stem_temperature", 22, True, "no stem temperature to convert the voltage with"),
    Flag("no_calibration", 23, True, "the species has no calibration of its own"),
    Flag("incomplete_cycle", 24, True, "a heating cycle without both its readings"),
    Flag("no_gradient", 25, True, "no reading of the natural gradient near enough to subtract"),
    Flag("steep_gradient", 26, False, "natural temperature gradient beyond the recipe's limit"),
    Flag("lower_bound", 27, True, "upstream rise lost in noise: faster than the ratio can tell"),
]  # fmt: skip

FLAGS = {row.name: row for row in ROWS}
# Flags that belong to the common step and to what is scaled from it, not to a record as logged.
SCALED = {"partly_missing", "incomplete_step", "incomplete_radius", "few_trees", "borrowed"}
NATIVE = tuple(name for name in FLAGS if name not in SCALED)
MASKING = np.int32(sum(row.mask for row in ROWS if row.masks))

ORIGINS = {
    "absent": 0,
    "measured": 1,
    "interpolated": 2,
    "filled": 3,
    "modelled": 4,
    "assumed_zero": 5,
}


def bits(**flagged):
    """One int32 array of flag bits from boolean arrays by flag name. KeyError if unknown.

    >>> bits(heater_failure=np.array([True, False]), log_domain=np.array([True, True]))
    array([1056, 1024], dtype=int32)
    """
    total = np.int32(0)
    for name, where in flagged.items():
        total = total | np.where(where, np.int32(FLAGS[name].mask), np.int32(0))
    return total


def masked(quality):
    """Where a record may not be used."""
    return (quality & MASKING) != 0


def has(quality, name):
    """Where the flag `name` is set."""
    return (quality & np.int32(FLAGS[name].mask)) != 0


def quality_attributes():
    """CF attributes of a `quality` variable."""
    return {
        "flag_masks": np.array([row.mask for row in ROWS], dtype=np.int32),
        "flag_meanings": " ".join(row.name for row in ROWS),
        "comment": "; ".join(
            f"{row.name}: {row.meaning} ({'masks' if row.masks else 'notes'})" for row in ROWS
        ),
    }


def origin_attributes():
    """CF attributes of an `origin` variable."""
    return {
        "flag_values": np.array(list(ORIGINS.values()), dtype=np.int8),
        "flag_meanings": " ".join(ORIGINS),
    }
