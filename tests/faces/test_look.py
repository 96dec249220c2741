"""The house colours, and how a number is set."""

from __future__ import annotations

import itertools
import subprocess
import sys

import numpy as np
import pytest
from matplotlib.colors import to_rgb

from windkit.faces import look

# Simulation matrices for severity 1.0 in linear RGB: Machado, Oliveira and Fernandes (2009), "A
# physiologically-based model for simulation of color vision deficiency", IEEE TVCG 15(6), table
# of the supplement. Values from memory, checked by their rows adding up to one.
SIGHT = {
    "usual": np.eye(3),
    "protan": np.array(
        [
            [0.152286, 1.052583, -0.204868],
            [0.114503, 0.786281, 0.099216],
            [-0.003882, -0.048116, 1.051998],
        ]
    ),
    "deutan": np.array(
        [
            [0.367322, 0.860646, -0.227968],
            [0.280085, 0.672501, 0.047413],
            [-0.011820, 0.042940, 0.968881],
        ]
    ),
}


def _lab(colour: str, sight: np.ndarray) -> np.ndarray:
    """CIE L*a*b* under D65: IEC 61966-2-1 (sRGB) and CIE 15, from memory."""
    rgb = np.array(to_rgb(colour))
    linear = np.where(rgb <= 0.04045, rgb / 12.92, ((rgb + 0.055) / 1.055) ** 2.4)
    seen = np.clip(sight @ linear, 0, 1)
    to_xyz = np.array(
        [[0.4124, 0.3576, 0.1805], [0.2126, 0.7152, 0.0722], [0.0193, 0.1192, 0.9505]]
    )
    ratio = to_xyz @ seen / np.array([0.9505, 1.0, 1.089])
    f = np.where(ratio > (6 / 29) ** 3, np.cbrt(ratio), ratio / (3 * (6 / 29) ** 2) + 4 / 29)
    return np.array([116 * f[1] - 16, 500 * (f[0] - f[1]), 200 * (f[1] - f[2])])


@pytest.mark.parametrize("name", SIGHT)
def test_series_are_told_apart_by_colour_blind_readers(name):
    assert SIGHT[name].sum(axis=1) == pytest.approx(1.0, abs=2e-6)
    # A difference of 20 in L*a*b* is plain at a glance (common practice; 2.3 is just noticed).
    for one, other in itertools.combinations(look.SERIES[:4], 2):
        apart = np.linalg.norm(_lab(one, SIGHT[name]) - _lab(other, SIGHT[name]))
        assert apart > 20, f"{one} and {other} to {name} sight: {apart:.0f}"


def test_neighbouring_series_differ_in_grey_print():
    lightness = [_lab(colour, np.eye(3))[0] for colour in look.SERIES]
    assert min(abs(a - b) for a, b in itertools.pairwise(lightness)) > 12


def test_classes_only_grow_darker():
    lightness = [_lab(colour, np.eye(3))[0] for colour in look.class_colours(6)]
    assert lightness == sorted(lightness, reverse=True)


@pytest.mark.parametrize(
    ("value", "decimals", "text"),
    [
        (1234567.4, 0, "1\u202f234\u202f567"),
        (-12345.0, 1, "−12\u202f345.0"),
        (7.125, 1, "7.1"),
        (-0.04, 1, "0.0"),
        (float("nan"), 2, "–"),
    ],
)
def test_a_number_as_a_person_reads_it(value, decimals, text):
    assert look.number_text(value, decimals) == text


def test_tables_do_not_load_matplotlib_or_pandas():
    probe = "import sys, windkit.faces.tables; print({'matplotlib', 'pandas'} & set(sys.modules))"
    told = subprocess.run([sys.executable, "-c", probe], capture_output=True, text=True, check=True)
    assert told.stdout.strip() == "set()"
