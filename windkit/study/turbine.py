"""The client's machine: its power curve from a file, held against physics before use."""

from __future__ import annotations

import csv
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

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
    speed, power = _columns(study.path(name, key="turbine.curve_file"), name)
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
            rule="a curve rises in speed to its cut-out (turbine.cut_out_m_s), and its power is "
            "never negative",
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


def _columns(file: Path, name: str) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """The two columns of a curve's file, every row as long as the header; ``#`` is a comment."""
    try:
        lines = file.read_text(encoding="utf-8-sig").splitlines()
    except UnicodeDecodeError as error:
        raise StudyError.of(
            file=name,
            met=f"byte {error.start} is not UTF-8 text",
            rule="a curve is comma-separated text with a header line",
            remedy="save it again as CSV in UTF-8",
        ) from None
    rows = [
        (number, [field.strip() for field in next(csv.reader([text]))])
        for number, text in ((at, line.split("#")[0].strip()) for at, line in enumerate(lines, 1))
        if text
    ]
    header_line, header = rows[0] if rows else (1, ["nothing"])
    for column in (_SPEED, _POWER):
        if header.count(column) != 1:
            raise StudyError.of(
                file=name,
                line=header_line,
                met=f"{header.count(column) or 'no'} column {column} among {', '.join(header)}",
                rule=f"a curve has {_SPEED} and {_POWER} once each, columns set apart by commas",
                remedy="rename the columns or mend the separator",
            )
    places = [header.index(column) for column in (_SPEED, _POWER)]
    values = np.empty((len(rows) - 1, 2))
    for row, (number, fields) in enumerate(rows[1:]):
        if len(fields) != len(header):
            raise StudyError.of(
                file=name,
                line=number,
                met=f"{len(fields)} fields where the header has {len(header)}",
                rule="each row has one field a column, and decimals are written with a point",
                remedy="mend that line",
            )
        for at, place in enumerate(places):
            try:
                values[row, at] = float(fields[place])
            except ValueError:
                raise StudyError.of(
                    file=name,
                    line=number,
                    met=f"{header[place]} is '{fields[place]}'",
                    rule="every value of a curve is a number",
                    remedy="mend that value",
                ) from None
    return values[:, 0], values[:, 1]
