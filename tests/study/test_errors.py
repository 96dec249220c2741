"""The paragraph an analyst reads when a study is refused."""

from windkit.study.errors import StudyError, explain


def test_the_parts_stand_in_the_order_file_line_key_met_rule_remedy():
    text = explain(
        file="data/mast.csv",
        line=12,
        key="time",
        met="the stamp is 31-02",
        rule="stamps exist",
        remedy="correct it",
    )
    assert text == "data/mast.csv, line 12, time: the stamp is 31-02. Stamps exist. Correct it."


def test_without_a_place_it_is_three_sentences():
    assert explain(met="a", rule="b", remedy="c?") == "A. B. C?"


def test_a_study_error_is_a_value_error_with_that_paragraph():
    error = StudyError.of(file="f", met="x", rule="y", remedy="z")
    assert isinstance(error, ValueError)
    assert str(error) == "f: x. Y. Z."
