"""Flags: what is known to be wrong with a record, and how a value came to be.

A flag is a bit that is set and never dropped. A masking flag takes the record from every later
step; a noting flag only tells. The measurement itself is never edited.

In memory all flags of a record are one int64 word, `quality`. Files hold it as two int32 variables,
each with flags of its own: `quality` has bits 0 to 30, what the steps of the pipeline say, and
`faults` bits 31 to 61, what screens find wrong with an instrument. See `split` and `joined`.
"""

from dataclasses import dataclass

import numpy as np

FIRST_FAULT = 31  # an int32 of a file has 31 bits beside its sign
BITS = 2 * FIRST_FAULT


@dataclass(frozen=True)
class Flag:
    """One bit of `quality`: 0 to 30 for a step of the pipeline, 31 to 61 for a fault."""

    name: str
    bit: int
    masks: bool
    meaning: str

    @property
    def mask(self):
        """The bit as a number."""
        return 1 << self.bit

    @property
    def is_fault(self):
        """Whether files hold the bit in `faults`."""
        return self.bit >= FIRST_FAULT


def by_name(rows):
    """Name -> flag. ValueError for a bit out of range, or two rows of one bit or one name."""
    names, bits_taken = {}, {}
    for row in rows:
        if not 0 <= row.bit < BITS:
            raise ValueError(f"flag {row.name!r}: bit {row.bit} is not one of 0 to {BITS - 1}")
        if row.name in names:
            raise ValueError(f"flag {row.name!r} has two rows")
        if row.bit in bits_taken:
            raise ValueError(f"flags {bits_taken[row.bit]!r} and {row.name!r} share bit {row.bit}")
        names[row.name], bits_taken[row.bit] = row, row.name
    return names


# Of two flags on the same records the row above is told as the cause, whatever the bits: what a
# screen finds stands above what follows from it.
ROWS = [
    Flag("not_installed", 0, True, "no probe was installed"),
    Flag("no_record", 1, True, "the logger has no value here"),
    Flag("conflicting", 2, True, "two downloads give different values"),
    Flag("out_of_range", 3, True, "beyond what the instrument can give"),
    Flag("excluded", 4, True, "excluded by a person, with a reason"),
    Flag("heater_failure", 5, True, "heater off, or its wiring broken"),
    Flag("heater_recovery", 6, True, "wood still warming after the heater was off"),
    Flag("frozen_wood", 32, True, "the wood is frozen or still thawing"),
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

FLAGS = by_name(ROWS)
# Flags that belong to the common step and to what is scaled from it, not to a record as logged.
SCALED = {"partly_missing", "incomplete_step", "incomplete_radius", "few_trees", "borrowed"}
NATIVE = tuple(name for name in FLAGS if name not in SCALED)
MASKING = np.int64(sum(row.mask for row in ROWS if row.masks))

ORIGINS = {
    "absent": 0,
    "measured": 1,
    "interpolated": 2,
    "filled": 3,
    "modelled": 4,
    "assumed_zero": 5,
}


def bits(**flagged):
    """One int64 array of flag bits from boolean arrays by flag name. KeyError if unknown.

    >>> bits(heater_failure=np.array([True, False]), log_domain=np.array([True, True]))
    array([1056, 1024])
    """
    total = np.int64(0)
    for name, where in flagged.items():
        total = total | np.where(where, np.int64(FLAGS[name].mask), np.int64(0))
    return total


def masked(quality):
    """Where a record may not be used. ValueError as for `has`."""
    return (quality & _within(quality, MASKING)) != 0


def has(quality, name):
    """Where the flag `name` is set.

    ValueError for a fault asked of an int32, which is the `quality` of a file without its `faults`.
    """
    return (quality & _within(quality, FLAGS[name].mask)) != 0


def _within(quality, mask):
    """The mask as an int64, if the integers of `quality` have its bits."""
    if mask > np.iinfo(quality.dtype).max:
        raise ValueError(f"{quality.dtype} holds no faults: join it with the `faults` of the file")
    return np.int64(mask)


def split(quality):
    """The two int32 words of a file: (`quality`, `faults`).

    >>> split(np.array([5 + (1 << 31) + (1 << 61)]))
    (array([5], dtype=int32), array([1073741825], dtype=int32))
    """
    steps = quality & np.int64((1 << FIRST_FAULT) - 1)
    return steps.astype(np.int32), (quality >> FIRST_FAULT).astype(np.int32)


def joined(steps, faults):
    """The int64 word from `quality` and `faults` of a file.

    >>> joined(np.array([5], np.int32), np.array([1 | 1 << 30], np.int32)) - (1 << 31) - (1 << 61)
    array([5])
    """
    return steps.astype(np.int64) | faults.astype(np.int64) << FIRST_FAULT


def faults_defined():
    """Names of the flags that files hold in `faults`."""
    return {row.name for row in FLAGS.values() if row.is_fault}


def quality_attributes():
    """CF attributes of the `quality` of a file."""
    return _attributes([row for row in FLAGS.values() if not row.is_fault], 0)


def faults_attributes():
    """CF attributes of the `faults` of a file."""
    return _attributes([row for row in FLAGS.values() if row.is_fault], FIRST_FAULT)


def _attributes(rows, first):
    return {
        "flag_masks": np.array([row.mask >> first for row in rows], dtype=np.int32),
        "flag_meanings": " ".join(row.name for row in rows),
        "comment": "; ".join(
            f"{row.name}: {row.meaning} ({'masks' if row.masks else 'notes'})" for row in rows
        ),
    }


def origin_attributes():
    """CF attributes of an `origin` variable."""
    return {
        "flag_values": np.array(list(ORIGINS.values()), dtype=np.int8),
        "flag_meanings": " ".join(ORIGINS),
    }
