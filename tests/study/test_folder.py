"""A study is a folder: it opens whole or not at all, and its hashes follow values, not looks."""

from __future__ import annotations

import hashlib
import re

import pytest

from tests.small_study import edit
from windkit.study.errors import StudyError
from windkit.study.folder import digest_of_file, open_study


def test_a_folder_that_is_none_is_refused(tmp_path):
    with pytest.raises(StudyError, match=r"There is no folder.*nowhere.*sitestudy new DIR"):
        open_study(tmp_path / "nowhere")
    with pytest.raises(StudyError, match=r"study\.toml: there is no study\.toml in"):
        open_study(tmp_path)


def test_a_path_stays_inside_the_study(small, tmp_path):
    study = open_study(small)
    assert study.path("data/curve.csv", key="k") == small / "data" / "curve.csv"
    (tmp_path / "secret.csv").write_text("x")
    (small / "data" / "link.csv").symlink_to(tmp_path / "secret.csv")
    for name, met in {
        "../secret.csv": r"the path climbs out with \.\.",
        "data/../../secret.csv": r"the path climbs out with \.\.",
        "data\\..\\..\\secret.csv": r"the path climbs out with \.\.",
        str(tmp_path / "secret.csv"): "the path is absolute",
        "C:\\secret.csv": "the path is absolute",
        "data/link.csv": "the path is a link that leaves the study",
        "data/none.csv": r"it is not there.*in 'data' there are: curve\.csv",
        "data": "it is a folder, not a file",
    }.items():
        with pytest.raises(StudyError, match=rf"{re.escape(name)}, turbine\.curve_file: {met}"):
            study.path(name, key="turbine.curve_file")


def test_a_link_inside_the_study_is_followed(small):
    (small / "data" / "link.csv").symlink_to(small / "data" / "curve.csv")
    assert open_study(small).path("data/link.csv", key="k") == small / "data" / "curve.csv"


def test_a_sections_hash_follows_its_values_only(small):
    before = {name: open_study(small).section_digest(name) for name in ("turbine", "layout")}
    edit(
        small / "study.toml",
        "hub_height_m = 90.0\nrotor_diameter_m = 90.0\n",
        "rotor_diameter_m = 90  # the rotor\n\nhub_height_m = 9e1\n",
    )
    after = {name: open_study(small).section_digest(name) for name in ("turbine", "layout")}
    assert after == before
    edit(small / "study.toml", "hub_height_m = 9e1", "hub_height_m = 91.0")
    assert open_study(small).section_digest("turbine") != before["turbine"]
    assert open_study(small).section_digest("layout") == before["layout"]


def test_an_override_is_seen_in_settings_and_hash_but_not_in_the_file(small):
    plain = open_study(small)
    other = open_study(small, {"turbine.hub_height_m": 100.0})
    assert other.settings.turbine.hub_height_m == 100.0
    assert other.overrides == {"turbine.hub_height_m": 100.0}
    assert other.section_digest("turbine") != plain.section_digest("turbine")
    assert open_study(small).settings == plain.settings


def test_a_fault_of_a_parameter_is_not_ascribed_to_the_file(small):
    with pytest.raises(StudyError) as caught:
        open_study(small, {"turbine.hub_height_m": -1})
    assert str(caught.value).startswith(
        "parameters over study.toml: turbine.hub_height_m: is -1; it must be greater than 5"
    )


def test_a_files_digest_is_its_sha256(tmp_path):
    # FIPS 180-2, appendix B.1: SHA-256 of the text "abc".
    (tmp_path / "abc").write_bytes(b"abc")
    assert digest_of_file(tmp_path / "abc") == (
        "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"
    )
    assert digest_of_file(tmp_path / "abc") == hashlib.sha256(b"abc").hexdigest()
