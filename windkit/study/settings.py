"""What a person decides: `study.toml`, validated as a whole before anything runs.

Here is the shape of the file below the stations (those are in `stations`) and the reading of it.
What is said about a fault is in `settings_faults`; what the steps do with the values is not here.
"""

from __future__ import annotations

import datetime as dt
import tomllib
from collections.abc import Mapping
from pathlib import Path
from typing import Any, Literal, get_args

from pydantic import (
    BaseModel,
    ConfigDict,
    Field,
    ValidationError,
    field_validator,
    model_validator,
)

from windkit.kernels.losses import LOSS_GROUPS
from windkit.kernels.roughness import ROUGHNESS_CLASSES, TERRAIN_ROUGHNESS
from windkit.study.checks.thresholds import CheckSettings
from windkit.study.errors import StudyError
from windkit.study.hub_settings import ConditionsSettings, ProfileSettings
from windkit.study.settings_faults import explain_fault, fault_key, refuse_patterns, toml_remedy
from windkit.study.station_draft import OPEN
from windkit.study.stations import StationSettings

__all__ = [
    "SETTINGS_FILE",
    "UNCERTAINTY_GROUPS",
    "Deviation",
    "LongTermSettings",
    "LossSettings",
    "MeasuredSettings",
    "ReferenceSettings",
    "ScreeningSettings",
    "Settings",
    "SiteSettings",
    "StudyIdentity",
    "TurbinePosition",
    "TurbineSettings",
    "UncertaintySettings",
    "parse_settings",
    "read_settings",
    "with_overrides",
]

SETTINGS_FILE = "study.toml"
#: How the template marks a text that a person must write.
FILL_IN = "FILL IN"

#: Groups of the open IEC 61400-15-2 draft, in its order; `plant_performance` is on energy.
UNCERTAINTY_GROUPS = (
    "measurement",
    "historical_wind_resource",
    "yearly_variability",
    "vertical_extrapolation",
    "horizontal_extrapolation",
    "plant_performance",
)

Varies = Literal["static", "yearly"]


class _Section(BaseModel):
    """A table of the file: unknown keys and texts in place of numbers are refused."""

    model_config = ConfigDict(extra="forbid", frozen=True, strict=True, allow_inf_nan=False)


class Deviation(_Section):
    """Where the study departs from a rule it follows, and who accepted that."""

    rule: str = Field(min_length=1)
    what: str = Field(min_length=1)
    effect: str = ""
    accepted_by: str = ""


class StudyIdentity(_Section):
    """Who asks, who answers, which revision, and what they state."""

    title: str = Field(min_length=1)
    client: str = ""
    analyst: str = ""
    revision: int = Field(default=0, ge=0)
    reason_for_revision: str = "first issue"
    issue_date: dt.date
    verifier: str = ""
    approver: str = ""
    contract: str = ""
    confidentiality: str = ""
    coordinate_system: str = ""
    # Until when data came in, as opposed to the date of issue.
    data_date: dt.date | None = None
    independence: str = ""
    # An empty list states that there are none; left out, nothing is stated.
    standards_followed: list[str] = Field(default_factory=list)
    deviations: list[Deviation] = Field(default_factory=list)


class SiteSettings(_Section):
    """Where the mast stands."""

    name: str = Field(min_length=1)
    country: str = ""
    latitude_deg: float = Field(ge=-90, le=90)
    longitude_deg: float = Field(ge=-180, le=180)
    elevation_m: float = Field(ge=-430, le=6000)


class ScreeningSettings(_Section):
    """A rough wind figure from before any measurement."""

    mean_wind_speed_m_s: float = Field(gt=0, le=20)
    height_m: float = Field(gt=0, le=300)
    weibull_k: float = Field(default=2.0, ge=1.0, le=4.0)
    shear_exponent: float = Field(default=1 / 7, ge=-0.2, le=0.8)
    # The ground instead of an exponent: a class of the wind atlas, or a kind of terrain.
    roughness_class: float | None = None
    terrain: str | None = None
    # Class of the ground the rough figure belongs to, if another than the site's.
    figure_roughness_class: float | None = None
    # Above one half the low end of a normal 80 % range is hardly any wind at all.
    standard_uncertainty: float = Field(gt=0, le=0.5)
    basis: str = Field(min_length=1)

    @field_validator("roughness_class", "figure_roughness_class")
    @classmethod
    def _known_class(cls, value: float | None) -> float | None:
        if value is not None and value not in ROUGHNESS_CLASSES:
            raise ValueError(f"it must be one of {', '.join(f'{c:g}' for c in ROUGHNESS_CLASSES)}")
        return value

    @field_validator("terrain")
    @classmethod
    def _known_terrain(cls, value: str | None) -> str | None:
        if value is not None and value not in TERRAIN_ROUGHNESS:
            raise ValueError(f"it must be one of {', '.join(TERRAIN_ROUGHNESS)}")
        return value

    @model_validator(mode="after")
    def _one_profile(self) -> ScreeningSettings:
        given = {"shear_exponent", "roughness_class", "terrain"} & {
            name for name in self.model_fields_set if getattr(self, name) is not None
        }
        if len(given) > 1:
            raise ValueError(
                f"[screening] {' and '.join(sorted(given))} stand side by side; keep one, since "
                "each of them says how speed grows with height"
            )
        if self.figure_roughness_class is not None and self.roughness_length_m is None:
            raise ValueError(
                "[screening] figure_roughness_class moves the figure to the site's own ground; "
                "write roughness_class or terrain of the site beside it"
            )
        return self

    @property
    def roughness_length_m(self) -> float | None:
        """Of the site, where the ground is given instead of an exponent."""
        if self.roughness_class is not None:
            return ROUGHNESS_CLASSES[self.roughness_class]
        return TERRAIN_ROUGHNESS[self.terrain] if self.terrain is not None else None


class ReferenceSettings(StationSettings):
    """A long record from near the site."""

    kind: Literal["station", "gridded"]
    # Of its ground, or of the model's; with it temperature and pressure can be carried over.
    elevation_m: float | None = Field(default=None, ge=-430, le=6000)


class MeasuredSettings(_Section):
    """How the speed that the study stands on is made from the mast's sensors."""

    main_pair: str | None = None
    fill_gaps: bool = False


class LongTermSettings(_Section):
    """How the campaign is carried to the long term."""

    method: Literal["blend", "ratio", "linear_regression", "variance_ratio"] = "blend"
    reference: str | None = None
    by_sector: bool = True
    sector_count: int = Field(default=12, ge=4, le=36)
    min_hours_per_sector: int = Field(default=200, ge=20)
    samples_per_hour_share: float = Field(default=5 / 6, gt=0, le=1)
    yearly_variability: Literal["from_reference"] | float = "from_reference"
    seed: int = Field(default=1, ge=0)

    @field_validator("yearly_variability", mode="before")
    @classmethod
    def _plausible(cls, value: Any) -> Any:
        is_number = isinstance(value, (int, float)) and not isinstance(value, bool)
        if value != "from_reference" and not (is_number and 0 < value < 0.5):
            raise ValueError(
                'it must be "from_reference", or a fraction between 0 and 0.5, such as 0.06 for 6 %'
            )
        return value


class TurbineSettings(_Section):
    """The machine, as its maker declares it."""

    name: str = Field(min_length=1)
    curve_file: str
    curve_air_density_kg_m3: float = Field(default=1.225, ge=0.6, le=1.4)
    curve_source: str = Field(min_length=1)
    hub_height_m: float = Field(gt=5, le=300)
    rotor_diameter_m: float = Field(gt=0.5, le=350)
    rated_power_kw: float = Field(gt=0)
    cut_out_m_s: float = Field(default=25.0, gt=5, le=50)
    # What the maker declares the design is good for; left out, it is not assessed.
    design_class: Literal["I", "II", "III", "IV", "T"] | None = None
    turbulence_class: Literal["A+", "A", "B", "C"] | None = None
    design_mean_speed_m_s: float | None = Field(default=None, gt=0, le=20)
    design_reference_speed_m_s: float | None = Field(default=None, gt=0, le=90)
    design_turbulence: float | None = Field(default=None, gt=0, le=0.5)
    lowest_temperature_c: float | None = Field(default=None, ge=-80, le=20)
    highest_temperature_c: float | None = Field(default=None, ge=10, le=80)


class TurbinePosition(_Section):
    """One turbine of the layout."""

    name: str = Field(min_length=1)
    easting_m: float
    northing_m: float
    elevation_m: float = Field(ge=-430, le=6000)
    speed_factor: float = Field(default=1.0, gt=0.3, lt=2.0)
    basis: str = Field(default="assumed equal to the mast", min_length=1)


class LossSettings(_Section):
    """One loss, as a fraction of the energy that reaches it."""

    group: str
    name: str = Field(min_length=1)
    loss: float = Field(ge=0, lt=1)
    varies: Varies = "static"
    basis: str = Field(min_length=1)

    @field_validator("group")
    @classmethod
    def _known(cls, value: str) -> str:
        if value not in LOSS_GROUPS:
            raise ValueError(f"it must be one of {', '.join(LOSS_GROUPS)}")
        return value


class UncertaintySettings(_Section):
    """One uncertainty as a standard deviation, a fraction of wind speed or of energy."""

    group: str
    name: str = Field(min_length=1)
    of: Literal["wind_speed", "energy"]
    standard_uncertainty: float = Field(ge=0, lt=1)
    varies: Varies = "static"
    basis: str = Field(min_length=1)
    # Why this figure stands although the study computes a larger one for the same cause.
    reason_over_computed: str = ""

    @field_validator("group")
    @classmethod
    def _known(cls, value: str) -> str:
        if value not in UNCERTAINTY_GROUPS:
            raise ValueError(f"it must be one of {', '.join(UNCERTAINTY_GROUPS)}")
        return value

    @model_validator(mode="after")
    def _computed_beside_it(self) -> UncertaintySettings:
        if self.reason_over_computed and self.group != "vertical_extrapolation":
            raise ValueError(
                "reason_over_computed is for group vertical_extrapolation, which the study "
                "computes itself; take it out, or put it into basis"
            )
        return self


class Settings(_Section):
    """The whole of `study.toml`."""

    schema_version: Literal[1]
    study: StudyIdentity
    site: SiteSettings
    screening: ScreeningSettings
    mast: StationSettings
    references: list[ReferenceSettings] = Field(min_length=1)
    checks: CheckSettings = Field(default_factory=CheckSettings)
    measured: MeasuredSettings = MeasuredSettings()
    long_term: LongTermSettings
    profile: ProfileSettings = Field(default_factory=ProfileSettings)
    turbine: TurbineSettings
    layout: list[TurbinePosition] = Field(min_length=1)
    losses: list[LossSettings] = Field(default_factory=list)
    uncertainties: list[UncertaintySettings] = Field(default_factory=list)
    conditions: ConditionsSettings = Field(default_factory=ConditionsSettings)

    @model_validator(mode="after")
    def _hangs_together(self) -> Settings:
        names = [reference.name for reference in self.references]
        _refuse_repeats(names, "references")
        _refuse_repeats([position.name for position in self.layout], "layout")
        chosen = self.long_term.reference
        if chosen is None and self.long_term.method != "blend":
            raise ValueError(
                f"[long_term] method is '{self.long_term.method}', which stands on one reference; "
                f"name it: reference = one of {', '.join(names)}"
            )
        if chosen is not None and chosen not in names:
            raise ValueError(
                f"[long_term] reference is '{self.long_term.reference}', but the references are "
                f"{', '.join(names)}; write one of these names"
            )
        return self

    def reference(self, name: str) -> ReferenceSettings:
        """The reference of that name (the file was checked to have it)."""
        return next(reference for reference in self.references if reference.name == name)


def _refuse_repeats(names: list[str], where: str) -> None:
    for name in names:
        if names.count(name) > 1:
            raise ValueError(f"[[{where}]] name '{name}' stands more than once; names must differ")


def read_settings(file: Path) -> dict[str, Any]:
    """Read `study.toml` as plain values, or say at which line it is not TOML."""
    if not file.is_file():
        raise StudyError.of(
            file=file.name,
            met=f"there is no {file.name} in {file.parent}",
            rule=f"a study is a folder with a {file.name} in it",
            remedy="name the study's folder, or make one with `sitestudy new DIR`",
        )
    try:
        text = file.read_text(encoding="utf-8")
        values = tomllib.loads(text)
    except UnicodeDecodeError as error:
        raise StudyError.of(
            file=file.name,
            met=f"byte {error.start} is not UTF-8 text",
            rule="the file is TOML in UTF-8",
            remedy="save it again with the encoding set to UTF-8",
        ) from None
    except ValueError as error:  # a fault of TOML, or a number of thousands of digits
        raise StudyError.of(
            file=file.name,
            met=str(error),
            rule="the file must be valid TOML: text in quotes, `key = value`, one a line",
            remedy=toml_remedy(text, str(error)),
        ) from None
    except RecursionError:
        raise StudyError.of(
            file=file.name,
            met="brackets stand in each other hundreds deep",
            rule="the file must be valid TOML, tables and lists a few deep",
            remedy="mend it; the template of `sitestudy new DIR` shows the form",
        ) from None
    refuse_patterns(values, file)
    return values


def with_overrides(values: Mapping[str, Any], overrides: Mapping[str, Any]) -> dict[str, Any]:
    """The same plain values with `section.key` set anew, as a workbook's parameters ask."""
    merged = {
        key: dict(value) if isinstance(value, dict) else value for key, value in values.items()
    }
    for path, value in overrides.items():
        section, key = path.split(".")
        table = merged.setdefault(section, {})
        if isinstance(table, dict):  # anything else is refused when the values are validated
            table[key] = value
    return merged


def _texts(value: Any, path: str = "") -> list[tuple[str, str]]:
    """Key and text of every text in the file."""
    if isinstance(value, Mapping):
        return [found for k, v in value.items() for found in _texts(v, f"{path}.{k}")]
    if isinstance(value, list):
        return [found for i, v in enumerate(value) for found in _texts(v, f"{path}[{i + 1}]")]
    return [(path.lstrip("."), value)] if isinstance(value, str) else []


def parse_settings(values: Mapping[str, Any], *, file: str = SETTINGS_FILE) -> Settings:
    """Validate plain values; every fault found is named with key, value, rule and remedy."""
    texts = _texts(values)
    blanks = [
        f"{key}: still the template's text; write your own"
        for key, text in texts
        if text.startswith(FILL_IN)
    ]
    asked = [key for key, text in texts if text == OPEN]
    blanks += [
        f'{key}: an open question of the draft; write the answer in place of "{OPEN}"'
        for key in asked
    ]
    faults: list[str] = []
    try:
        settings = Settings.model_validate(values)
    except ValidationError as error:
        faults = [
            explain_fault(fault, _keys_beside)
            for fault in error.errors()
            if fault_key(fault) not in asked
        ]
    if blanks or faults:
        raise StudyError("\n".join(f"{file}: {fault}" for fault in [*blanks, *faults]))
    return settings


def _keys_beside(place: tuple[int | str, ...]) -> list[str]:
    """The keys that the table of an unknown key may have."""
    table: Any = Settings
    for part in place[:-1]:
        if isinstance(part, str):
            table = table.model_fields[part].annotation
            table = next(iter(get_args(table)), table)  # a list of tables: the table in it
    return list(table.model_fields)
