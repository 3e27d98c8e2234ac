"""Stems, instrumented trees and probes of the demo site, drawn from its plan."""

import math

import numpy as np

from sapflux.virtual import demo_plan as plan
from sapflux.virtual import forest, sensors
from sapflux.virtual.copy_forest import SpeciesTruth, StemTruth
from sapflux.virtual.copy_truth import VirtualTruth, draw_strata
from sapflux.virtual.seeds import generator
from sapflux.virtual.weather import soil_water, stochastic_weather


def grow(seed):
    """The `VirtualTruth` of a seed."""
    weather = stochastic_weather(
        plan.CLIMATE, plan.POSITION, plan.FIRST_DAY, plan.DAYS, plan.STEP_S, seed
    )
    soil = soil_water(weather)
    stems = tuple(stem for plot in plan.PLOTS for stem in _plot_stems(plot, seed))
    species = {
        name: SpeciesTruth(name, own.anatomy, own.response, own.profile, None, own.factor,
                           own.exponent, registered=True)
        for name, own in plan.SPECIES.items()
    }  # fmt: skip
    drawn = {probe.name: (probe,) for probe in _probes(stems, seed)}
    carrying = {probe.tree for (probe,) in drawn.values()}
    known = {
        stem.name: StemTruth(stem, species[stem.species].nodes, False, stem.name in carrying, 1.0)
        for stem in stems
    }
    living = [one for one in known.values() if one.stem.alive]
    return VirtualTruth(
        seed=seed,
        knowledge="estimated",
        weather=weather,
        step_s=weather.step_s,
        dates=np.datetime64(plan.FIRST_DAY) + np.arange(plan.DAYS),
        stems=stems,
        strata=draw_strata(living, species, weather, soil, stand_area),
        carriers={name: own.stand_in for name, own in plan.SPECIES.items() if own.stand_in},
        left_out=(),
        options={"wound": "cubic"},
        species=species,
        soil=soil,
        probes=drawn,
        gradients={probe.tree: getattr(probe, "gradient", 0.0) for (probe,) in drawn.values()},
        stores={name: group.stores for group in plan.GROUPS for name in group.probes},
        known=known,
        tree_of={name: probe.tree for name, (probe,) in drawn.items()},
    )


def instrumented(truth):
    """Stems that carry a probe, in the order of the survey."""
    return [one.stem for one in truth.known.values() if one.instrumented]


def grouped_probes(truth):
    """(`ProbeGroup`, its probe) of every probe, in the order of the plan."""
    return [(group, truth.probes[name][0]) for group in plan.GROUPS for name in group.probes]


def plan_area(plot):
    """Horizontal area of a plot [m2]."""
    return plot.area_m2 * math.cos(math.radians(plot.slope_deg))


def stand_area(stand):
    """Horizontal area of the plots of a stand [m2]."""
    return math.fsum(plan_area(plot) for plot in plan.PLOTS if plot.stand == stand)


def _plot_stems(plot, seed):
    number = 0
    for species, count in plot.stems.items():
        for _ in range(count):
            number += 1
            yield _stem(f"{plot.plot}-{number:02d}", plot, species, True, seed)
    if plot.plot == "U2":
        yield _stem(f"{plot.plot}-{number + 1:02d}", plot, "spruce", False, seed)


def _stem(name, plot, species, alive, seed):
    of_species = plan.SPECIES[species]
    rng = generator(seed, "stem", name)
    median, spread = plan.DIAMETER[species]
    diameter = float(median * np.exp(rng.normal(0.0, spread)))
    diameter = round(min(max(diameter, plan.SMALLEST_DIAMETER), plan.LARGEST_DIAMETER), 3)
    bark = of_species.bark_share * diameter * float(np.exp(rng.normal(0.0, 0.06)))
    area = of_species.area_a_cm2 * (diameter * 100.0) ** of_species.area_b * 1e-4
    area *= float(np.exp(rng.normal(0.0, of_species.area_spread)))
    radius = diameter / 2.0 - bark
    depth = radius - math.sqrt(max(radius**2 - area / math.pi, (0.15 * radius) ** 2))
    return forest.Stem(
        name, plot.stand, plot.plot, species, diameter, bark, depth,
        vigour=float(np.exp(rng.normal(0.0, plan.VIGOUR_SPREAD))),
        tilt=float(rng.normal(0.0, plan.TILT_SPREAD)),
        deficit_ratio=float(np.exp(rng.normal(0.0, plan.DEFICIT_SPREAD))),
        alive=alive,
    )  # fmt: skip


def _probes(stems, seed):
    """Probes on trees drawn without choice: a simple sample of each species of each stand."""
    drawn = {}
    for group in plan.GROUPS:
        key = (group.stand, group.species)
        if key not in drawn:
            names = [s.name for s in stems if (s.stand, s.species) == key and s.alive]
            drawn[key] = list(generator(seed, "sample", "/".join(key)).permutation(names))
        for probe in group.probes:
            stem = next(s for s in stems if s.name == drawn[key][0])
            drawn[key].pop(0)
            make = _dissipation if group.method == "heat_dissipation" else _ratio
            yield make(probe, stem, seed)


def _dissipation(name, stem, seed):
    rng = generator(seed, "probe", name)
    of_species = plan.SPECIES[stem.species]
    return sensors.DissipationProbe(
        name, stem.name, *plan.NEEDLE,
        zero_flow=float(rng.uniform(8.6, 11.0)),
        drift=float(rng.choice([-1.0, 1.0]) * rng.uniform(0.010, 0.030)),
        bow=float(rng.normal(0.0, 0.002)),
        gradient=float(rng.normal(0.0, 0.03)),
        noise=float(rng.uniform(0.005, 0.010)),
        factor=of_species.factor,
        exponent=of_species.exponent,
    )  # fmt: skip


def _ratio(name, stem, seed):
    rng = generator(seed, "probe", name)
    of_species = plan.SPECIES[stem.species]
    return sensors.RatioProbe(
        name, stem.name, plan.POINTS_FROM, plan.POINTS_TO,
        wound_width=float(np.clip(rng.normal(2.0e-3, 0.1e-3), 1.75e-3, 2.3e-3)),
        offset=tuple(float(v) for v in rng.uniform(-1.0, 1.0, 2) * 0.01 / 3600.0),
        noise=float(rng.uniform(0.001, 0.003)),
        dry_density=of_species.dry_density,
        water_content=of_species.water_content,
    )  # fmt: skip
