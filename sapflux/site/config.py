"""`site.toml` as validated objects: position, clock, common step, logs and their layouts."""

import codecs
import difflib
from pathlib import PurePosixPath, PureWindowsPath
from typing import Annotated, Literal
from zoneinfo import available_timezones

from pydantic import BaseModel, ConfigDict, Field, field_validator, model_validator

from sapflux.site.cells import month_day

YEAR_DAY_HHMM = "year_day_hhmm"  # the one time format that is no strptime format
# Years a logger can have written, both ends within: a stamp outside comes from a clock that lost
# its date, or from torn text. Source: own judgement.
YEARS = (1990, 2100)
# Of a log of temperature traces, rows up to so long before heating and after its start belong to a
# pulse [s]. Source: own judgement: diffusivity and flow have done their work by then.
TRACE_BEFORE_S = 60
TRACE_AFTER_S = 300


class Strict(BaseModel):
    """Unknown keys and wrong types are faults; objects do not change once made."""

    model_config = ConfigDict(strict=True, extra="forbid", frozen=True, allow_inf_nan=False)


class Position(Strict):
    """`[site]`: where the site is and how it counts time."""

    name: Annotated[str, Field(min_length=1)]
    latitude_deg: Annotated[float, Field(ge=-90, le=90)]
    longitude_deg: Annotated[float, Field(ge=-180, le=180)]
    elevation_m: Annotated[float, Field(ge=-450, le=6000)]
    utc_offset_h: Annotated[float, Field(ge=-12, le=14)]
    water_year_start: Annotated[str, Field(pattern=r"^\d\d-\d\d$")]
    common_step_min: Annotated[int, Field(ge=1, le=60)]

    @field_validator("utc_offset_h")
    @classmethod
    def _offset_is_in_use(cls, value):
        if value * 4 != round(value * 4):
            raise ValueError(
                f"{value:g} is no whole number of quarter hours",
                "Give standard time minus UTC in hours, like 1.0 or -3.5.",
            )
        return value

    @field_validator("water_year_start")
    @classmethod
    def _day_comes_every_year(cls, value):
        return month_day(value)

    @field_validator("common_step_min")
    @classmethod
    def _step_divides_the_hour(cls, value):
        if 60 % value:
            raise ValueError(
                f"{value} does not divide the hour",
                "Give minutes that do: 1, 2, 3, 4, 5, 6, 10, 12, 15, 20, 30 or 60.",
            )
        return value


class LongTable(Strict):
    """A long table: each row is one value, named by its `name_columns`.

    The channel's `column` is then those names joined by "/", for example "T07/dT".
    """

    name_columns: Annotated[tuple[str, ...], Field(min_length=1, strict=False)]
    value_column: str


class Layout(Strict):
    """How a log's text is laid out. Columns are found by name, never by position."""

    delimiter: Literal[",", ";", "tab", "|", "space"] = ","
    decimal: Literal[".", ","] = "."
    quote: Literal['"', "'", ""] = '"'
    encoding: str = "utf-8"
    comment: str = ""  # lines that begin with this are comments; blank: none
    names_line: Annotated[int, Field(ge=1)] = 1  # 1 is the first line of the file
    units_line: Annotated[int, Field(ge=0)] = 0  # 0: the file has none
    aggregation_line: Annotated[int, Field(ge=0)] = 0
    header_lines: Annotated[int, Field(ge=0)] = 0  # 0: up to the last of the lines above
    time_columns: Annotated[tuple[str, ...], Field(min_length=1, max_length=3, strict=False)] = (
        "TIMESTAMP",
    )
    # strptime format of the time columns joined by one blank (with %z a stamp's own offset goes
    # before the log's clock); or YEAR_DAY_HHMM for year, day of year and hhmm with 2400
    # (three columns)
    time_format: str = "%Y-%m-%d %H:%M:%S"
    missing_text: Annotated[tuple[str, ...], Field(strict=False)] = ("", "NAN", "NaN", "nan", "NA")
    missing_numbers: Annotated[tuple[float, ...], Field(strict=False)] = ()
    long: LongTable | None = None

    @property
    def first_data_line(self):
        """Number of header lines at the top of a file."""
        return max(self.header_lines, self.names_line, self.units_line, self.aggregation_line)

    @property
    def separator(self):
        """The delimiter as a character."""
        return {"tab": "\t", "space": " "}.get(self.delimiter, self.delimiter)

    @model_validator(mode="after")
    def _decimal_is_not_delimiter(self):
        if self.decimal == self.separator:
            raise ValueError(
                f"decimal mark and delimiter are both {self.decimal!r}", "One of them must differ."
            )
        return self

    @field_validator("encoding")
    @classmethod
    def _encoding_exists(cls, value):
        try:
            codecs.lookup(value)
        except LookupError:
            raise ValueError(
                f"no encoding is called {value!r}", "Use 'utf-8', 'latin-1', 'cp1252' or 'utf-16'."
            ) from None
        return value


class Log(Strict):
    """`[logs.NAME]`: one logger table."""

    files: Annotated[tuple[str, ...], Field(min_length=1, strict=False)]  # patterns
    layout: str  # name of a [layouts.NAME]
    interval_min: Annotated[float, Field(gt=0, le=1440)]
    stamp: Literal["end", "start"]  # which end of its interval a stamp marks
    # "utc", "utc+1", "utc-3.5" (fixed offset), or "civil:ZONE" of the IANA time zone table
    clock: Annotated[str, Field(pattern=r"^(utc([+-]\d{1,2}(\.\d+)?)?|civil:[A-Za-z_+\-/0-9]+)$")]
    # A log of temperature traces has a row every so many seconds around each pulse, stamped with
    # the moment it was read; interval_min is then the time from pulse to pulse, and heating starts
    # `pulse_starts_s` after each whole interval of standard time. Blank: no traces.
    trace_step_s: Annotated[float, Field(ge=1, le=10)] | None = None
    pulse_starts_s: Annotated[float, Field(ge=0)] = 0.0

    @property
    def row_s(self):
        """Seconds from one row to the next."""
        return round(self.trace_step_s or self.interval_min * 60)

    @field_validator("files")
    @classmethod
    def _files_stay_in_the_folder(cls, patterns):
        for pattern in patterns:
            inside = PurePosixPath(pattern.replace("\\", "/"))
            if (
                not pattern
                or inside.is_absolute()
                or ".." in inside.parts
                or PureWindowsPath(pattern).drive
            ):
                raise ValueError(
                    f"{pattern!r} leads out of the site folder",
                    "Give a path below the folder, like 'raw/T1*.dat'.",
                )
            if "\\" in pattern:
                raise ValueError(f"{pattern!r} has a backslash", "Part folders by '/'.")
        return patterns

    @field_validator("interval_min")
    @classmethod
    def _interval_divides_the_day(cls, value):
        seconds = value * 60
        if seconds != round(seconds) or 86400 % seconds:
            raise ValueError(
                f"{value:g} does not divide the day into whole seconds",
                "Give the minutes from one record to the next, like 10 or 0.5.",
            )
        return value

    @field_validator("trace_step_s")
    @classmethod
    def _trace_step_divides_the_minute(cls, value):
        if value is not None and 60 % value:
            raise ValueError(
                f"{value:g} does not divide the minute into whole seconds",
                "Give the seconds from one row to the next around a pulse, like 1.",
            )
        return value

    @model_validator(mode="after")
    def _traces_are_moments_of_a_pulse(self):
        if self.trace_step_s is None:
            if self.pulse_starts_s:
                raise ValueError(
                    "pulse_starts_s is given without trace_step_s",
                    "Give trace_step_s if the log has temperature traces, else neither.",
                )
            return self
        if self.stamp != "end":
            raise ValueError(
                "the rows of a log with trace_step_s are moments and have no start",
                'Set stamp = "end".',
            )
        if self.pulse_starts_s >= self.interval_min * 60:
            raise ValueError(
                f"pulse_starts_s is {self.pulse_starts_s:g}, and the next interval begins after "
                f"{self.interval_min * 60:g} s",
                "Count from the whole interval before the pulse.",
            )
        return self

    @field_validator("clock")
    @classmethod
    def _clock_exists(cls, value):
        kind, _, zone = value.partition(":")
        if kind == "civil" and zone not in available_timezones():
            raise ValueError(f"no time zone is called {zone!r}", _zone_hint(zone))
        if kind != "civil" and len(value) > 3 and not -12 <= float(value[3:]) <= 14:
            raise ValueError(f"{value!r} is no offset in use", "Offsets lie from utc-12 to utc+14.")
        return value


def _zone_hint(zone):
    """The closest zones: all of them would be six hundred."""
    close = difflib.get_close_matches(zone, available_timezones(), n=1)
    guess = f"Did you mean 'civil:{close[0]}'? " if close else ""
    return f"{guess}Use a name of the IANA time zone table, like 'civil:Europe/Vienna'."


class SiteConfig(Strict):
    """The whole of `site.toml`."""

    site: Position
    layouts: dict[str, Layout] = {}
    logs: dict[str, Log] = {}
