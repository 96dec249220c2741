"""Station descriptions in the open IEA Wind Task 43 data model, as drafts of a station section.

Here the JSON document is read, in its old and new spellings, and turned into the same draft that
a data file gives, with what it leaves open marked. Makers' names are free text. Secrets of a logger
are not copied. The measured values are in the data file; nothing is checked against it here.

References
----------
.. [1] IEA Wind Task 43, wind resource station data model, release 1.3.0-2024.03, BSD-3-Clause.
"""

from __future__ import annotations

import datetime as dt
import json
import re
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from windkit.kernels.units import UNITS
from windkit.study.errors import StudyError
from windkit.study.station_draft import OPEN, StationDraft

__all__ = ["draft_from_description", "station_names"]

#: Types of measurement of the model that a station section knows.
_QUANTITIES = {
    "wind_speed": "wind_speed",
    "wind_direction": "wind_from_direction",
    "air_temperature": "air_temperature",
    "air_pressure": "air_pressure",
    "relative_humidity": "relative_humidity",
    "air_density": "air_density",
    "motion_corrected_wind_speed": "wind_speed",
    "motion_corrected_wind_direction": "wind_from_direction",
}
_STATISTICS = {"avg": "mean", "sd": "sd", "max": "max", "min": "min", "gust": "max"}
#: Units of the model in our spelling, where they differ.
_UNITS = {"deg_C": "degC", "deg_F": "degF", "knots": "kn", "kg/m^3": "kg/m3", "kg/m^2": "kg/m3"}
#: Old spellings of the model and the ones since 1.0.
_RENAMED = {"sensor_config": "logger_measurement_config", "uncertainty": "combined_uncertainty"}
#: An end date as old writers put it for 'still there'.
_FAR_END = dt.datetime(2100, 1, 1)


def station_names(path: Path) -> list[str]:
    """Names of the stations a description holds, in their order.

    Raises
    ------
    StudyError
        If the file is no such description.
    """
    return [str(place.get("name", "")) for place in _places(path)]


def draft_from_description(
    path: Path, *, station: str | None = None, files: list[str] | None = None
) -> StationDraft:
    """Draft a station section from a station description.

    Parameters
    ----------
    path : Path
        JSON of the open data model.
    station : str, optional
        Which of its stations; may be left out if there is one.
    files : list of str, optional
        The data files the section will read.

    Returns
    -------
    StationDraft
        Columns with quantity, statistic, height, unit, boom bearing, calibrations by date; the
        clock of the logger record that is active last. What the description leaves null or does
        not say (zone, side of stamp, north, heights) is an open question.

    Raises
    ------
    StudyError
        If the file is no description, or the station is not in it.
    """
    places = _places(path)
    named = [place for place in places if station is None or place.get("name") == station]
    if len(named) != 1:
        names = ", ".join(f"'{place.get('name')}'" for place in places) or "none"
        raise StudyError.of(
            file=path.name,
            met=f"{len(named)} of the stations are called '{station}'"
            if station
            else f"it describes {len(places)} stations",
            rule="a section is drafted for one station",
            remedy=f"name one of: {names}",
        )
    place = named[0]
    draft = StationDraft()
    draft.station["name"] = str(place.get("name") or OPEN)
    draft.station["files"] = files or [OPEN]
    draft.station["time_column"] = OPEN
    draft.remarks["time_column"] = "header of the column of stamps; the description does not say"
    _draft_logger(draft, place)
    draft.station["calm_below_m_s"] = OPEN
    draft.remarks["calm_below_m_s"] = "speeds below it are calms; often the cup's starting speed"
    seen: set[str] = set()
    for point in place.get("measurement_point") or []:
        _draft_point(draft, point, seen)
    _draft_main(draft)
    return draft


def _places(path: Path) -> list[dict[str, Any]]:
    def refuse(met: str) -> StudyError:
        return StudyError.of(
            file=path.name,
            met=met,
            rule="a station description is JSON with a list measurement_location (IEA Wind Task "
            "43 data model)",
            remedy="ask for the description again, or draft the section from the data file",
        )

    try:
        document = json.loads(path.read_text(encoding="utf-8-sig"))
    except (OSError, UnicodeDecodeError, json.JSONDecodeError, RecursionError) as error:
        raise refuse(f"it cannot be read as JSON ({error})") from error
    if not isinstance(document, dict):
        raise refuse(f"the document is a {type(document).__name__}")
    places = document.get("measurement_location")
    if not isinstance(places, list) or not all(isinstance(place, dict) for place in places):
        raise refuse("there is no list measurement_location of stations")
    if not places:
        raise refuse("measurement_location is empty")
    renewed: list[dict[str, Any]] = _renewed(places)
    return renewed


def _renewed(node: Any) -> Any:
    """The document with old spellings replaced and the text "null" made null."""
    if isinstance(node, dict):
        return {_RENAMED.get(key, key): _renewed(value) for key, value in node.items()}
    if isinstance(node, list):
        return [_renewed(item) for item in node]
    return None if node == "null" else node


def _stamp(text: Any) -> dt.datetime | None:
    """A date of the model on the logger's clock; an open end is None."""
    if not isinstance(text, str):
        return None
    try:
        stamp = dt.datetime.fromisoformat(text)
    except ValueError:
        return None
    stamp = stamp.replace(tzinfo=None)  # if it has a zone, it is the logger's
    return None if stamp >= _FAR_END else stamp


def _records(node: Mapping[str, Any], key: str) -> list[dict[str, Any]]:
    """A list of dated records in the order of their start."""
    found = node.get(key) or []
    found = found if isinstance(found, list) else [found]
    dated = [record for record in found if isinstance(record, dict)]
    return sorted(dated, key=lambda each: _stamp(each.get("date_from")) or dt.datetime.min)


def _draft_logger(draft: StationDraft, place: Mapping[str, Any]) -> None:
    station, remarks = draft.station, draft.remarks
    records = _records(place, "logger_main_config") or _records(place, "model_config")
    last = records[-1] if records else {}
    station["utc_offset_h"] = _number(last.get("offset_from_utc_hrs"))
    remarks["utc_offset_h"] = "hours of the delivered series east of UTC"
    station["interval_min"] = _number(last.get("averaging_period_minutes"))
    remarks["interval_min"] = "averaging period in minutes"
    ends = last.get("timestamp_is_end_of_period")
    station["stamp"] = {True: "end", False: "start"}.get(ends, OPEN) if ends is not None else OPEN
    remarks["stamp"] = "is a stamp the start or the end of its interval: start or end"
    clocks = {
        (
            record.get("offset_from_utc_hrs"),
            record.get("averaging_period_minutes"),
            record.get("timestamp_is_end_of_period"),
        )
        for record in records
    }
    if len(clocks) > 1:
        draft.notes.append(
            f"the description has {len(clocks)} clocks or intervals for this station; the last "
            "is taken: give each its own section and files"
        )


def _number(value: Any) -> object:
    is_number = isinstance(value, int | float) and not isinstance(value, bool)
    return float(value) if is_number else OPEN


def _draft_point(draft: StationDraft, point: Mapping[str, Any], seen: set[str]) -> None:
    kind = str(point.get("measurement_type_id"))
    if kind not in _QUANTITIES:
        draft.notes.append(f"'{point.get('name')}' ({kind}) is not drafted: no such quantity here")
        return
    quantity = _QUANTITIES[kind]
    configs = _records(point, "logger_measurement_config")
    columns: dict[tuple[str, str], list[dict[str, Any]]] = {}
    for config in configs:
        for column in config.get("column_name") or []:
            statistic = str(column.get("statistic_type_id"))
            name = str(column.get("column_name") or "")
            if column.get("is_ignored") or not name:
                continue
            if statistic not in _STATISTICS:
                draft.notes.append(f"column '{name}' ({statistic}) is not drafted")
                continue
            columns.setdefault((name, statistic), []).append(config)
    for (name, statistic), used in columns.items():
        if name in seen:
            draft.notes.append(f"column '{name}' is described twice; the first is drafted")
            continue
        seen.add(name)
        _draft_column(draft, point, quantity, name, statistic, used)


def _draft_column(
    draft: StationDraft,
    point: Mapping[str, Any],
    quantity: str,
    name: str,
    statistic: str,
    configs: list[dict[str, Any]],
) -> None:
    number = len(draft.channels)
    units = {config.get("measurement_units_id") for config in configs}
    unit = units.pop() if len(units) == 1 else None
    unit = _UNITS.get(str(unit), str(unit))
    channel: dict[str, object] = {
        "name": _label(draft, name),
        "column": name,
        "quantity": "wind_speed_of_gust" if statistic == "gust" else quantity,
        "statistic": _STATISTICS[statistic],
        "height_m": _number(point.get("height_m")),
        "unit": unit if unit in UNITS[quantity] else OPEN,
    }
    draft.channels.append(channel)
    remarks = draft.remarks
    remarks[f"{number}.unit"] = f"one of: {', '.join(UNITS[quantity])}"
    if channel["unit"] != OPEN:
        del remarks[f"{number}.unit"]
    reference = point.get("height_reference_id")
    if channel["height_m"] == OPEN:
        remarks[f"{number}.height_m"] = "metres above ground"
    elif reference != "ground_level":
        remarks[f"{number}.height_m"] = (
            f"above {reference or 'what the description does not say'}: is it ground"
        )
    _draft_boom(draft, channel, number, point)
    if quantity == "wind_speed":
        _draft_calibrations(draft, channel, point, configs)


def _label(draft: StationDraft, name: str) -> str:
    label = re.sub(r"[^A-Za-z0-9]+", "_", name).strip("_").lower()
    label = label if re.match(r"[a-z]", label) else f"column_{label}"
    taken = {str(channel["name"]) for channel in draft.channels} | {"time", "all"}
    while label in taken:
        label += "_2"
    return label[:60]


def _draft_boom(
    draft: StationDraft, channel: dict[str, object], number: int, point: Mapping[str, Any]
) -> None:
    mountings = _records(point, "mounting_arrangement")
    told = (_number(each.get("boom_orientation_deg")) for each in mountings)
    bearings = {bearing for bearing in told if isinstance(bearing, float)}
    if len(bearings) != 1:
        if len(bearings) > 1:
            draft.notes.append(f"'{point.get('name')}' hung on several booms; none is drafted")
        return
    north = {each.get("orientation_reference_id") for each in mountings}
    channel["boom_bearing_deg"] = bearings.pop() % 360.0
    if north != {"true_north"}:
        draft.remarks[f"{number}.boom_bearing_deg"] = (
            f"from {', '.join(str(each) for each in north)}: turn it to true north"
        )


def _draft_calibrations(
    draft: StationDraft,
    channel: dict[str, object],
    point: Mapping[str, Any],
    configs: list[dict[str, Any]],
) -> None:
    """Slopes of logger and certificate for each stretch in which both are the same."""
    sensors = _records(point, "sensor")
    edges = sorted(
        {
            stamp
            for record in [*configs, *sensors]
            if (stamp := _stamp(record.get("date_from"))) is not None
        }
    )
    periods: list[dict[str, object]] = []
    for edge in edges:
        config, sensor = _active(configs, edge), _active(sensors, edge)
        period: dict[str, object] = {"date_from": edge}
        if sensor is not None and sensor.get("serial_number"):
            period["serial"] = str(sensor["serial_number"])
        applied = _slope(config)
        certificates = [c for c in (sensor or {}).get("calibration") or [] if isinstance(c, dict)]
        certified = _slope(certificates[-1]) if certificates else None
        if applied is not None:
            period["applied_slope"], period["applied_offset"] = applied
            if certified is not None:
                period["certificate_slope"], period["certificate_offset"] = certified
        elif certified is not None:
            draft.notes.append(
                f"'{point.get('name')}' has a certificate but no slope in the logger from "
                f"{edge.date()}: a missing slope is not 1, so it is not recomputed"
            )
        periods.append(period)
    # A column described for later periods only would leave the first rows without a sensor.
    kept = [
        period
        for at, period in enumerate(periods)
        if at == 0 or {**period, "date_from": 0} != {**periods[at - 1], "date_from": 0}
    ]
    if any(len(period) > 1 for period in kept):
        channel["sensors"] = kept


def _active(records: list[dict[str, Any]], when: dt.datetime) -> dict[str, Any] | None:
    """The record that holds at a time: from its start up to, not including, its end."""
    for record in reversed(records):
        start, end = _stamp(record.get("date_from")), _stamp(record.get("date_to"))
        if (start is None or start <= when) and (end is None or when < end):
            return record
    return None


def _slope(record: Mapping[str, Any] | None) -> tuple[float, float] | None:
    """Slope and offset of a record; a sensitivity is one over a slope without offset."""
    if record is None:
        return None
    slope, offset = _number(record.get("slope")), _number(record.get("offset"))
    if isinstance(slope, float) and slope > 0:
        return slope, offset if isinstance(offset, float) else 0.0
    sensitivity = _number(record.get("sensitivity"))
    if isinstance(sensitivity, float) and sensitivity > 0:
        return 1.0 / sensitivity, 0.0
    return None


def _draft_main(draft: StationDraft) -> None:
    def highest(quantity: str) -> str | None:
        found = [
            channel
            for channel in draft.channels
            if channel["quantity"] == quantity and channel["statistic"] == "mean"
        ]
        found.sort(key=lambda c: c["height_m"] if isinstance(c["height_m"], float) else 0.0)
        return str(found[-1]["name"]) if found else None

    draft.station["main_wind_speed"] = highest("wind_speed") or OPEN
    draft.remarks["main_wind_speed"] = "the highest; is it the one the study stands on"
    vane = highest("wind_from_direction")
    if vane is not None:
        draft.station["direction_reference"] = OPEN
        draft.remarks["direction_reference"] = (
            'is the delivered direction from "true" or "magnetic" north? magnetic needs '
            "declination_deg"
        )
        draft.station["main_wind_direction"] = vane
