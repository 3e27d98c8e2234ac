"""Rows of the site's CSV tables. One class a table; its fields are the columns.

Times are the site's fixed standard time; intervals are half-open [from, to), a blank end is open.
Units stand in the column names. A blank cell takes the field's default.
"""

from typing import Annotated, ClassVar, Literal

from pydantic import BaseModel, ConfigDict, Field, ValidationInfo, field_validator

from sapflux import schema, units
from sapflux.site.cells import (
    Day,
    Moment,
    MonthDay,
    Name,
    NotNegative,
    Numbers,
    Positive,
    Share,
)


class Row(BaseModel):
    """A table row: cells come as text, so numbers and dates are read from it."""

    model_config = ConfigDict(
        extra="forbid",
        frozen=True,
        populate_by_name=True,
        str_strip_whitespace=True,
        allow_inf_nan=False,
    )

    @classmethod
    def blank_remedy(cls, column, given):
        """What would be right in a blank cell of a row with the given cells; '' for anything."""
        return ""


Start = Annotated[Moment | None, Field(default=None, alias="from")]
Method = Literal["heat_dissipation", "heat_ratio", "unheated_pair"]


class Channel(Row):
    """One logger column over one span of time."""

    log: Name
    column: Name
    kind: Literal["probe", "tree", "log", "stand", "site"]
    id: str = ""  # the probe, tree, log or stand; blank for the site
    point: Annotated[int, Field(ge=1)] = 1  # 1 is the outermost point of the needle
    quantity: Literal[tuple(schema.QUANTITIES)]
    unit: Name
    from_: Start
    to: Moment | None = None

    @field_validator("unit")
    @classmethod
    def _one_spelling(cls, value, info: ValidationInfo):
        return units.meant(value, info.data.get("quantity"))

    @classmethod
    def blank_remedy(cls, column, given):
        """The units of the row's quantity, where the unit is blank."""
        if column != "unit" or given.get("quantity") not in schema.QUANTITIES:
            return ""
        return f"Units of {given['quantity']}: {', '.join(units.accepted(given['quantity']))}."


class Probe(Row):
    """One installation of a probe. A re-drilled probe has a row of the same name for each."""

    probe: Name
    tree: Name
    method: Method
    height_m: NotNegative
    azimuth_deg: Annotated[float, Field(ge=0, lt=360)] | None = None
    depth_from_mm: Numbers  # below cambium, one for each point, outermost first
    depth_to_mm: Numbers
    needle_length_mm: Positive | None = None
    spacing_downstream_mm: Positive | None = None
    spacing_upstream_mm: Positive | None = None
    pulse_length_s: NotNegative | None = None
    pulse_energy_J_m: Positive | None = None
    window_from_s: NotNegative | None = None
    window_to_s: Positive | None = None
    heater_resistance_ohm: Positive | None = None
    # of a heating cycle, counted from the full hour and begun with heating, unless heater_state is
    # logged; blank: heated without a break
    heating_on_min: Positive | None = None
    heating_off_min: Positive | None = None
    embedded_diffusivity_cm2_s: Positive | None = None
    embedded_spacing_mm: Positive | None = None
    contact_fraction: Share | None = None
    installed: Moment
    removed: Moment | None = None


class Tree(Row):
    """A tree that carries instruments.

    Its diameter stands in `surveys` under the same name, or here if it stands outside all plots.
    """

    tree: Name
    stand: Name
    species: Name
    height_m: Positive | None = None
    bark_mm: NotNegative | None = None
    diameter_cm: Positive | None = None  # over bark; the survey's goes before it
    under_bark: ClassVar[bool] = False


class Core(Row):
    """One face of an increment core."""

    tree: Name
    face: str = ""
    date: Day
    bark_mm: NotNegative | None = None
    sapwood_depth_cm: Positive


class Plot(Row):
    """A survey plot. Plan area is horizontal; an area along the slope has its own key."""

    plot: Name
    stand: Name
    plan_area_m2: Positive | None = None
    slope_area_m2: Positive | None = None
    slope_deg: Annotated[float, Field(ge=0, lt=70)] | None = None
    smallest_diameter_cm: NotNegative = 0.0
    within: str = ""  # the larger plot that this one lies in (nested plots)
    empty: bool = False  # surveyed, and no stem stands on it


class Survey(Row):
    """One stem in one survey."""

    plot: Name
    stem: Name
    species: Name
    date: Day
    diameter_cm: Positive
    under_bark: bool = False
    status: Literal["alive", "dead", "removed"] = "alive"


class Stand(Row):
    """A stand of the site."""

    stand: Name
    area_ha: Positive | None = None
    description: str = ""


class Species(Row):
    """What is known of a species."""

    species: Name
    anatomy: Literal["conifer", "diffuse_porous", "ring_porous", "other"]
    leaf_on: MonthDay = ""  # blank: in leaf all year
    leaf_off: MonthDay = ""  # first day out of leaf
    # conducting area = a * (diameter over bark in cm)^b, in cm2, where no core was taken
    sapwood_area_a_cm2: Positive | None = None
    sapwood_area_b: Positive | None = None
    stand_in: str = ""  # the species whose flux density stands in where this one has no probes
    general_calibration_accepted: bool = False


class Profile(Row):
    """One node of a relative radial profile: flux density at a depth, relative to any scale."""

    species: str = ""
    tree: str = ""  # a tree's own profile goes before its species'
    relative_depth: Annotated[float, Field(ge=0, le=1)]  # 0 cambium, 1 sapwood-heartwood border
    ratio: float
    source: Name
    from_: Start
    to: Moment | None = None


class Wood(Row):
    """One wood sample. Water content is water mass over DRY mass."""

    species: str = ""
    tree: str = ""
    date: Day
    dry_density_kg_m3: Positive | None = None
    water_content: Positive | None = None
    diffusivity_cm2_s: Positive | None = None


class Wound(Row):
    """A wound width, measured or assumed (`source` says which)."""

    probe: str = ""
    tree: str = ""
    species: str = ""
    date: Day
    width_mm: Positive
    # of a wound that grows from `width_mm` at `date` by 1 - exp(-days / time_constant_d)
    final_width_mm: Positive | None = None
    time_constant_d: Positive | None = None
    source: Name


class Calibration(Row):
    """One registered calibration: flux density = factor * flow_index ^ exponent."""

    calibration: Name
    species: Name
    method: Method = "heat_dissipation"
    heating: Literal["continuous", "intermittent"] = "continuous"
    factor_g_m2_s: Positive
    exponent: Positive
    lowest_index: NotNegative | None = None
    highest_index: Positive | None = None
    ln_factor_error: NotNegative | None = None
    exponent_error: NotNegative | None = None
    error_correlation: Annotated[float, Field(ge=-1, le=1)] | None = None
    source: Name
    date: Day


class Pair(Row):
    """An unheated pair and the heated probe of the same stem that it serves."""

    unheated: Name
    heated: Name
    from_: Start
    to: Moment | None = None


class Reference(Row):
    """Dates at which no sap flows, or the heater was off on purpose."""

    kind: Literal["dormant", "cut", "power_off"]
    probe: str = ""
    species: str = ""
    from_: Annotated[Moment, Field(alias="from")]
    to: Moment


class Potential(Row):
    """A measured water potential."""

    kind: Literal["soil", "leaf"]
    stand: str = ""
    tree: str = ""
    time: Moment
    potential_MPa: Annotated[float, Field(le=0, ge=-30)]


class Event(Row):
    """Something done to a stand."""

    stand: Name
    kind: Name
    from_: Annotated[Moment, Field(alias="from")]
    to: Moment | None = None
    note: str = ""


class Visit(Row):
    """A visit to a logger. The offset is logger clock minus reference clock."""

    log: Name
    arrival: Moment
    departure: Moment
    clock_offset_s: float | None = None
    done: str = ""


class Exclusion(Row):
    """Records a person takes out, and why."""

    kind: Literal["probe", "tree", "log", "stand"]
    id: Name
    from_: Annotated[Moment, Field(alias="from")]
    to: Moment
    reason: Name
    who: Name


class Decision(Row):
    """What a person decided on a proposal of the program."""

    log: Name
    kind: Name
    first_record: Moment
    answer: Literal["accept", "reject"]
    who: Name
    date: Day
    note: str = ""


TABLES = {
    "channels": Channel,
    "probes": Probe,
    "trees": Tree,
    "cores": Core,
    "plots": Plot,
    "surveys": Survey,
    "stands": Stand,
    "species": Species,
    "profiles": Profile,
    "wood": Wood,
    "wounds": Wound,
    "calibrations": Calibration,
    "pairs": Pair,
    "references": Reference,
    "potentials": Potential,
    "events": Event,
    "visits": Visit,
    "exclusions": Exclusion,
    "decisions": Decision,
}


def columns_of(row_class):
    """Column name -> field of a table, in the order of its columns.

    >>> list(columns_of(Pair))
    ['unheated', 'heated', 'from', 'to']
    """
    return {field.alias or name: field for name, field in row_class.model_fields.items()}
