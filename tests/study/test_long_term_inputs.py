"""Tables as analysts really hand them over: what the long-term correction takes and refuses."""

import warnings

import numpy as np
import pandas as pd
import pytest

import windkit
from tests.calibration.calibrate import as_frames
from windkit.kernels.simulated import simulate_site
from windkit.study.errors import StudyError
from windkit.study.long_term_clock import direction_on_clock
from windkit.study.long_term_inputs import prepare_inputs


@pytest.fixture(scope="module")
def study():
    """Four references over eight years, one year of a site, daily."""
    return as_frames(simulate_site(3, years=8, reference_count=4))


@pytest.fixture(scope="module")
def plain(study):
    return prepare_inputs(*study)


def _hourly(data):
    times = pd.date_range(data.index[0], periods=24 * len(data), freq="h")
    repeated = np.repeat(data.to_numpy(), 24, axis=0)
    return data.__class__(repeated, times, **({"columns": data.columns} if data.ndim > 1 else {}))


def _both(change):
    return lambda s, r: (change(s), change(r))


#: Ways to write one and the same study down.
SPELLINGS = {
    "utc": _both(lambda d: d.tz_localize("UTC")),
    "local days with clock changes": _both(lambda d: d.tz_localize("Europe/Berlin")),
    "no name, numbered columns": lambda s, r: (s.rename(None), r.set_axis(range(4), axis=1)),
    "site as a table of one column": lambda s, r: (s.to_frame("speed"), r),
    "site on the references' whole index": lambda s, r: (s.reindex(r.index), r),
    "unsorted": _both(lambda d: d.sample(frac=1, random_state=0)),
    "objects": _both(lambda d: d.astype(object)),
    "numbers as text": lambda s, r: (s.astype(str), r),
    "nullable": _both(lambda d: d.astype("Float64")),
    "coarse stamps": _both(lambda d: d.set_axis(d.index.as_unit("s"), axis=0)),
    "noon against midnight": lambda s, r: (s.shift(freq="12h"), r),
    "hourly site": lambda s, r: (_hourly(s), r),
    "hourly references": lambda s, r: (s, _hourly(r)),
    "utc hours and local days": lambda s, r: (
        _hourly(s).tz_localize("Asia/Kolkata").tz_convert("UTC"),
        r.tz_localize("Asia/Kolkata"),
    ),
}


@pytest.mark.parametrize("spelling", SPELLINGS)
def test_one_study_is_read_alike_however_it_is_written(study, plain, spelling):
    found = prepare_inputs(*SPELLINGS[spelling](*study))
    np.testing.assert_allclose(found.site, plain.site)
    np.testing.assert_allclose(found.filled, plain.filled)
    assert not found.set_aside
    assert found.steps_per_day == 1


def test_whole_numbers_and_a_year_with_a_third_missing_are_taken(study, plain):
    site, references = study
    inputs = prepare_inputs(
        site.round().astype(int)[np.random.default_rng(0).random(site.size) > 1 / 3],
        references.round().astype(int),
    )
    assert inputs.site[np.isfinite(inputs.site)].mean() == pytest.approx(site.mean(), rel=0.03)
    assert inputs.days.size == plain.days.size


def test_hours_beside_the_hour_meet_the_others_and_it_is_said():
    site, references = as_frames(
        simulate_site(5, years=2, reference_count=2, steps_per_day=24, campaign_days=200)
    )
    straight = prepare_inputs(site, references)
    late = prepare_inputs(site.shift(freq="30min"), references)
    np.testing.assert_array_equal(late.site, straight.site)
    assert any("beside the step" in note for note in late.notes)


def test_references_may_start_late_end_early_and_pause(study):
    site, references = study
    holed = references.copy()
    start = references.index.get_loc(site.index[0])
    holed.iloc[: start // 2, 0] = np.nan
    holed.iloc[start + 365 :, 1] = np.nan
    holed.iloc[start // 2 : start // 2 + 300, 2] = np.nan
    found = windkit.correct_long_term(site, holed)
    whole = windkit.correct_long_term(site, references)
    assert found.period == whole.period
    assert found.mean_speed == pytest.approx(whole.mean_speed, rel=0.06)
    low, high = found.interval(0.8)
    assert isinstance(low, float)
    assert isinstance(high, float)
    assert low < found.mean_speed < high


def test_years_that_rest_on_one_reference_are_named(study):
    site, references = study
    alone = references.copy()
    early = references.index < site.index[0] - pd.Timedelta(days=400)
    alone.loc[early, alone.columns[1:]] = np.nan
    assert any("fewer than 3 references" in note for note in prepare_inputs(site, alone).notes)


@pytest.mark.parametrize(
    ("change", "words"),
    [
        (lambda r: r.assign(station_2=-1.0), "holds no value"),
        (lambda r: r.assign(station_2=0.0), "constant during"),
        (lambda r: r.assign(station_2=r["station_2"] * 1e-3), "check its unit"),
        (lambda r: r.assign(station_2=3.6 * r["station_1"]), "same values as station_1"),
        (
            lambda r: r.assign(station_2=r["station_2"].where(np.arange(len(r)) % 10 > 6, 0)),
            "are 0",
        ),
    ],
)
def test_references_that_cannot_be_are_set_aside(study, change, words):
    site, references = study
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        inputs = prepare_inputs(site, change(references))
    assert list(inputs.set_aside) == ["station_2"]
    assert words in inputs.set_aside["station_2"]


def test_impossible_and_stuck_values_are_set_aside_and_counted(study):
    site, references = study
    spoilt = references.copy()
    spoilt.iloc[10:20, 0] = -999.0
    spoilt.iloc[30, 1] = np.inf
    spoilt.iloc[300:360, 2] = 5.0
    spoilt.iloc[300:340, 3] = 0.0
    spoilt.iloc[500:510, 3] = 4.0  # ten days alike may be wind
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        inputs = prepare_inputs(site, spoilt)
    assert inputs.references.isna().sum().tolist() == [10, 1, 60, 40]
    assert len(inputs.notes) == 4
    assert "60 values set aside because one value stands" in inputs.notes[2]


@pytest.mark.parametrize(
    ("change", "words"),
    [
        (lambda s, r: (s.astype(object).where(s > 3, "calm"), r), "the first 'calm' on"),
        (lambda s, r: (s, r.astype(object).where(r > 3, "-")), "station_1: .* are no numbers"),
        (lambda s, r: (s > 4, r), "of type bool"),
        (lambda s, r: (s.to_numpy(), r), "site: it is a ndarray"),
        (lambda s, r: (pd.concat([s, s], axis=1), r), "DataFrame of 2 columns"),
        (lambda s, r: (s, {"a": r["station_1"]}), "references: it is a dict"),
        (lambda s, r: (s, r[[]]), "no reference holds a value"),
        (lambda s, r: (s.iloc[:0], r), "it has 0 rows"),
        (lambda s, r: (s, r.set_axis(["a", "a", "b", "c"], axis=1)), "'a' stands over several"),
        (lambda s, r: (s, pd.concat({"x": r}, axis=1)), "2 levels of names"),
        (lambda s, r: (s, r.set_axis(r.index.where(np.arange(len(r)) != 5))), "NaT"),
        (lambda s, r: (s, pd.concat([r, r.iloc[:5]])), "5 stamps are repeated"),
        (lambda s, r: (s.iloc[::10], r), "step of the records is 10 days"),
        (lambda s, r: (s, r.resample("MS").mean()), "step of the records is 31 days"),
        (lambda s, r: (s.where(np.arange(len(s)) % 3 == 0, 0.0), r), "67% of its values are 0"),
        (lambda s, r: (s * 1e-3, r), "mean is 0.0071"),
        (lambda s, r: (s, r.drop(index=s.index).reindex(r.index)), "only 0% of the campaign"),
    ],
)
def test_what_cannot_be_read_is_refused_in_words(study, change, words):
    site, references = change(*study)
    with pytest.raises(StudyError, match=words):
        windkit.correct_long_term(site, references)


@pytest.mark.parametrize("seed", [None, -1, 1.5])
def test_a_seed_is_a_whole_number(study, seed):
    with pytest.raises(StudyError, match="whole number"):
        windkit.correct_long_term(*study, seed=seed)


def test_directions_come_onto_the_clock_of_the_speeds():
    times = pd.date_range("2020-01-01", periods=48, freq="h", tz="UTC")
    turning = pd.Series(np.arange(48.0), times.tz_convert("Europe/Oslo"))
    np.testing.assert_array_equal(direction_on_clock(turning[::-1], times, "x"), np.arange(48.0))
    with pytest.raises(StudyError, match="carries a time zone"):
        direction_on_clock(turning.tz_localize(None), times, "x")
    with pytest.raises(StudyError, match="are repeated"):
        direction_on_clock(pd.concat([turning, turning[:2]]), times, "x")
