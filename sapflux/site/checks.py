"""What must fit together between the tables and `site.toml` of a site."""

from sapflux.site import (
    checks_channels,
    checks_heating,
    checks_logs,
    checks_plots,
    checks_probes,
    checks_records,
    checks_species,
    checks_surveys,
    checks_traces,
    checks_trees,
    checks_wood,
)

CHECKS = (
    *checks_logs.CHECKS,
    *checks_channels.CHECKS,
    *checks_traces.CHECKS,
    *checks_probes.CHECKS,
    *checks_heating.CHECKS,
    *checks_trees.CHECKS,
    *checks_plots.CHECKS,
    *checks_surveys.CHECKS,
    *checks_species.CHECKS,
    *checks_wood.CHECKS,
    *checks_records.CHECKS,
)


def cross_faults(reading):
    """All faults between the parts of a site, by subject.

    A check looks at valid rows only, and holds back where a fault told already could be the
    reason: a name in a row that is wrong elsewhere counts as known, and "there is none" is said
    of tables that were read whole.
    """
    return [fault for check in CHECKS for fault in check(reading)]
