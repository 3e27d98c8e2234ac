"""Which columns of which tables give each fact of the site: the one place that says so."""

# fact -> column, for facts that are one column as written
INSTALLED = {  # of probes.csv
    "spacing_downstream": "spacing_downstream_mm",
    "spacing_upstream": "spacing_upstream_mm",
    "window_from": "window_from_s",
    "window_to": "window_to_s",
    "pulse_length": "pulse_length_s",
    "embedded_diffusivity": "embedded_diffusivity_cm2_s",
    "embedded_spacing": "embedded_spacing_mm",
    "heating_on": "heating_on_min",
    "heating_off": "heating_off_min",
}
SAMPLED = {  # of wood.csv
    "given_diffusivity": "diffusivity_cm2_s",
    "dry_density": "dry_density_kg_m3",
    "water_content": "water_content",
}
CALIBRATED = {  # of calibrations.csv
    "calibration_factor": "factor_g_m2_s",
    "calibration_exponent": "exponent",
    "calibration_lowest": "lowest_index",
    "calibration_highest": "highest_index",
}
SAPWOOD = ((("cores", "sapwood_depth_cm"),), (("species", "sapwood_area_a_cm2"),))
# fact -> alternatives, each the (table, column) that it takes together; column "": any row
SOURCES = {
    "installation": ((("probes", "installed"),),),
    "radial_from": ((("probes", "depth_from_mm"),),),
    "radial_to": ((("probes", "depth_to_mm"),),),
    "contact_fraction": (
        (("probes", "contact_fraction"),),
        *((("probes", "depth_to_mm"), *sapwood) for sapwood in SAPWOOD),
    ),
    **{fact: ((("probes", column),),) for fact, column in INSTALLED.items()},
    **{fact: ((("wood", column),),) for fact, column in SAMPLED.items()},
    "wound_width": ((("wounds", "width_mm"),),),
    "installed_age": ((("probes", "installed"),),),
    "probe_tree": ((("probes", "tree"),),),
    "probe_stratum": ((("trees", "species"),),),
    "paired": ((("pairs", "heated"),),),
    "heater_state_given": ((("channels", "quantity"),),),
    "power_off": ((("references", "kind"),),),
    "visited": ((("visits", "arrival"),),),
    "at_rest": ((("references", "kind"),),),
    **{fact: ((("calibrations", column),),) for fact, column in CALIBRATED.items()},
    "xylem_radius": ((("surveys", "diameter_cm"),), (("trees", "diameter_cm"),)),
    "sapwood_depth": SAPWOOD,
    "sapwood_area": SAPWOOD,
    "relative_profile": ((("profiles", "ratio"),),),
    "sapwood_per_ground": ((("surveys", ""), ("plots", "")),),
    "in_leaf": ((("species", ""),),),
}

# fact -> kinds of the rows that give it, for facts of tables with rows of several kinds
KINDS = {"at_rest": ("dormant", "cut"), "power_off": ("power_off",)}


def given_facts(site):
    """Names of the facts that the site's tables give, of one probe, tree or species at least.

    An alternative of SOURCES holds if each of its tables has a row with that column set.
    """
    return {
        fact
        for fact, alternatives in SOURCES.items()
        if any(
            all(_is_set(site, *part, KINDS.get(fact)) for part in parts) for parts in alternatives
        )
    }


def source_in_words(fact):
    """Where a site gives a fact, for messages. KeyError for a name that is no fact.

    >>> source_in_words("sapwood_depth")
    'cores.csv (sapwood_depth_cm) or species.csv (sapwood_area_a_cm2)'
    >>> source_in_words("sapwood_per_ground")
    'surveys.csv and plots.csv'
    >>> source_in_words("at_rest")
    'references.csv (kind dormant or cut)'
    """
    kinds = f" {' or '.join(KINDS[fact])}" if fact in KINDS else ""
    return " or ".join(
        " and ".join(f"{table}.csv ({column}{kinds})" if column else f"{table}.csv"
                     for table, column in parts)
        for parts in SOURCES[fact]
    )  # fmt: skip


def _is_set(site, table, column, kinds=None):
    rows = [row for row in site.table(table) if kinds is None or row.kind in kinds]
    return any(getattr(row, column) not in (None, "", ()) for row in rows) if column else bool(rows)
