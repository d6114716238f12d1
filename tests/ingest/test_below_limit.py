"""Values below a detection limit: refused until a rule is declared, then marked as what they are."""

import numpy as np
import pytest

from ingest.small_network import long_source, only_reason, places, wide_source
from rhovane.model import Flag
from rhovane.settings import SourceSettings

HEADER = "time,station,quantity,value,q\n"


def rows(*values, flags="VVVVVVVVVV"):
    return HEADER + "".join(
        f'2024-03-01 {i:02d}:00,KEL,NO2,"{value}",{flags[i]}\n' for i, value in enumerate(values)
    )


def source(**changes):
    return long_source(
        **{"columns": {"flag": "q"}, "flags": {"V": "pass", "?": "suspect", "M": "missing"}, **changes}
    )


def test_without_a_rule_a_bound_is_rejected_and_the_rule_is_named(parse):
    parsed = parse(rows("<0.5", "0.5<", "1"), source())
    assert places(parsed) == [(2, "value", "<0.5"), (3, "value", "0.5<")]
    assert 'below_limit = "half"' in parsed.rejected[0].reason


@pytest.mark.parametrize(("rule", "stands_for"), [("half", 0.2), ("limit", 0.4), ("zero", 0.0)])
@pytest.mark.parametrize(("text", "decimal"), [("<0.4", "."), ("< 0.4", "."), ("0.4<", "."), (" <0,4 ", ",")])
def test_a_bound_becomes_what_the_rule_says(parse, rule, stands_for, text, decimal):
    parsed = parse(rows("1", text, "-2"), source(below_limit=rule, decimal=decimal))
    assert parsed.value.tolist() == [1, stands_for, -2]
    assert parsed.flag.tolist() == [Flag.PASS, Flag.BELOW_LIMIT, Flag.PASS]


def test_by_the_rule_missing_there_is_no_value(parse):
    parsed = parse(rows("<0.4", "ND", "3"), source(below_limit="missing", not_detected=["ND"]))
    assert parsed.flag.tolist() == [Flag.MISSING, Flag.MISSING, Flag.PASS]
    np.testing.assert_array_equal(parsed.value, [np.nan, np.nan, 3])


def test_a_worse_flag_is_not_painted_over(parse):
    parsed = parse(rows("<1", "<1", "<1", flags="V?M"), source(below_limit="half"))
    assert parsed.flag.tolist() == [Flag.BELOW_LIMIT, Flag.SUSPECT, Flag.MISSING]
    np.testing.assert_array_equal(parsed.value, [0.5, 0.5, np.nan])


def test_not_detected_needs_the_limit_of_its_series(parse):
    told = source(below_limit="half", not_detected=["ND", "n.d."], limits={"KEL NO2": 0.6})
    parsed = parse(rows("ND", " n.d. ", "4"), told)
    assert parsed.value.tolist() == [0.3, 0.3, 4]
    assert parsed.flag.tolist() == [Flag.BELOW_LIMIT, Flag.BELOW_LIMIT, Flag.PASS]
    parsed = parse(rows("ND", "4"), source(below_limit="half", not_detected=["ND"]))
    assert '"KEL NO2" under [source.limits]' in only_reason(parsed)
    assert parsed.value.tolist() == [4]


def test_limits_are_in_the_unit_of_the_feed(parse):
    parsed = parse(
        rows("ND", "<2"),
        source(below_limit="limit", not_detected=["ND"], limits={"KEL NO2": 3}, units={"KEL NO2": "mg/m3"}),
    )
    assert parsed.value.tolist() == [3000, 2000]


def test_wide_files_know_the_limit_of_each_column(parse):
    text = "time,no2,o3\n2024-03-01 00:00,ND,<8\n2024-03-01 01:00,5,ND\n"
    parsed = parse(
        text,
        wide_source(
            series={"no2": "KEL.NO2", "o3": "KEL.O3"},
            below_limit="half",
            not_detected=["ND"],
            limits={"no2": 2},
        ),
    )
    assert parsed.value.tolist() == [1, 4, 5]
    assert parsed.flag.tolist() == [6, 6, 2]
    assert places(parsed) == [(3, "o3", "ND")]


@pytest.mark.parametrize("text", ["<", "<<1", "<x", "<-1", ">5", "<1e999", "< nan"])
def test_what_is_no_bound_is_rejected(parse, text):
    parsed = parse(rows(text, "1"), source(below_limit="half"))
    assert [row.line for row in parsed.rejected] == [2]
    assert parsed.value.tolist() == [1]


def test_a_missing_code_wins_over_a_mark(parse):
    parsed = parse(rows("<0.1", "1"), source(below_limit="half", missing=["<0.1"]))
    assert parsed.flag.tolist() == [Flag.MISSING, Flag.PASS]


@pytest.mark.parametrize(
    ("changes", "says"),
    [
        ({"not_detected": ["ND"]}, "need a rule"),
        ({"below_limit": "half", "limits": {"KEL SO2": 1}}, "not a code listed"),
        ({"below_limit": "half", "limits": {"KEL NO2": 0}}, "above 0"),
        ({"below_limit": "half", "not_detected": ["ND"], "missing": ["ND"]}, "keep one"),
    ],
)
def test_rules_that_contradict_themselves_are_refused(changes, says):
    with pytest.raises(ValueError, match=says):
        long_source(**changes)
    assert SourceSettings.model_fields["below_limit"].default == "reject"
