import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from checks.check import Check, Level, Limits, Measured, Verdict, judge, single

BOTH_SIDES = Limits(suspect_above=8.0, fail_above=10.0, suspect_below=-8.0, fail_below=-10.0)
P, S, F, N = Verdict.PASS, Verdict.SUSPECT, Verdict.FAIL, Verdict.NOT_EVALUATED


def check(measure, limits=BOTH_SIDES):
    return Check(
        name="drawn", level=Level.BEAT, measure=measure, unit="1", limits=limits, reason="{value:g} beyond {limit:g}", title="Drawn"
    )


def judged(*values, limits=BOTH_SIDES, corroborated=None):
    measured = Measured(np.array(values, dtype=np.float64), corroborated=corroborated)
    return judge(check(lambda _subject: measured), None, limits, len(values))


@pytest.mark.parametrize(
    ("value", "verdict", "limit"),
    [
        (0.0, P, None),
        (8.0, P, None),
        (-8.0, P, None),
        (np.nextafter(8.0, 9.0), S, 8.0),
        (np.nextafter(-8.0, -9.0), S, -8.0),
        (10.0, S, 8.0),
        (-10.0, S, -8.0),
        (np.nextafter(10.0, 11.0), F, 10.0),
        (np.nextafter(-10.0, -11.0), F, -10.0),
        (np.inf, F, 10.0),
        (-np.inf, F, -10.0),
    ],
)
def test_a_value_on_a_bound_still_passes_it_and_the_bound_crossed_is_named(value, verdict, limit):
    found = judged(value)
    assert found.verdict == (verdict,)
    assert found.limit[0] == limit if limit is not None else np.isnan(found.limit[0])


@pytest.mark.parametrize("limits", [BOTH_SIDES, Limits(), Limits(fail_above=0.0), Limits(fail_below=0.0), Limits(suspect_below=-1e300)])
def test_nan_is_never_a_pass(limits):
    found = judged(np.nan, 0.0, np.nan, limits=limits)
    assert [found.verdict[0], found.verdict[2]] == [N, N]
    assert np.isnan(found.limit[[0, 2]]).all()


def test_without_limits_every_number_passes():
    assert judged(-1e9, 0.0, np.inf, limits=Limits()).verdict == (P, P, P)


def test_a_fail_without_its_second_sign_is_suspect_at_the_bound_it_crossed():
    found = judged(11.0, 11.0, 9.0, 0.0, np.nan, corroborated=np.array([True, False, False, False, False]))
    assert found.verdict == (F, S, S, P, N)
    assert found.limit[:3].tolist() == [10.0, 8.0, 8.0]
    only_fail = judged(11.0, limits=Limits(fail_above=10.0), corroborated=np.array([False]))
    assert only_fail.verdict == (S,)
    assert only_fail.limit.tolist() == [10.0]


def test_a_measure_that_raises_is_not_evaluated_for_every_member_and_says_what_it_raised():
    def broken(_subject):
        message = "the sky fell"
        raise LookupError(message)

    found = judge(check(broken), None, BOTH_SIDES, 3)
    assert found.verdict == (N, N, N)
    assert found.trouble == "LookupError: the sky fell"
    assert np.isnan(found.value).all()
    assert found.worst() is N


@pytest.mark.parametrize(
    "measured",
    [
        Measured(np.zeros(4)),
        Measured(np.zeros(3), at_s=np.zeros(4)),
        Measured(np.zeros(3), corroborated=np.ones(2, dtype=bool)),
        Measured(np.array(["a", "b", "c"])),
        None,
    ],
)
def test_a_measure_of_the_wrong_shape_is_not_evaluated_and_stops_nothing(measured):
    found = judge(check(lambda _subject: measured), None, BOTH_SIDES, 3)
    assert found.verdict == (N, N, N)
    assert found.trouble


def test_one_number_holds_for_the_acquisition_and_carries_its_instant():
    found = judge(check(lambda _subject: single(9.0, 3.5)), None, BOTH_SIDES)
    assert (found.verdict, found.value.tolist(), found.at_s.tolist()) == ((S,), [9.0], [3.5])


def test_what_was_measured_is_not_changed_by_judging():
    values = np.array([1.0, 20.0])
    found = judge(check(lambda _subject: Measured(values)), None, BOTH_SIDES, 2)
    found.value[0] = 99.0
    assert values.tolist() == [1.0, 20.0]


@pytest.mark.parametrize(
    ("values", "worst"),
    [((), N), ((0.0,), P), ((0.0, np.nan), N), ((np.nan, 9.0), S), ((9.0, 11.0, 0.0), F)],
)
def test_the_worst_verdict_is_fail_then_suspect_then_not_evaluated_then_pass(values, worst):
    assert judged(*values).worst() is worst


@settings(max_examples=200, deadline=None)
@given(st.lists(st.floats(allow_nan=False, min_value=0.0), min_size=2, max_size=8), st.booleans())
def test_a_value_further_out_is_never_judged_milder(values, upward):
    ordered = sorted(values)
    found = judged(*(ordered if upward else [-value for value in ordered]))
    grades = [(P, S, F).index(verdict) for verdict in found.verdict]
    assert grades == sorted(grades)


def test_limits_declare_the_bounds_they_use_and_let_no_other_be_replaced():
    limits = Limits(suspect_above=0.08, fail_above=0.15, basis="a paper")
    assert limits.declared() == ("suspect_above", "fail_above")
    replaced = limits.replaced(fail_above=0.12)
    assert (replaced.suspect_above, replaced.fail_above, replaced.basis) == (0.08, 0.12, "study protocol")
    assert limits.fail_above == 0.15
    for bounds in ({"fail_below": 0.0}, {"fail_above": 0.1, "suspect_below": 0.0}, {"basis": 1.0}):
        with pytest.raises(ValueError, match="not declared"):
            limits.replaced(**bounds)


def test_a_bound_of_zero_is_declared():
    assert Limits(fail_above=0.0).declared() == ("fail_above",)


def test_limits_follow_the_chamber_only_where_it_has_its_own():
    own = check(lambda _subject: single(0.0))
    right = Check(
        name="drawn",
        level=Level.BEAT,
        measure=own.measure,
        unit="1",
        limits=Limits(fail_above=1.0),
        limits_rv=Limits(fail_above=2.0),
        reason="",
        title="Drawn",
    )
    assert [own.limits_for(chamber) for chamber in ("LV", "RV")] == [BOTH_SIDES, BOTH_SIDES]
    assert [right.limits_for(chamber).fail_above for chamber in ("LV", "RV")] == [1.0, 2.0]
