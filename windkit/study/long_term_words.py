"""What step 3 says in words: findings with their numbers.

Text only: every number comes from the correction and the tables of `long_term`.
"""

from __future__ import annotations

import pandas as pd

from windkit.kernels.energy import HOURS_PER_MEAN_YEAR
from windkit.study.long_term_lines import OneReference
from windkit.study.long_term_result import LongTermCorrection

__all__ = ["found_in_words"]

#: The outer interval of the back-test, and how much less it may hold before a word is said, our
#: choice.
_OUTER_CLAIM = 0.95
_OUTER_SLACK = 0.02


def found_in_words(
    correction: LongTermCorrection,
    one: OneReference,
    site: pd.Series,
    series: pd.DataFrame,
    correlation: pd.DataFrame,
    scores: pd.DataFrame,
    mean_speed: float,
    interval_80: tuple[float, float],
    total: float,
    chosen: str,
    shown: str,
) -> dict[str, str]:
    """What was found, a sentence or two a subject."""
    campaign, low, high = float(site.mean()), *interval_80
    means = one.methods["long_term_mean_speed_m_s"]
    verdicts = correction.references["verdict"].value_counts()
    trial = ", ".join(f"{count} {verdict}" for verdict, count in verdicts.items())
    breaks = correction.breaks
    best = scores.iloc[0]
    nothing = scores[scores["method"] == "doing nothing"].iloc[0]
    held = correction.back_test.set_index("claimed")["held"]
    widened = (
        f" The study's own data did not support them as they were: they are widened by "
        f"{correction.widening:.2f}."
        if correction.widening > 1
        else ""
    )
    longer = correction.longer_campaign
    gains = "; ".join(
        f"{months} more months, ± {width:.1%}"
        for months, width in zip(longer["months"], longer["half_width_80"], strict=True)
        if months and width == width
    )
    return {
        "trial": f"References on trial: {trial}. "
        + (
            f"{len(breaks)} break{'s' if len(breaks) > 1 else ''} found: "
            + "; ".join(
                f"{row.reference}, {row.date:%B %Y} "
                f"(between {row.earliest:%B %Y} and {row.latest:%B %Y}), {row.size:+.1%}"
                for row in breaks.itertuples()
            )
            + "."
            if len(breaks)
            else "One reference alone has nothing to be compared with: its breaks cannot be found."
            if len(correction.references) == 1
            else "No break was found in the differences between them."
        ),
        "reference": f"Campaign and {shown} share {len(one.pairs):,} hours. Their correlation is "
        + ", ".join(
            f"{row.correlation:.2f} by the {row.averaging_time}" for row in correlation.itertuples()
        )
        + "; figures of different averaging times are not to be compared with each other.",
        "scores": f"On held-out blocks {best['method']} does best: rms error of the mean "
        f"{best['mean_error']:.1%}, of the energy {best['energy_error']:.1%}. Doing nothing "
        f"misses the mean by {nothing['mean_error']:.1%}. The blend stands on all references "
        "and is tried on stand-ins instead, below.",
        "methods": f"The lines to {shown} give long-term means between {means.min():.2f} and "
        f"{means.max():.2f} m/s; the study stands on the {chosen}: {mean_speed:.2f} m/s.",
        "correction": f"The campaign's mean was {campaign:.2f} m/s; the long term at the mast, "
        f"{len(series) / HOURS_PER_MEAN_YEAR:.0f} years, is {mean_speed:.2f} m/s, "
        f"{mean_speed / campaign - 1:+.1%}. The difference holds the campaign's seasons as well as "
        "its years.",
        "uncertainty": f"The correction has a standard uncertainty of {total:.1%}: the long-term "
        f"mean lies between {low:.2f} and {high:.2f} m/s with a probability of 80 %.",
        "back_test": "One reference alone cannot stand in for the site, so nothing could be tried "
        "on it; the interval rests on what is known of such corrections elsewhere."
        if held.isna().all()
        else "Intervals made in the same way for references standing in for the site held "
        + ", ".join(
            f"{share:.0%} of the truths where {level:.0%} was claimed"
            for level, share in held.items()
        )
        + f".{widened}{_outer(held)}",
        "windows": f"With the reference period cut to its last five years the mean would be "
        f"{correction.windows['mean_speed'].iloc[0]:.2f} m/s."
        if len(correction.windows) > 1
        else "Shorter periods cannot be tried: there is one reference only, or too few years.",
        "longer": f"The 80 % interval is ± {longer['half_width_80'].iloc[0]:.1%} today. As the "
        f"stand-ins show it, it would be, with {gains}.{_noise(longer)}"
        if gains
        else "One reference alone, or too few years, cannot say what more months would bring.",
    }


def _outer(held: pd.Series) -> str:
    """A word where the outer interval held clearly less than it claims."""
    short = _OUTER_CLAIM - float(held.get(_OUTER_CLAIM, _OUTER_CLAIM))
    if not short > _OUTER_SLACK:
        return ""
    return (
        f" The {_OUTER_CLAIM:.0%} interval held {short:.0%} less than it claims, which so few "
        "references can do by chance; P95 and P99 lean on it most."
    )


def _noise(longer: pd.DataFrame) -> str:
    """A word where a longer campaign seems to be worse."""
    widths = longer["half_width_80"].to_numpy(dtype=float)
    if len(widths) < 2 or not (widths[1:] > widths[0]).any():
        return ""
    return " A longer campaign is not worse; such a difference is the noise of the stand-ins."
