"""Signals of every probe of the demo site on its logger's records, as the logger stores them."""

import numpy as np

from sapflux.virtual import demo_plan as plan
from sapflux.virtual import signals
from sapflux.virtual.seeds import generator


def standard(text):
    """A moment of standard time as UTC datetime64[s]."""
    offset = np.timedelta64(round(plan.POSITION.utc_offset_h * 3600), "s")
    return np.datetime64(text.replace(" ", "T"), "s") - offset


def dissipation_emf(truth, probe, powered):
    """Voltage of a heat-dissipation probe at each record [V]. `powered`: share heated."""
    stem = truth.known[probe.tree].stem
    emf = signals.dissipation_emf(
        probe,
        stem,
        truth.flux_at(probe.tree),
        truth.weather,
        generator(truth.seed, "noise", probe.name),
        powered,
    )
    if probe.name == plan.EXCLUDED[0]:
        emf = _broken_cable(emf, truth.weather.end, truth.seed)
    return emf


def powered_share(log, end, step_s):
    """Share of each record with the heaters of a log on."""
    on = np.ones(len(end))
    if log == plan.POWER_LOSS[0]:
        cut, back = (standard(text) for text in plan.POWER_LOSS[1:])
        lost = np.minimum(end, back) - np.maximum(end - np.timedelta64(step_s, "s"), cut)
        on -= np.maximum(lost / np.timedelta64(step_s, "s"), 0.0)
    return on


def ratio_signals(truth, probe, every):
    """(rise downstream, rise upstream), each (point, record) [K].

    One record is `every` records of the weather's clock; its pulse sees their mean flow.
    """
    stem = truth.known[probe.tree].stem
    return signals.ratio_rises(
        probe,
        stem,
        truth.flux_at(probe.tree),
        every,
        lambda point: generator(truth.seed, "noise", f"{probe.name}/{point + 1}"),
    )


def _broken_cable(emf, end, seed):
    """Erratic readings while the cable is bitten through."""
    begin, stop = (standard(text) for text in plan.EXCLUDED[1:3])
    broken = (end > begin) & (end <= stop)
    noise = generator(seed, "broken cable").normal(0.0, 4e-5, len(emf))
    return np.where(broken, emf * 0.6 + noise, emf)
