"""The truth of a virtual copy: what every stem and probe does, before any logger has seen it."""

from dataclasses import dataclass, field

import numpy as np

from sapflux.physics import thermocouple
from sapflux.virtual import faults_tree, forest, sensors, signals
from sapflux.virtual import truth as tables
from sapflux.virtual.weather import Weather

STEP_OF_INVERSE = 0.01  # K, nodes of the table that turns a voltage into kelvin


@dataclass(frozen=True)
class VirtualTruth:
    """All that is true of a virtual copy of a site.

    Times of all series are `weather.end`: UTC ends of intervals of `step_s` seconds. `dates` are
    the whole days of the site's standard time.

    stems : every `forest.Stem`; strata : stand -> species -> `truth.Stratum`; carriers : species
    -> the species that stands in for it where it has no probes; left_out : what of the site the
    copy does not show, in words. options : which assumptions were taken: `wound` ("cubic" or
    "strip"), `azimuth` (bool), `gradients` ("natural" or "none"), `night_cooling` [K], `weather`
    ("stochastic" or "given").
    """

    seed: int
    knowledge: str
    weather: Weather
    step_s: int
    dates: np.ndarray  # datetime64[D]
    stems: tuple
    strata: dict
    carriers: dict
    left_out: tuple
    options: dict
    species: dict = field(repr=False)  # name -> SpeciesTruth
    soil: np.ndarray = field(repr=False)  # (time) relative extractable water [1]
    probes: dict = field(repr=False)  # name -> DissipationProbe of each point, or (RatioProbe,)
    stores: dict = field(repr=False)  # name -> the quantity that its logger keeps
    gradients: dict = field(repr=False)  # tree -> natural gradient in full sun [K]
    known: dict = field(repr=False)  # name of a stem -> StemTruth
    tree_of: dict = field(repr=False)  # name of a probe or pair -> its tree
    faults: tuple = field(default=(), repr=False)  # of `faults_kinds.Injected`

    @property
    def wound(self):
        """What slows the heat pulses: "cubic", the published correction inverted, or "strip"."""
        return self.options["wound"]

    def tree_flow(self, name):
        """Sap flow of a stem: (time) [kg s-1]. KeyError for no stem of the copy."""
        one = self._stem(name)
        return forest.stem_flow(one.stem, one.nodes, self.outer(name))

    def outer(self, name):
        """Flux density just below the cambium of the stem at vigour 1: (time) [kg m-2 s-1]."""
        outer = outer_of(self._stem(name).stem, self.species, self.weather, self.soil)
        return outer * faults_tree.alive(self.faults, name, self.weather.end)

    def flux_at(self, name):
        """A function: depths below cambium [m] -> (depth, time) flux density [kg m-2 s-1].

        The mean around the stem; a probe's face has its `facing` times as much.
        """
        one, outer = self._stem(name), self.outer(name)
        return lambda depths: forest.flux_density_at(one.stem, one.nodes, outer, depths)

    def point_flux(self, probe):
        """True flux density at a probe: (point, time) [kg m-2 s-1].

        The mean along the part of each point in sapwood, at the probe's face; 0 for a point wholly
        outside it.
        """
        parts = self._probe(probe)
        stem, flux_at = self._stem(parts[0].tree).stem, self.flux_at(parts[0].tree)
        flux = np.array([signals.point_flux(*span, stem, flux_at) for span in spans(parts)])
        return parts[0].facing * flux

    def needle_ratio(self, probe):
        """Difference of a heated needle over that without flow, as it reads: (point, time) [1].

        It averages over sap that flows unevenly, and over wood past which none flows. KeyError for
        a probe of another method.
        """
        parts = self._heated(probe)
        stem, flux_at = self._stem(parts[0].tree).stem, self.flux_at(parts[0].tree)
        return np.array([signals.needle_ratio(part, stem, flux_at) for part in parts])

    def even_ratio(self, probe):
        """As `needle_ratio`, if `point_flux` cooled each needle evenly along its whole length."""
        pairs = zip(self._heated(probe), self.point_flux(probe), strict=True)
        return np.array([signals.even_ratio(part, flux) for part, flux in pairs])

    def zero_flow(self, probe, point=1):
        """Difference that a heat-dissipation probe's logger would show without flow: (time) [K].

        With the temperature of the wood, without noise and the stem's natural gradient. Where the
        logger keeps kelvin, by its one sensitivity; where it keeps volts, as kelvin of a pair
        whose cold junction is at 20 degC. KeyError for a probe of another method.
        """
        one = self._heated(probe)[point - 1]
        temperature = sensors.stem_temperature(self.weather)
        zero = sensors.zero_flow_over_time(one, signals.progress(self.weather))
        zero = sensors.in_wood_of(zero, temperature, one.conductivity_slope)
        emf = sensors.heated_emf(zero, temperature)
        if self.stores[probe] == "heated_difference":
            return sensors.kelvin_by_constant(emf)
        kelvin = np.arange(0.0, 60.0, STEP_OF_INVERSE)
        room = sensors.ROOM
        return np.interp(emf, thermocouple.emf(room + kelvin) - thermocouple.emf(room), kelvin)

    def carrier(self, stand, species):
        """The `Stratum` whose stems stand in for a species of a stand; None where it has probes.

        Its stand-in there, else the species in all stands, else its stand-in in all stands; a
        species with none of them raises KeyError.
        """
        if self.strata[stand][species].sampled.any():
            return None
        stand_in = self.carriers.get(species)
        here = self.strata[stand].get(stand_in)
        if here is not None and here.sampled.any():
            return here
        for name in (species, stand_in):
            pool = [s[name] for s in self.strata.values() if name in s and s[name].sampled.any()]
            if pool:
                return tables.pooled(pool)
        raise KeyError(f"species {species!r} has no trees with probes and no stand-in")

    def sampled_mm(self, stand, species):
        """What a sampling of its trees (or of its carrier's) without error gives: (day) [mm]."""
        return tables.sampled_mm(self.strata[stand][species], self.carrier(stand, species))

    def _stem(self, name):
        if name not in self.known:
            raise KeyError(f"the copy has no stem {name!r}")
        return self.known[name]

    def _heated(self, name):
        parts = self._probe(name)
        if not isinstance(parts[0], sensors.DissipationProbe):
            raise KeyError(f"probe {name!r} is not of heat dissipation")
        return parts

    def _probe(self, name):
        if name not in self.probes:
            raise KeyError(f"the copy has no probe {name!r}")
        return self.probes[name]


def outer_of(stem, species, weather, soil):
    """Flux density just below the cambium of a stem at vigour 1: (time) [kg m-2 s-1]."""
    own = species[stem.species]
    return forest.outer_flux_density(own.response, stem.deficit_ratio, weather, soil, own.leaves)


def spans(parts):
    """(from, to) of each point of a probe's sensors [m]."""
    if isinstance(parts[0], sensors.RatioProbe):
        return list(zip(parts[0].depths_from, parts[0].depths_to, strict=True))
    return [(part.needle_from, part.needle_to) for part in parts]


def draw_strata(stems, species, weather, soil, ground_of):
    """stand -> species -> `Stratum`. ground_of : stand -> plan area of its plots [m2]."""
    groups = {}
    for one in stems:
        groups.setdefault((one.stem.stand, one.stem.species), []).append(one)
    strata = {}
    for (stand, kind), members in sorted(groups.items()):
        kg = np.array([
            tables.daily_sums(
                forest.stem_flow(m.stem, m.nodes, outer_of(m.stem, species, weather, soil)),
                weather.step_s,
            )
            for m in members
        ])  # fmt: skip
        strata.setdefault(stand, {})[kind] = tables.Stratum(
            tuple(m.stem for m in members),
            kg,
            np.array([m.instrumented for m in members]),
            ground_of(stand),
            np.array([m.count for m in members]),
        )
    return strata
