"""The wind at hub height: the long-term series carried up, and how sure that is.

The series gets the factor of its own sector, hour and month from `hub_profile`. The mast says
itself how far that can be trusted: its top sensor is predicted from those below, and the miss is
carried to the hub and held against a rule of thumb. Air is in `hub_air`, energy in `energy_yield`.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from windkit.kernels.profile import power_law
from windkit.study.artifacts import Outcome
from windkit.study.errors import StudyError
from windkit.study.hub_profile import (
    METHOD_NAMES,
    Factors,
    Kinds,
    ProfileData,
    factors,
    kinds_of,
    level_names,
    profile_data,
)
from windkit.study.hub_settings import ProfileSettings
from windkit.study.left_out_height import SEASONS, LeftOut, leave_top_height_out
from windkit.study.settings import Settings

__all__ = ["EXPONENT_IN_DOUBT", "HubWind", "carry_to_hub"]

Array = NDArray[np.float64]

#: How far an exponent measured below can be wrong above [1]: the size of errors in J. Newman and
#: P. Klein 2014, Resources 3: 81 (from memory). It makes 3.1 % of speed from 60 to 100 m.
EXPONENT_IN_DOUBT = 0.06
#: The same where no exponent was measured at all [1], our choice: how sites differ.
_ASSUMED_EXPONENT_IN_DOUBT = 0.1
#: Mast lower than this share of the hub's height: the extrapolation is long. MEASNET guideline
#: on site assessment (from memory); common practice.
_LEAST_MAST_SHARE = 2 / 3


_METHOD_COLUMNS = [
    "method",
    "chosen",
    "hub_mean_speed_m_s",
    "left_out_mean_error",
    "left_out_typical_error",
]


@dataclass(frozen=True)
class HubWind:
    """Wind at hub height above the mast.

    Attributes
    ----------
    series : DataFrame
        Long-term wind_speed [m/s] and wind_direction [deg] at hub height, by the hour.
    factors : Factors
        Hub over main height, by class.
    main_height : float
        Height the series is carried from [m].
    method : str
        What a person reads for the law in use.
    methods : DataFrame
        Each law: long-term hub mean [m/s], and how it does on the height left out [1].
    exponent_by_hour : DataFrame
        Exponent between main height and hub by hour of the day (sun) and season [1].
    levels : DataFrame
        Share of the long-term hours whose factor comes from each width of class [1].
    left_out : LeftOut or None
        None with fewer than three heights.
    standard_uncertainty : float
        Of the mean speed at the hub from the way up alone [1].
    uncertainty_basis, basis : str
    longitude : float
        Of the mast [deg], for sun time.
    notes, warnings : list of str
    """

    series: pd.DataFrame
    factors: Factors
    main_height: float
    method: str
    methods: pd.DataFrame
    exponent_by_hour: pd.DataFrame
    levels: pd.DataFrame
    left_out: LeftOut | None
    standard_uncertainty: float
    uncertainty_basis: str
    basis: str
    longitude: float
    notes: list[str] = field(default_factory=list)
    warnings: list[str] = field(default_factory=list)

    def factor_at(
        self, index: pd.DatetimeIndex, wind_direction: Array, interval: pd.Timedelta
    ) -> Array:
        """Hub over main height for intervals of any record at the mast [1]."""
        return self.factors.of(
            kinds_of(
                index,
                wind_direction,
                longitude=self.longitude,
                interval=interval,
                sector_count=self.factors.factor.shape[0] - 1,
            )
        )


def carry_to_hub(
    settings: Settings, measured: Outcome, record: pd.DataFrame, series: pd.DataFrame
) -> HubWind:
    """Carry the long-term series from the mast's main height to the hub.

    Parameters
    ----------
    settings : Settings
        Of the study: mast, profile, hub height.
    measured : Outcome
        The measure step, for main channel and exponent.
    record : DataFrame
        Its checked record.
    series : DataFrame
        Long-term wind_speed and wind_direction at the main height, by the hour.

    Returns
    -------
    HubWind

    Raises
    ------
    StudyError
        If the profile is upside down most of the time, a height is not above the displacement
        height, or the method chosen cannot be used with this mast.
    """
    choice, mast, hub = settings.profile, settings.mast, settings.turbine.hub_height_m
    main = str(measured.value("measured.channel"))
    main_height = measured.number("measured.height_m")
    sectors = settings.long_term.sector_count
    longitude = settings.site.longitude_deg
    data = profile_data(
        record,
        mast,
        main=main,
        longitude=longitude,
        sector_count=sectors,
        accept_falling=choice.accept_falling_profile,
    )
    _refuse_low(data, choice, hub, main_height)
    index = series.index
    assert isinstance(index, pd.DatetimeIndex)
    kinds = kinds_of(
        index,
        series["wind_direction"].to_numpy(dtype=np.float64),
        longitude=longitude,
        interval=pd.Timedelta(hours=1),
        sector_count=sectors,
    )
    speed = series["wind_speed"].to_numpy(dtype=np.float64)
    has_profile = data.height.size > 1 and len(data.wind_speed) > 1
    exponent = measured.number("measured.shear_exponent")
    if has_profile:
        found = factors(data, choice, method=choice.method, height=main_height, target_height=hub)
        method = METHOD_NAMES[choice.method]
        told = ", ".join(f"{z:g}" for z in data.height)
        basis = f"{method}, from {len(data.wind_speed):,} intervals at {told} m"
        left_out = leave_top_height_out(data, choice, main_height=main_height, hub_height=hub)
    else:
        factor = float(power_law(1.0, main_height, hub, exponent))
        shape = (sectors + 1, 24, 12)
        found = Factors(np.full(shape, factor), np.full(shape, -1, dtype=np.intp))
        method = METHOD_NAMES["single"]
        basis = f"{method} of {exponent:.3f} from step 2"
        left_out = None
    without_classes = []
    if not has_profile and choice.method != "single":
        without_classes.append(
            f'profile.method asks for "{choice.method}", but no two heights have wind in the same '
            f"intervals: one exponent of {exponent:.3f} is used at all hours instead."
        )
    hub_speed = speed * found.of(kinds)
    uncertainty, uncertainty_basis = _uncertainty(
        measured, choice, left_out, main_height=main_height, hub=hub
    )
    return HubWind(
        series=pd.DataFrame(
            {"wind_speed": hub_speed, "wind_direction": series["wind_direction"]}, index=index
        ),
        factors=found,
        main_height=main_height,
        method=method,
        methods=_methods(data, choice, speed, kinds, main_height, hub)
        if has_profile
        else pd.DataFrame(
            [(basis, True, float(np.nanmean(hub_speed)), np.nan, np.nan)], columns=_METHOD_COLUMNS
        ),
        exponent_by_hour=_exponent_by_hour(found, kinds, speed, main_height, hub, choice),
        levels=_levels(found, kinds),
        left_out=left_out,
        standard_uncertainty=uncertainty,
        uncertainty_basis=uncertainty_basis,
        basis=basis,
        longitude=longitude,
        notes=data.notes,
        warnings=[*without_classes, *_warnings(data, main_height, hub)],
    )


def _uncertainty(
    measured: Outcome,
    choice: ProfileSettings,
    left_out: LeftOut | None,
    *,
    main_height: float,
    hub: float,
) -> tuple[float, str]:
    """The larger of the miss measured and the rule of thumb, unless the analyst says why not."""
    reach = abs(np.log(hub / main_height))
    assumed = "assumed" in next(
        row.basis for row in measured.rows if row.key == "measured.shear_exponent"
    )
    doubt = _ASSUMED_EXPONENT_IN_DOUBT if assumed else EXPONENT_IN_DOUBT
    rule = float(doubt * reach)
    rule_text = (
        f"an exponent in doubt by {doubt:g} from {main_height:g} to {hub:g} m makes {rule:.2%}"
        + (" (our choice, the exponent being assumed)" if assumed
           else " (Newman and Klein 2014, not verified against the printed paper)")
    )  # fmt: skip
    if left_out is None:
        return rule, f"{rule_text}; fewer than three heights, so the mast cannot test itself"
    told = (
        f"the sensor at {left_out.heights[1]:g} m, predicted from those below, is missed by "
        f"{left_out.typical_error:.2%} in a typical hour of a season, {left_out.scaled:.2%} at "
        "the hub"
    )
    if choice.reason_to_trust_left_out_error:
        return left_out.scaled, (
            f"{told}; used although {rule_text}: {choice.reason_to_trust_left_out_error}"
        )
    which = "the first" if left_out.scaled >= rule else "the second"
    return max(left_out.scaled, rule), f"{told}; {rule_text}; {which} is the larger and is used"


def _methods(
    data: ProfileData,
    choice: ProfileSettings,
    speed: Array,
    kinds: Kinds,
    main_height: float,
    hub: float,
) -> pd.DataFrame:
    rows = []
    for method, name in METHOD_NAMES.items():
        other = choice.model_copy(update={"method": method})
        try:
            up = factors(data, other, method=method, height=main_height, target_height=hub)
            test = leave_top_height_out(data, other, main_height=main_height, hub_height=hub)
        except StudyError:
            if method == choice.method:
                raise
            continue  # a law this mast cannot use is no comparison
        rows.append(
            (
                name,
                method == choice.method,
                float(np.nanmean(speed * up.of(kinds))),
                test.mean_error if test else np.nan,
                test.typical_error if test else np.nan,
            )
        )
    return pd.DataFrame(rows, columns=_METHOD_COLUMNS)


def _exponent_by_hour(
    found: Factors,
    kinds: Kinds,
    speed: Array,
    main_height: float,
    hub: float,
    choice: ProfileSettings,
) -> pd.DataFrame:
    """Exponent of the mean speeds at both heights, by hour and season of the long term."""
    reach = np.log(
        (hub - choice.displacement_height_m) / (main_height - choice.displacement_height_m)
    )
    known = np.isfinite(speed)
    cell = (kinds.hour * 4 + kinds.month % 12 // 3)[known]
    low = np.bincount(cell, speed[known], minlength=96)
    high = np.bincount(cell, (speed * found.of(kinds))[known], minlength=96)
    exponent = np.full(96, np.nan)
    with np.errstate(invalid="ignore", divide="ignore"):
        if reach:
            exponent = np.log(high / low) / reach
    return pd.DataFrame(
        exponent.reshape(24, 4), index=pd.RangeIndex(24, name="hour"), columns=list(SEASONS)
    )


def _levels(found: Factors, kinds: Kinds) -> pd.DataFrame:
    level = found.level[kinds.sector, kinds.hour, kinds.month - 1]
    shares = [float(np.mean(level == number)) for number in range(len(level_names()))]
    table = pd.DataFrame({"told_apart_by": level_names(), "share_of_hours": shares})
    table = table[table["share_of_hours"] > 0].reset_index(drop=True)
    if table.empty:
        # A law without classes of time treats all hours alike, and the table says so.
        return pd.DataFrame(
            {"told_apart_by": ["no classes of hour and month"], "share_of_hours": [1.0]}
        )
    return table


def _refuse_low(data: ProfileData, choice: ProfileSettings, hub: float, main_height: float) -> None:
    lowest = min([*data.height.tolist(), hub, main_height])
    if choice.displacement_height_m >= lowest:
        raise StudyError.of(
            key="profile.displacement_height_m",
            met=f"it is {choice.displacement_height_m:g} m, and a height is {lowest:g} m",
            rule="profiles start above the displacement height",
            remedy="it is about two thirds of the height of a closed wood, and zero without one",
        )


def _warnings(data: ProfileData, main_height: float, hub: float) -> list[str]:
    told = []
    if main_height < _LEAST_MAST_SHARE * hub * (1 - 1e-9):
        told.append(
            f"Long extrapolation: the hub is {hub / main_height:.2f} times as high as the mast's "
            "main sensor; above 1.5 the mast is lower than two thirds of the hub, and the profile "
            "between them is not measured. A higher mast, or some months of a lidar or sodar, "
            "would measure it."
        )
    top = float(data.height.max(initial=0.0))
    if top > hub and main_height != hub:
        told.append(
            f"A speed is measured at {top:g} m, above the hub at {hub:g} m: the hub lies within "
            "the measured profile. If a height_m was typed wrongly, correct it; if not, the "
            "channel nearest to the hub may serve as main_wind_speed."
        )
    elif top > main_height:
        told.append(
            f"A speed is measured at {top:g} m, above the main one at {main_height:g} m; naming "
            "it as main_wind_speed would shorten the way to the hub."
        )
    return told
