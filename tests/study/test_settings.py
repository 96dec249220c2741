"""study.toml is validated as a whole: every fault named with key, value, rule and remedy."""

from __future__ import annotations

import contextlib
import tomllib
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given
from hypothesis import settings as hypothesis_settings
from hypothesis import strategies as st

from tests.small_study import SETTINGS
from windkit.study.errors import StudyError
from windkit.study.settings import parse_settings, read_settings, with_overrides


def refused(old: str, new: str) -> str:
    """Message for the small study's settings with one text replaced."""
    assert SETTINGS.count(old) >= 1
    with pytest.raises(StudyError) as caught:
        parse_settings(tomllib.loads(SETTINGS.replace(old, new, 1)))
    return str(caught.value)


def test_what_is_written_is_what_is_read():
    settings = parse_settings(tomllib.loads(SETTINGS))
    assert settings.turbine.hub_height_m == 90.0
    assert settings.layout[1].speed_factor == 1.05
    assert settings.reference("Far Skerry").kind == "station"
    assert settings.study.issue_date.isoformat() == "2026-11-30"


def test_what_the_study_states_is_optional_and_a_deviation_is_whole():
    stated = parse_settings(tomllib.loads(SETTINGS)).study
    assert (stated.verifier, stated.data_date, stated.deviations) == ("", None, [])
    assert not {"standards_followed", "deviations"} & stated.model_fields_set
    date = "issue_date = 2026-11-30"
    table = '\n[[study.deviations]]\nrule = "r"\nwhat = "w"\naccepted_by = "C. Gill"\n'
    more = f'{date}\nverifier = "O. Marsh"\ndata_date = 2026-10-31\nstandards_followed = []{table}'
    stated = parse_settings(tomllib.loads(SETTINGS.replace(date, more, 1))).study
    assert stated.verifier == "O. Marsh"
    assert stated.data_date is not None
    assert stated.deviations[0].accepted_by == "C. Gill"
    assert "standards_followed" in stated.model_fields_set
    lacking = table.replace('what = "w"', 'effct = "none"')
    told = refused(date, date + lacking)
    assert "study.deviations[1].what" in told
    assert "effect" in told


def test_the_demo_study_keeps_every_rule():
    demo = Path(__file__).parents[2] / "data_demo" / "study.toml"
    assert parse_settings(read_settings(demo)).site.country == "Merrowland"


@pytest.mark.parametrize(
    ("old", "new", "told"),
    [
        ("hub_height_m = 90.0", "hub_height_m = -90.0", "turbine.hub_height_m: is -90.0; it must"),
        ("latitude_deg = 46.0", "latitude_deg = 95", "site.latitude_deg: is 95; it must be less"),
        ("loss = 0.08", "loss = 1.2", "losses[1].loss: is 1.2; it must be less than 1"),
        ("loss = 0.08", "loss = -0.08", "losses[1].loss: is -0.08; it must be greater than"),
        (
            "standard_uncertainty = 0.02",
            "standard_uncertainty = -0.02",
            "uncertainties[1].standard_uncertainty: is -0.02; it must be greater than",
        ),
        ("weibull_k = 2.0", "weibull_k = 0", "screening.weibull_k: is 0; it must be greater than"),
        ("speed_factor = 1.05", "speed_factor = 105", "layout[2].speed_factor: is 105; it must"),
        ("interval_min = 60", "interval_min = 0", "mast.interval_min: is 0; it must be greater"),
        ("elevation_m = 300.0", "elevation_m = nan", "site.elevation_m: is NaN; it must be a fin"),
        ("90.0\nrated", '"90"\nrated', 'turbine.rotor_diameter_m: is "90"; it must be a valid nu'),
        ("2026-11-30", '"30.11.2026"', 'study.issue_date: is "30.11.2026"; it must be a valid da'),
        ("schema_version = 1", "schema_version = 2", "schema_version: is 2; it must be 1"),
        ('"variance_ratio"', '"variance"', "long_term.method: is \"variance\"; it must be 'blend'"),
        (
            'group = "electrical"', 'group = "wires"', 'losses[3].group: is "wires"; it must be one'
        ),
    ],
)  # fmt: skip
def test_an_impossible_value_is_named_with_its_rule(old, new, told):
    message = refused(old, new)
    assert message.startswith(f"study.toml: {told}")
    assert "\n" not in message


@pytest.mark.parametrize(
    ("old", "new", "told"),
    [
        ("hub_height_m", "hub_hight_m", "turbine.hub_hight_m: unknown key;*write hub_height_m if"),
        ("speed_factor", "speed_facter", "layout[2].speed_facter: unknown*write speed_factor if"),
        ("[screening]", "[screning]", "screning: unknown key;*write screening if that is meant"),
        ("height_m = 58.0", "height_m = 58.0\nwidth = 3", "mast.channels[3].width: unknown key;*"),
        ('kind = "station"', 'kind = "station"\nkinds = 1', "references[1].kinds: unknown*kind if"),
    ],
)
def test_a_misspelt_key_is_refused_with_the_nearest_there_is(old, new, told):
    first, last = told.split("*")
    lines = [line for line in refused(old, new).splitlines() if "unknown" in line]
    assert len(lines) == 1
    assert lines[0].startswith(f"study.toml: {first}")
    assert last in lines[0]


@pytest.mark.parametrize(
    ("line", "key"),
    [
        ("utc_offset_h = 0.0\n", "mast.utc_offset_h"),
        ('stamp = "start"\n', "mast.stamp"),
        ("calm_below_m_s = 0.5\n", "mast.calm_below_m_s"),
        ("latitude_deg = 46.0\n", "site.latitude_deg"),
        ('curve_source = "made up for tests"\n', "turbine.curve_source"),
    ],
)
def test_a_required_key_is_asked_for_and_never_guessed(line, key):
    assert refused(line, "") == (
        f"study.toml: {key}: not given; the key is required and never guessed; add a line for it, "
        "or take the mark # REQUIRED off the template's"
    )


def test_all_faults_are_told_at_once():
    text = SETTINGS.replace('basis = "assumed"\n', "").replace("latitude_deg = 46.0\n", "")
    with pytest.raises(StudyError) as caught:
        parse_settings(tomllib.loads(text.replace("easting_m", "east")))
    lines = str(caught.value).splitlines()
    # The latitude, three places with a missing and an unknown key, six required bases.
    assert len(lines) == 1 + 2 * 3 + 6


def test_what_does_not_hang_together_is_refused():
    assert "[long_term] reference is 'Far', but the references are Far Skerry" in refused(
        'reference = "Far Skerry"', 'reference = "Far"'
    )
    assert "[[layout]] name 'T1' stands more than once" in refused('"T2"', '"T1"')
    told = refused('main_wind_speed = "speed_60"', 'main_wind_speed = "speed_61"')
    assert told == (
        "study.toml: mast: main_wind_speed is 'speed_61', but the channels with a mean "
        "wind_speed are speed_60, speed_40"
    )


@pytest.mark.parametrize(
    ("old", "new", "told"),
    [
        (
            "speed_factor = 1.05",
            'speed_factor = "1,05"',
            "write 1.05 without quotation marks, with",
        ),
        ("90.0\nrated", '"90"\nrated', "write 90 without quotation marks"),
        ("90.0\nrated", '"90 m"\nrated', "write a number without quotation marks and unit"),
        ("loss = 0.08", "loss = 3.0", "it is a fraction: 3 % is written 0.03"),
        ("standard_uncertainty = 0.02", "standard_uncertainty = 2", "2 % is written 0.02"),
        ("latitude_deg = 46.0", "latitude_deg = 4600", "the key's unit is degrees"),
        ("hub_height_m = 90.0", "hub_height_m = 9000", "the key's unit is metres"),
        ('name = "Cairn Hollow"', "name = 7", 'write it between quotation marks: "7"'),
        (
            "sector_count = 4",
            'sector_count = 4\nby_sector = "true"',
            "write true or false, without quotation marks",
        ),
    ],
)
def test_what_people_mean_by_a_wrong_value_is_said(old, new, told):
    message = refused(old, new)
    assert told in message
    assert "write a value that keeps this rule" not in message


@pytest.mark.parametrize("line", ["longitude_deg = 9,4", "longitude_deg = 9,4  # east"])
def test_a_decimal_comma_is_named(tmp_path, line):
    file = tmp_path / "study.toml"
    file.write_text(f"[site]\nlatitude_deg = 46.0\n{line}\n")
    with pytest.raises(StudyError, match=r"line 3.* Write 9\.4: a decimal point, not a comma\.$"):
        read_settings(file)


def test_an_open_question_of_a_draft_is_refused_by_its_name_and_once():
    message = refused("interval_min = 60", 'interval_min = "?"')
    assert message == (
        "study.toml: mast.interval_min: an open question of the draft; write the answer in place "
        'of "?"'
    )
    assert "site.name: an open question" in refused('name = "Cairn Hollow"', 'name = "?"')


def test_a_pattern_of_files_is_refused_with_the_files_that_match(tmp_path):
    file = tmp_path / "study.toml"
    (tmp_path / "data").mkdir()
    for name in ("m2.csv", "m1.csv", "m[3].csv"):
        (tmp_path / "data" / name).write_text("time,v\n")
    file.write_text('[mast]\nfiles = ["data/m?.csv"]\n')
    with pytest.raises(StudyError) as caught:
        read_settings(file)
    assert str(caught.value) == (
        "study.toml, mast.files: 'data/m?.csv' is a pattern. Patterns are not read: a study names "
        "each file it stands on. List the files that match, in the order of time: files = "
        '["data/m1.csv", "data/m2.csv"].'
    )
    file.write_text('[[references]]\nfiles = ["data/r*.csv"]\n')
    with pytest.raises(StudyError, match=r"references\[1\]\.files: .*No file matches it"):
        read_settings(file)
    file.write_text('[mast]\nfiles = ["data/m[3].csv", "../*", "/*", "?"]\n')
    assert len(read_settings(file)["mast"]["files"]) == 4


@pytest.mark.parametrize("value", ["[" * 5000 + "]" * 5000, "9" * 5000])
def test_toml_that_the_parser_gives_up_on_is_refused(tmp_path, value):
    (tmp_path / "study.toml").write_text(f"a = {value}")
    with pytest.raises(StudyError, match=r"study\.toml: "):
        read_settings(tmp_path / "study.toml")


@pytest.mark.parametrize("value", ["6", "0", '"reference"', "true", "0.5"])
def test_a_yearly_variability_is_a_word_or_a_fraction_and_told_once(value):
    told = refused("sector_count = 4", f"sector_count = 4\nyearly_variability = {value}")
    assert told.count("yearly_variability") == 1
    assert 'it must be "from_reference", or a fraction between 0 and 0.5' in told


def test_a_text_that_is_no_toml_is_told_with_its_line(tmp_path):
    file = tmp_path / "study.toml"
    file.write_text("schema_version = 1\n[study]\ntitle = Ridge\n")
    with pytest.raises(StudyError, match=r"study\.toml: .*line 3.*must be valid TOML.*Mend that"):
        read_settings(file)
    file.write_text("a = 1\na = 2\n")
    with pytest.raises(StudyError, match=r"line 2.*a key may stand only once"):
        read_settings(file)
    file.write_bytes(b'title = "H\xf6he"\n')
    with pytest.raises(StudyError, match=r"byte 10 is not UTF-8 text"):
        read_settings(file)


def test_overrides_lie_over_the_values_and_leave_the_file_alone():
    values = tomllib.loads(SETTINGS)
    merged = with_overrides(values, {"turbine.hub_height_m": 120.0, "checks.mark_gust_m_s": 31.0})
    assert merged["turbine"]["hub_height_m"] == 120.0
    assert merged["checks"] == {"mark_gust_m_s": 31.0}
    assert values["turbine"]["hub_height_m"] == 90.0
    assert "checks" not in values


def test_an_override_over_something_that_is_no_table_is_refused_like_any_fault():
    with pytest.raises(StudyError, match=r"turbine: is 3; it must be a valid dictionary"):
        parse_settings(with_overrides({"turbine": 3}, {"turbine.hub_height_m": 120.0}))


#: Values that are odd in one way or another, as they are written.
ODD = """
nan | -inf | 1e400 | -1 | true | [] | {} | 9,4 | "?" | [1, [2]] | 0x10 | "" | 2024-02-30
2024-01-01 | "FILL IN" | "*" | ["\\u0000"] | ["**/[a"] | { a.b = 1 } | 12:00:00 | [[[[{}]]]]
"""
VALUE = st.one_of(
    st.sampled_from(
        [each.strip() for line in ODD.strip().splitlines() for each in line.split("|")]
    ),
    st.sampled_from(["9" * 400, "9" * 5000, f'["{"a" * 300}*"]']),
    st.floats().map(repr),
    st.text(max_size=6),
)
EDIT = st.tuples(
    st.integers(0, len(SETTINGS.splitlines()) - 1), st.sampled_from("vdri"), VALUE
)  # which line; value changed, line dropped, repeated, or one put in
EDITS = st.lists(EDIT, max_size=6)


def settings_are_read_or_refused(folder: Path, edits: list[tuple[int, str, str]]) -> None:
    """However study.toml is edited, there are settings or a message."""
    lines = SETTINGS.splitlines()
    for at, how, value in edits:
        if how == "v" and " = " in lines[at]:
            lines[at] = lines[at].split(" = ")[0] + " = " + value
        elif how == "d":
            lines[at] = ""
        elif how == "r":
            lines[at] += "\n" + lines[at]
        elif how == "i":
            lines[at] += "\n" + value
    file = folder / "study.toml"
    file.write_bytes("\n".join(lines).encode("utf-8", "surrogatepass"))
    with contextlib.suppress(StudyError):
        parse_settings(read_settings(file))


@hypothesis_settings(
    max_examples=150, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture]
)
@given(edits=EDITS)
def test_any_edit_of_the_settings_is_refused_with_a_message_or_read(tmp_path: Path, edits):
    settings_are_read_or_refused(tmp_path, edits)
