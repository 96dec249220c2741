"""The client's machine: its power curve from a file, held against physics before use."""

from __future__ import annotations

import numpy as np
import pandas as pd

from windkit.kernels.curve import PowerCurve, betz_check
from windkit.study.errors import StudyError
from windkit.study.folder import Study

__all__ = ["WATT_HOURS_PER_MWH", "read_curve"]

#: Energy is computed in Wh and written in MWh.
WATT_HOURS_PER_MWH = 1e6

_SPEED, _POWER = "wind_speed_m_s", "power_kw"

#: How far the highest tabulated power may lie from the declared rating [fraction], our choice.
_RATING_TOLERANCE = 0.02


def read_curve(study: Study) -> PowerCurve:
    """Read the power curve that `study.toml` names.

    Returns
    -------
    PowerCurve
        Speeds [m/s] and power [W] at the declared air density.

    Raises
    ------
    StudyError
        If a column is missing or not a number, speeds do not increase, the highest power is not
        the declared rating, or the curve takes more from the stream than the Betz limit allows.
    """
    turbine = study.settings.turbine
    name = turbine.curve_file
    file = study.path(name, key="turbine.curve_file")
    try:
        table = pd.read_csv(file, comment="#")
    except (pd.errors.ParserError, pd.errors.EmptyDataError, UnicodeDecodeError) as error:
        raise StudyError.of(
            file=name,
            met=f"it cannot be read as a table: {error}",
            rule="a curve is comma-separated text with a header line",
            remedy=f"write the columns {_SPEED} and {_POWER}",
        ) from None
    columns = []
    for column in (_SPEED, _POWER):
        if column not in table.columns:
            raise StudyError.of(
                file=name,
                met=f"there is no column {column} among {', '.join(map(str, table.columns))}",
                rule=f"a curve has the columns {_SPEED} and {_POWER}, separated by commas",
                remedy="rename the columns or mend the separator",
            )
        numbers = pd.to_numeric(table[column], errors="coerce")
        bad = numbers.index[numbers.isna()]
        if len(bad):
            raise StudyError.of(
                file=name,
                line=int(bad[0]) + 2,
                met=f"{column} is '{table[column].iloc[bad[0]]}'",
                rule="every value of a curve is a number",
                remedy="mend that value",
            )
        columns.append(numbers.to_numpy(dtype=float))
    speed, power = columns
    try:
        curve = PowerCurve(
            wind_speed=speed,
            power=power * 1000.0,
            air_density=turbine.curve_air_density_kg_m3,
            cut_out=turbine.cut_out_m_s,
        )
    except ValueError as error:
        raise StudyError.of(
            file=name,
            met=str(error),
            rule="a curve rises in speed and its power is never negative",
            remedy="mend the file, or ask the maker for the certified table",
        ) from None
    highest = float(np.max(power))
    if abs(highest / turbine.rated_power_kw - 1.0) > _RATING_TOLERANCE:
        raise StudyError.of(
            file=name,
            met=f"its highest power is {highest:g} kW, but turbine.rated_power_kw is "
            f"{turbine.rated_power_kw:g}",
            rule=f"the two agree within {_RATING_TOLERANCE:.0%}",
            remedy="mend whichever is wrong; power in the curve is in kW",
        )
    try:
        betz_check(curve, turbine.rotor_diameter_m)
    except ValueError as error:
        raise StudyError.of(
            file=name,
            met=str(error),
            rule="no rotor takes more than 16/27 of the power in the stream (Betz 1920)",
            remedy="if unit, rotor and density are right, the claim is not to be believed",
        ) from None
    return curve
