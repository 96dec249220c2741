"""All figures under one name, in the order a study meets them.

They are drawn in `figures_measured`, `figures_rose`, `figures_long_term`, `figures_energy` and
`figures_conditions` beside this module, with the look of `windkit.faces.look`. Every function
takes plain arrays or frames and ``ax=None``, draws and returns the axes.
"""

from __future__ import annotations

from windkit.faces.figures_conditions import (
    density_by_month,
    errors_of_height_left_out,
    exponent_by_hour,
    return_levels,
    turbulence_against_classes,
)
from windkit.faces.figures_energy import (
    exceedance_curves,
    loss_staircase,
    power_curve,
    tornado,
    uncertainty_bars,
)
from windkit.faces.figures_long_term import method_comparison, scatter_fit, yearly_means
from windkit.faces.figures_measured import (
    diurnal_and_monthly,
    pair_ratio_by_direction,
    profile,
    recovery_map,
    speed_distribution,
    turbulence_in_speed_bins,
)
from windkit.faces.figures_rose import wind_rose
from windkit.faces.look import save_png, use

__all__ = [
    "density_by_month",
    "diurnal_and_monthly",
    "errors_of_height_left_out",
    "exceedance_curves",
    "exponent_by_hour",
    "loss_staircase",
    "method_comparison",
    "pair_ratio_by_direction",
    "power_curve",
    "profile",
    "recovery_map",
    "return_levels",
    "save_png",
    "scatter_fit",
    "speed_distribution",
    "tornado",
    "turbulence_against_classes",
    "turbulence_in_speed_bins",
    "uncertainty_bars",
    "use",
    "wind_rose",
    "yearly_means",
]
