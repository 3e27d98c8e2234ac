"""Intermittent heating: the difference that a heating cycle makes, from its two readings."""

import numpy as np

from sapflux.constants import LONGEST_CYCLE_S
from sapflux.correction.night_table import laid_on
from sapflux.schema import RECORD
from sapflux.stage import stage

HOUR_S = 3600
SECOND_NS = 1_000_000_000


def _reach_s(_settings):
    # From the last record of a cycle back to the pause before it, and on to the next heating.
    return 2.0 * LONGEST_CYCLE_S


@stage(
    chain="heat_dissipation",
    makes="heated_difference",
    flags="incomplete_cycle",
    reach_s=_reach_s,
    limits={"least_heater_share": (0.5, 1.0)},
)
def heating_cycle(
    heated_difference,
    installation,
    heating_on=None,
    heating_off=None,
    heater_state=None,
    heater_state_given=None,
    /,
    *,
    least_heater_share=0.99,
):
    """What a heating cycle adds to the temperature difference, on all records of the cycle.

    The difference at the end of heating less the difference without heating at that moment, which
    lies on a straight line between the ends of the pauses before and after. The natural gradient
    of the stem is in both and drops out, also while it drifts steadily. Both readings are taken
    at a fixed time after switching, since within a cycle the needle comes to rest neither warm
    nor cold; the coefficients of continuous heating do not hold for the result.

    Records with the heater on are told by its logged state; where no channel gives that, cycles are
    counted from the full hour of UTC and begin with heating. A cycle is the heating and the pause
    after it. Probes heated without a break pass unchanged.

    Parameters
    ----------
    heated_difference : (probe, point, time) [K]
        Heated minus reference needle, as measured through heating and pauses.
    installation : (probe, time) [1]
        No cycle reaches across it.
    heating_on, heating_off : (probe) [s]
        Times heated and not heated in a cycle, each a whole number of records; NaN for probes
        heated without a break.
    heater_state : (probe, time) [1]
        Share of the interval with the heater on, where logged.
    heater_state_given : (probe, time) [1]
        1 while a channel gives that share: where it is missing then, nothing tells when the heater
        was on, for it need not keep to the clock.
    least_heater_share : float [1]
        From this share of the interval the heater counts as on, and as off up to 1 less it. Own
        judgement.

    Returns
    -------
    heated_difference : (probe, point, time) [K]
        Of probes heated in cycles the same on all records of a cycle; NaN in a cycle without its
        readings or with the heater on at another time.
    incomplete_cycle : (probe, point, time) [bool]
        Where that is so.

    Source: Do & Rocheteau (2002b), Tree Physiology 22 (difference of two readings, from memory);
    the line between two pauses is own derivation.
    """
    unchanged = {"heated_difference": heated_difference.copy()}
    if heating_on is None or heating_off is None or not heating_on.notnull().any():
        return unchanged
    heated = heated_difference.transpose(*RECORD)
    stamps = heated["time"].values.astype("datetime64[ns]").astype(np.int64) // SECOND_NS
    on_s, off_s = laid_on(heated, heating_on), laid_on(heated, heating_off)
    numbers = laid_on(heated, installation)
    state = np.full(on_s.shape, np.nan) if heater_state is None else laid_on(heated, heater_state)
    given = np.zeros(on_s.shape, dtype=bool)
    if heater_state_given is not None:
        given = laid_on(heated, heater_state_given) > 0
    made, wanting = heated.values.copy(), np.zeros(heated.shape, dtype=bool)
    for row in np.flatnonzero(np.isfinite(on_s).any(axis=-1)):
        own = np.isfinite(on_s[row])
        values = heated.values[row]
        added = np.full(values.shape, np.nan)
        for cycle in _cycles(on_s[row, own], off_s[row, own]):
            here = (on_s[row] == cycle[0]) & (off_s[row] == cycle[1])
            switched = _switched(stamps, state[row], given[row], *cycle, least_heater_share)
            _add_cycles(added, values, stamps, switched, np.where(here, numbers[row], -1), *cycle)
        # A record that is missing stays so, though its cycle has a value.
        made[row] = np.where(own & np.isfinite(values), added, values)
        wanting[row] = own & np.isfinite(values) & np.isnan(added)
    return {
        "heated_difference": heated.copy(data=made),
        "incomplete_cycle": heated.copy(data=wanting),
    }


def _cycles(on_s, off_s):
    """The different (on, off) of a probe's installations: mostly one."""
    for on in np.unique(on_s):
        for off in np.unique(off_s[on_s == on]):
            yield on, off


def _switched(stamps, state, given, on_s, off_s, least_share):
    """(time) 1 where the heater was on, -1 where it was off, 0 where neither or not known.

    given : (time) bool, whether a channel gives the state, so that the clock does not.
    """
    interval = _interval(stamps)
    told = np.select([state >= least_share, state <= 1.0 - least_share], [1, -1], 0)
    cycle = on_s + off_s
    if HOUR_S % cycle:
        return told
    begin = (stamps - interval) % cycle
    counted = np.select([begin + interval <= on_s, begin >= on_s], [1, -1], 0)
    return np.where(np.isnan(state) & ~given, counted, told)


def _add_cycles(added, values, stamps, switched, numbers, on_s, off_s):
    """Write the value of each whole cycle of one probe on its records.

    added, values : (point, time); switched : as of `_switched`; numbers : (time) installation,
    -1 where this cycle does not hold.
    """
    interval = _interval(stamps)
    if not interval or on_s % interval or off_s % interval:
        return
    on, off = int(on_s // interval), int(off_s // interval)
    pattern = np.array([-1] * off + [1] * on + [-1] * off)
    if len(stamps) < len(pattern):
        return
    seen = np.lib.stride_tricks.sliding_window_view(switched, len(pattern))
    held = np.lib.stride_tricks.sliding_window_view(numbers, len(pattern))
    whole = (seen == pattern).all(axis=-1) & (held >= 0).all(axis=-1)
    whole &= (held == held[:, :1]).all(axis=-1)
    begins = np.flatnonzero(whole)  # of the pauses before
    before, warm, after = begins + off - 1, begins + off + on - 1, begins + 2 * off + on - 1
    since = on / (on + off)
    cold = (1.0 - since) * values[:, before] + since * values[:, after]
    for step in range(on + off):
        added[:, before + 1 + step] = values[:, warm] - cold


def _interval(stamps):
    """Seconds of a record; 0 where there is but one."""
    return int(stamps[1] - stamps[0]) if len(stamps) > 1 else 0
