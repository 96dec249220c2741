"""Faults laid into the demo mast by hand, and how much of each the checks find.

Run as a script it prints the table; the tests hold the table to its goals. Every fault is laid
into the demo's record after its own blemishes (data_demo/truth.json) are taken out, so that what
is left is sound by construction.
"""

from __future__ import annotations

import json
import tomllib
from collections.abc import Callable
from dataclasses import dataclass, replace
from functools import cache
from pathlib import Path

import numpy as np
import pandas as pd

from windkit.study.checks import CHECKS, MASKING_RULES, CheckSettings, Given, range_spans, without
from windkit.study.reading import Reading, read_station
from windkit.study.stations import StationSettings

DEMO = Path(__file__).parents[2] / "data_demo"
DAY = 144
CUPS = ("speed_80_a", "speed_80_b", "speed_60", "speed_40")
VANES = ("direction_78", "direction_58")
ELEVATION = 412.0

Seeded = dict[str, np.ndarray]
Fault = Callable[[pd.DataFrame, np.random.Generator], Seeded]


def _station(table: dict[str, object]) -> StationSettings:
    return StationSettings.model_validate({k: v for k, v in table.items() if k != "kind"})


@cache
def sound() -> tuple[Reading, tuple[Reading, ...]]:
    """The demo mast without its blemishes, and its references."""
    study = tomllib.loads((DEMO / "study.toml").read_text(encoding="utf-8"))
    mast = read_station(_station(study["mast"]), DEMO)
    references = tuple(read_station(_station(each), DEMO) for each in study["references"])
    frame = mast.frame.copy()
    for row in json.loads((DEMO / "truth.json").read_text(encoding="utf-8"))["blemishes"]:
        inside = (frame.index >= pd.Timestamp(row["from_utc"], tz="UTC")) & (
            frame.index < pd.Timestamp(row["to_utc"], tz="UTC")
        )
        names = [n for n in frame.columns if row["channel"] == "*" or n.startswith(row["channel"])]
        frame.loc[inside, names] = np.nan
    return replace(mast, frame=frame), references


def _spells(
    frame: pd.DataFrame,
    rng: np.random.Generator,
    lengths: list[int],
    where: np.ndarray | None = None,
) -> list[slice]:
    """Spells of those lengths that begin where asked, a week apart at least."""
    starts = np.flatnonzero(np.ones(len(frame), bool) if where is None else where)
    taken: list[slice] = []
    for length in lengths:
        for _ in range(10_000):
            at = int(rng.choice(starts))
            far = all(abs(at - other.start) > 7 * DAY for other in taken)
            if far and DAY < at < len(frame) - length - DAY:
                taken.append(slice(at, at + length))
                break
    return taken


def _mask(frame: pd.DataFrame, parts: list[slice]) -> np.ndarray:
    mask = np.zeros(len(frame), dtype=bool)
    for part in parts:
        mask[part] = True
    return mask


def absurd(frame: pd.DataFrame, rng: np.random.Generator) -> Seeded:
    at = rng.choice(len(frame), 30, replace=False)
    frame.iloc[at, frame.columns.get_loc("speed_60")] = rng.uniform(51, 500, 30)
    return {"speed_60": np.isin(np.arange(len(frame)), at)}


def swapped_columns(frame: pd.DataFrame, rng: np.random.Generator) -> Seeded:
    part = _spells(frame, rng, [10 * DAY])
    mask = _mask(frame, part)
    both = frame.loc[mask, ["speed_80_a_max", "speed_80_a"]].to_numpy()
    frame.loc[mask, ["speed_80_a", "speed_80_a_max"]] = both
    return {"speed_80_a_max": mask & (frame["speed_80_a"] > frame["speed_80_a_max"] + 0.11)}


def gusts(frame: pd.DataFrame, rng: np.random.Generator) -> Seeded:
    at = rng.choice(np.flatnonzero(frame["speed_80_b"] > 5), 60, replace=False)
    values = frame["speed_80_b"].to_numpy()[at] * rng.uniform(2.7, 4.0, 60)
    frame.iloc[at, frame.columns.get_loc("speed_80_b_max")] = values
    return {"speed_80_b_max": np.isin(np.arange(len(frame)), at)}


def cup_reads_low(frame: pd.DataFrame, rng: np.random.Generator) -> Seeded:
    windy = (frame["speed_80_a"] > 8).to_numpy()
    mask = _mask(frame, _spells(frame, rng, [36, 72, 72, 144], windy))
    frame.loc[mask, "speed_80_b"] *= 0.8
    exposed = ~((frame["direction_78"] - 292.5) % 360 < 50) & ~(
        (frame["direction_78"] - 112.5) % 360 < 50
    )
    # Where the mast's shadow or light wind hides it nobody can see it.
    return {"speed_80_b": mask & (frame["speed_80_a"] > 5).to_numpy() & exposed.to_numpy()}


def cup_reads_high(frame: pd.DataFrame, rng: np.random.Generator) -> Seeded:
    windy = (frame["speed_60"] > 8).to_numpy()
    mask = _mask(frame, _spells(frame, rng, [36, 72, 144], windy))
    frame.loc[mask, "speed_40"] *= 1.6
    exposed = ~((frame["direction_78"] - 110) % 360 < 50)
    return {"speed_40": mask & (frame["speed_60"] > 7).to_numpy() & exposed.to_numpy()}


def vane_wanders(frame: pd.DataFrame, rng: np.random.Generator) -> Seeded:
    windy = (frame["speed_80_a"] > 6).to_numpy()
    mask = _mask(frame, _spells(frame, rng, [36, 72, 144], windy))
    frame.loc[mask, "direction_58"] = (frame.loc[mask, "direction_58"] + 60) % 360
    return {"direction_58": mask & (frame["speed_60"] > 4.5).to_numpy()}


def temperature_steps(frame: pd.DataFrame, rng: np.random.Generator) -> Seeded:
    parts = _spells(frame, rng, [3 * DAY] * 4)
    mask = _mask(frame, parts)
    frame.loc[mask, "temperature_76"] += 9.0
    edges = [slice(edge, edge + 6) for part in parts for edge in (part.start, part.stop)]
    return {"temperature_76": _mask(frame, edges)}


def stuck_cup(frame: pd.DataFrame, rng: np.random.Generator) -> Seeded:
    windy = (frame["speed_60"] > 3).to_numpy()
    parts = _spells(frame, rng, [24, 48, 72, 144, 288], windy)
    for part in parts:
        frame.iloc[part, frame.columns.get_loc("speed_60")] = frame["speed_60"].iloc[part.start]
    return {"speed_60": _mask(frame, parts)}


def stuck_vane(frame: pd.DataFrame, rng: np.random.Generator) -> Seeded:
    windy = (frame["speed_60"] > 5).to_numpy()
    parts = _spells(frame, rng, [36, 72, 144, 288], windy)
    for part in parts:
        at = frame.columns.get_loc("direction_58")
        frame.iloc[part, at] = frame["direction_58"].iloc[part.start]
    return {"direction_58": _mask(frame, parts) & (frame["speed_60"] >= 2).to_numpy()}


def copied_block(frame: pd.DataFrame, rng: np.random.Generator) -> Seeded:
    at = frame.columns.get_loc("speed_80_b")
    frame.iloc[30_000 : 30_000 + 4 * DAY, at] = frame["speed_80_b"].to_numpy()[
        9_000 : 9_000 + 4 * DAY
    ]
    other = frame.columns.get_loc("speed_40")
    frame.iloc[40_000 : 40_000 + DAY, other] = frame["speed_60"].to_numpy()[40_000 : 40_000 + DAY]
    return {
        "speed_80_b": _mask(frame, [slice(30_000, 30_000 + 4 * DAY)]),
        "speed_40": _mask(frame, [slice(40_000, 40_000 + DAY)]),
    }


def spikes(frame: pd.DataFrame, rng: np.random.Generator) -> Seeded:
    at = np.unique(rng.choice(len(frame), 60, replace=False))
    frame.iloc[at, frame.columns.get_loc("speed_60")] += rng.uniform(7, 20, len(at))
    also = np.unique(rng.choice(len(frame), 40, replace=False))
    frame.iloc[also, frame.columns.get_loc("temperature_76")] += rng.choice([-9.0, 9.0], len(also))
    count = np.arange(len(frame))
    return {"speed_60": np.isin(count, at), "temperature_76": np.isin(count, also)}


def codes(frame: pd.DataFrame, rng: np.random.Generator) -> Seeded:
    at = rng.choice(len(frame), 120, replace=False)
    frame.iloc[at, frame.columns.get_loc("temperature_76")] = 273.15 + 40.0
    also = rng.choice(len(frame), 120, replace=False)
    frame.iloc[also, frame.columns.get_loc("speed_40")] = 25.55
    count = np.arange(len(frame))
    return {"temperature_76": np.isin(count, at), "speed_40": np.isin(count, also)}


def ice(frame: pd.DataFrame, rng: np.random.Generator) -> Seeded:
    cold = (frame["temperature_76"] < 272.0).rolling(2 * DAY).min().shift(-2 * DAY) == 1
    whole = frame[[*CUPS, *VANES]].notna().all(axis=1).rolling(2 * DAY).min().shift(-2 * DAY) == 1
    parts = _spells(frame, rng, [72, 144, 216], (cold & whole).to_numpy())
    seeded = {name: np.zeros(len(frame), dtype=bool) for name in (*CUPS, *VANES)}
    for number, part in enumerate(parts):
        for cup in CUPS[: 4 if number else 2]:
            frame.iloc[part, frame.columns.get_loc(cup)] = 0.26
            seeded[cup][part] = True
        for vane in VANES:
            later = slice(part.start + 3, part.stop - 2)
            value = frame[vane].iloc[later.start]
            frame.iloc[later, frame.columns.get_loc(vane)] = value
            frame.iloc[later, frame.columns.get_loc(f"{vane}_sd")] = 0.0
            seeded[vane][later] = True
    return seeded


def wear(frame: pd.DataFrame, rng: np.random.Generator) -> Seeded:
    start = len(frame) - 200 * DAY
    share = np.clip((np.arange(len(frame)) - start) / (200 * DAY), 0, 1)
    frame["speed_80_b"] *= 1 - 0.03 * share
    return {"speed_80_b": 0.03 * share > 0.01}


def wrong_cup_swapped_in(frame: pd.DataFrame, rng: np.random.Generator) -> Seeded:
    mask = np.arange(len(frame)) > 35_000
    frame.loc[mask, "speed_80_a"] *= 1.025
    return {"speed_80_a": mask}


def turned_vane(frame: pd.DataFrame, rng: np.random.Generator) -> Seeded:
    mask = _mask(frame, [slice(25_000, 25_000 + 80 * DAY)])
    frame.loc[mask, "direction_78"] = (frame.loc[mask, "direction_78"] + 14) % 360
    return {"direction_78": mask}


def miles_an_hour(frame: pd.DataFrame, rng: np.random.Generator) -> Seeded:
    mask = _mask(frame, [slice(20_000, 20_000 + 25 * DAY)])
    frame.loc[mask, "speed_60"] *= 3600 / 1609.344
    return {"speed_60": mask}


def certificate_twice(frame: pd.DataFrame, rng: np.random.Generator) -> Seeded:
    frame["speed_80_b"] *= 1.03
    return {"speed_80_b": np.ones(len(frame), dtype=bool)}


def clock_reset(frame: pd.DataFrame, rng: np.random.Generator) -> Seeded:
    mask = _mask(frame, [slice(22_000, 22_000 + 90 * DAY)])
    moved = frame.shift(6)
    frame.loc[mask] = moved.loc[mask]
    return {"*": mask}


def nothing(frame: pd.DataFrame, rng: np.random.Generator) -> Seeded:
    """The demo's own mast shadow: behind the mast by the generator's formula."""
    seeded = {}
    for cup, boom in (("speed_80_a", 315.0), ("speed_80_b", 135.0)):
        away = (frame["direction_78"] - 1.5 - boom) % 360 - 180
        left = 1 - 0.11 * np.exp(-0.5 * (away / 11) ** 2)
        left += 0.006 * np.exp(-0.5 * ((np.abs(away) - 38) / 12) ** 2)
        seeded[cup] = (left < 0.98).to_numpy()
    return seeded


#: Fault, the rule that should find it, and how it is laid.
FAULTS: tuple[tuple[str, str, Fault], ...] = (
    ("absurd values", "range", absurd),
    ("mean and maximum swapped", "order", swapped_columns),
    ("gusts of three means", "gust", gusts),
    ("one of a pair reads 20 % low", "pair", cup_reads_low),
    ("lowest cup reads 60 % high", "heights", cup_reads_high),
    ("vane off by 60 deg for hours", "vane_pair", vane_wanders),
    ("temperature steps by 9 K", "step", temperature_steps),
    ("cup stuck", "stuck", stuck_cup),
    ("vane stuck", "stuck", stuck_vane),
    ("block copied", "repeated_block", copied_block),
    ("single spikes", "spike", spikes),
    ("codes inside the range", "missing_code", codes),
    ("ice on cups and vanes", "icing", ice),
    ("mast shadow", "shadow", nothing),
    ("cup wears by 3 %", "drift", wear),
    ("cup swapped, 2.5 % off", "drift", wrong_cup_swapped_in),
    ("vane turned by 14 deg", "north", turned_vane),
    ("miles an hour for 25 days", "unit_change", miles_an_hour),
    ("certificate applied twice", "calibration_twice", certificate_twice),
    ("clock one hour late", "clock_step", clock_reset),
)


@dataclass(frozen=True)
class Outcome:
    """What one check made of one fault."""

    fault: str
    rule: str
    hours: float
    found: float
    false_alarms: float
    masks: bool


def covered(reading: Reading, spans: pd.DataFrame, channel: str) -> np.ndarray:
    """Which intervals of a channel some spans cover."""
    mask = np.zeros(len(reading.frame), dtype=bool)
    mine = spans[spans["channel"].isin([channel, "*"])]
    for start, stop in zip(mine["from"], mine["to"], strict=True):
        index = reading.frame.index
        mask[index.searchsorted(start) : index.searchsorted(stop)] = True
    return mask


def outcome(fault: str, rule: str, lay: Fault) -> Outcome:
    """Lay a fault, run its check, and count."""
    mast, references = sound()
    if rule == "calibration_twice":
        mast = replace(mast, settings=_with_certificate(mast.settings, 1.03))
    frame = mast.frame.copy()
    seeded = lay(frame, np.random.default_rng(20))
    damaged = replace(mast, frame=frame)
    settings = CheckSettings()
    impossible = range_spans(damaged, settings)
    if rule == "range":
        spans = impossible
    else:
        rest = without(damaged, impossible)
        spans = CHECKS[rule](rest, settings, Given(references, ELEVATION))
    found = hit = alarms = quiet = 0
    names = CUPS if "*" in seeded else tuple(frame.columns)
    for name in names:
        truth = seeded.get("*", seeded.get(name, np.zeros(len(frame), dtype=bool)))
        known = frame[name].notna().to_numpy()
        listed = covered(damaged, spans, name)
        hit += int((truth & known).sum())
        found += int((truth & known & listed).sum())
        quiet += int((~truth & known).sum())
        alarms += int((~truth & known & listed).sum())
    return Outcome(fault, rule, hit / 6.0, found / hit, alarms / quiet, rule in MASKING_RULES)


def _with_certificate(station: StationSettings, ratio: float) -> StationSettings:
    """The station with a certificate for one cup, as if the reading had applied it."""
    channels = [
        channel.model_copy(
            update={
                "applied_slope": 1.0,
                "applied_offset": 0.0,
                "certificate_slope": ratio,
                "certificate_offset": 0.0,
            }
        )
        if channel.name == "speed_80_b"
        else channel
        for channel in station.channels
    ]
    return station.model_copy(update={"channels": channels})


def table() -> list[Outcome]:
    """All faults, each laid by itself."""
    return [outcome(*fault) for fault in FAULTS]


def print_table(outcomes: list[Outcome]) -> None:
    """The table as the report shows it."""
    print(f"{'fault laid':31}{'check':19}{'hours':>9}{'found':>9}{'alarms':>9}  masks")
    for each in outcomes:
        print(
            f"{each.fault:31}{each.rule:19}{each.hours:9.1f}{100 * each.found:8.1f}%"
            f"{100 * each.false_alarms:8.3f}%  {'yes' if each.masks else 'asks'}"
        )


if __name__ == "__main__":
    print_table(table())
