"""Cases of the ledger with its verdict: late trials, amendments, crossings lost, information that shrinks."""

import json
import math
from dataclasses import replace

import numpy as np
import pytest
from scipy.stats import multivariate_normal, norm, t

from treering.errors import AmendmentError, AnalysisError
from treering.monitoring.ledger import holds_new_data, ledger_state, next_look
from treering.monitoring.look import Look
from treering.monitoring.plan import MonitoringPlan

BENEFIT, HARM = "benefit boundary crossed", "harm boundary crossed"
LOST, CANNOT = "crossing no longer supported", "cannot be judged at this look"
REACHED = "required information reached without a crossing"


def test_bounds_at_five_equal_looks_are_the_printed_ones(review):
    # DeMets and Lan 1994, Stat Med 13:1341 (from memory): 4.877, 3.357, 2.680, 2.290, 2.031.
    r = review()
    for number in range(5):
        r.add(f"T{number}", 0.2, 0.5)
    assert [look.boundary for look in r.looks] == pytest.approx([4.877, 3.357, 2.680, 2.290, 2.031], abs=6e-4)
    assert [look.fraction for look in r.looks] == pytest.approx([0.2, 0.4, 0.6, 0.8, 1.0])
    assert r.looks[-1].alpha_spent == pytest.approx(0.05)
    assert [str(look.verdict) for look in r.looks] == ["accruing"] * 4 + [REACHED]


def test_a_positive_z_is_a_benefit_when_higher_is_better_and_a_harm_when_lower_is(review):
    assert review().add("A", 0.5, 3.0).verdict == BENEFIT
    assert review().add("A", 0.5, -3.0).verdict == HARM
    assert review(better="lower").add("A", 0.5, 3.0).verdict == HARM
    assert review(role="harm", better="lower").add("A", 0.5, 3.0).verdict == HARM


def test_one_sided_plans_cross_in_the_tested_direction_only(review):
    assert review(sides=1).add("A", 0.5, 3.0).verdict == BENEFIT
    assert review(sides=1).add("A", 0.5, -6.0).verdict == "accruing"
    assert review(sides=1, role="harm", better="lower").add("A", 0.5, 3.0).verdict == HARM
    assert review(sides=1, role="harm", better="lower").add("A", 0.5, -6.0).verdict == "accruing"


def test_z_is_the_normal_quantile_of_the_planned_t_test():
    # Modified Knapp-Hartung by hand for equal variances: DerSimonian-Laird and REML agree there, and the
    # test is the one-sample t test when the estimates spread more than their variances (Hartung 1999).
    y, v = np.array([0.9, 0.1, 0.5, 0.7]), np.full(4, 0.001)
    plan = MonitoringPlan(effect=0.3, better="higher")
    look = next_look(plan, [], date="2031-01-01", version=1, trials="ABCD", estimates=y, variances=v)
    statistic = y.mean() / (y.std(ddof=1) / 2.0)
    assert look.z == pytest.approx(norm.isf(t.sf(statistic, 3)), rel=1e-6)
    assert look.information == pytest.approx(4000.0)


def test_the_repeated_interval_excludes_no_effect_exactly_when_the_boundary_is_crossed():
    y, v = np.array([0.9, 0.3, 0.5, 0.7]), np.full(4, 0.15)
    for shift in np.linspace(-0.6, 2.5, 12):
        plan = MonitoringPlan(effect=0.6, better="higher")
        look = next_look(
            plan, [], date="2031-01-01", version=1, trials="ABCD", estimates=y + shift, variances=v
        )
        assert (look.adjusted_low > 0 or look.adjusted_high < 0) == (abs(look.z) >= look.boundary)


def test_h13_an_older_trial_found_late_enters_at_the_look_when_it_was_verified(review):
    r = review()
    first = r.add("published 2029", 0.3, 1.0)
    second = r.add("published 2021, found late", 0.3, 1.5)
    assert (second.number, second.fraction) == (2, pytest.approx(0.6))
    assert r.looks[0] == first, "the ledger is not rewritten"


def test_h14_a_changed_plan_needs_an_amendment(review):
    r = review()
    r.add("A", 0.4, 1.0)
    r.plan = MonitoringPlan(effect=0.25, better="higher", model="common")
    with pytest.raises(AmendmentError, match="no amendment"):
        r.look()


def test_h14_an_amendment_closes_the_ledger_and_carries_the_spent_alpha_over(review):
    r = review(spending="pocock")
    old = r.add("A", 0.4, 1.0)
    r.plan = MonitoringPlan(effect=0.25, better="higher", model="common", spending="pocock")
    r.trials["B"] = (0.5, 1.0)
    new = r.look(amendment="amendment 1")
    assert new.alpha_spent > old.alpha_spent
    assert ledger_state(r.plan, r.looks).carried == old.alpha_spent
    # The new ledger spends Lan and DeMets' second function of what is left (Bonferroni).
    left = 0.05 - old.alpha_spent
    expected = old.alpha_spent + 2 * left / 2 * math.log(1 + (math.e - 1) * new.fraction)
    assert new.alpha_spent == pytest.approx(expected, rel=1e-9)
    assert any("amendment 1" in remark for remark in new.remarks)


def test_h14_an_amendment_without_new_data_spends_nothing(review):
    r = review()
    old = r.add("A", 0.5, 2.9)
    r.plan = MonitoringPlan(effect=0.5, better="higher", model="common")
    r.trials["A"] = (0.5 * (0.5 / 0.3) ** 2, r.trials["A"][1])  # the same trial, as a share of less
    new = r.look(amendment="amendment 1")
    assert new.fraction > 1.0
    assert (new.spends, new.alpha_spent, new.verdict) == (False, old.alpha_spent, CANNOT)


def test_h14_a_crossing_is_compared_with_the_boundary_of_the_amended_plan(review):
    r = review()
    assert r.add("A", 0.6, 2.75).verdict == BENEFIT
    r.plan = MonitoringPlan(effect=0.3, better="higher", model="common", diversity=0.5)
    r.trials["A"] = (0.3, r.trials["A"][1])
    assert r.look(amendment="amendment 1").verdict == LOST


@pytest.mark.parametrize(("z", "verdict"), [(2.7, BENEFIT), (2.5, BENEFIT), (2.0, LOST)])
def test_h15_a_crossing_fades_when_late_trials_bring_z_below_the_boundary(review, z, verdict):
    r = review()
    assert r.add("A", 0.6, 2.8).verdict == BENEFIT
    assert r.add("late", 0.2, z).verdict == verdict


def test_h15_retraction_of_the_carrying_trial_undoes_the_crossing(review):
    r = review()
    r.add("A", 0.3, 1.0)
    crossed = r.add("B", 0.3, 3.0)
    lost = r.remove("B")
    assert (crossed.verdict, lost.verdict) == (BENEFIT, LOST)
    assert (lost.spends, lost.boundary) == (False, None)
    assert lost.redrawn_boundary == pytest.approx(r.looks[0].boundary)


def test_h15_a_lost_crossing_crosses_again_once_the_highest_fraction_is_passed(review):
    r = review()
    r.add("A", 0.3, 1.0)
    crossed = r.add("B", 0.3, 3.0)
    r.remove("B")
    short = r.add("C", 0.25, 4.5)
    again = r.add("D", 0.25, 4.0)
    assert (short.fraction, short.spends, short.verdict) == (pytest.approx(0.55), False, LOST)
    assert abs(short.z) > short.redrawn_boundary, "beyond the redrawn boundary, and yet not a crossing"
    assert any("0.6" in remark for remark in short.remarks)
    assert (again.fraction, again.spends, again.verdict) == (pytest.approx(0.8), True, BENEFIT)
    assert again.alpha_spent > crossed.alpha_spent
    assert any("Crossed again" in remark for remark in again.remarks)


def test_h15_the_bound_after_a_retraction_has_the_earlier_bounds_as_they_were_used(review):
    r = review()
    r.add("A", 0.3, 1.0)
    r.add("B", 0.3, 3.0)
    r.remove("B")
    again = r.add("C", 0.5, 2.0)
    t = np.array([0.3, 0.6, 0.8])
    correlation = np.sqrt(np.minimum.outer(t, t) / np.maximum.outer(t, t))
    bounds = [r.looks[0].boundary, r.looks[1].boundary, again.boundary]
    inside = multivariate_normal(cov=correlation, abseps=1e-6, releps=1e-6, seed=1)
    chance = 1 - inside.cdf(bounds, lower_limit=-np.array(bounds))
    assert chance == pytest.approx(again.alpha_spent, abs=1e-5)


def test_h15_a_correction_that_leaves_the_information_as_it_was_spends_nothing(review):
    r = review()
    r.add("A", 0.6, 2.8)
    r.trials["A"] = (0.6, 2.75)
    kept = r.look()
    r.trials["A"] = (0.6, 1.0)
    lost = r.look()
    assert (kept.spends, kept.verdict) == (False, BENEFIT)
    assert "still supported" in kept.remarks[0]
    assert (lost.spends, lost.verdict) == (False, LOST)


def test_h16_alpha_is_never_refunded(review):
    r = review()
    r.add("A", 0.3, 1.0)
    r.add("B", 0.3, 1.0)
    r.remove("B")
    r.add("C", 0.2, 1.0)
    r.plan = MonitoringPlan(effect=0.3, better="higher", model="common", diversity=0.1)
    r.trials = {name: (0.9 * share, z) for name, (share, z) in r.trials.items()}  # the same information
    r.look(amendment="amendment 1")
    spent = [look.alpha_spent for look in r.looks]
    assert spent[0] < spent[1] == spent[2] == spent[3] == spent[4]


def test_h16_a_restart_with_all_alpha_gone_judges_nothing(review):
    r = review()
    r.add("A", 1.1, 1.0)
    r.plan = MonitoringPlan(effect=0.1, better="higher", model="common")
    r.trials["B"] = (0.2, 9.0)
    look = r.look(amendment="amendment 1")
    assert (look.spends, look.boundary, look.verdict) == (False, None, CANNOT)
    assert any("new protocol" in remark for remark in look.remarks)


def test_h16_every_seen_analysis_before_a_release_counts(review):
    seen = review(spending="pocock")
    for number in range(3):
        seen.add(f"T{number}", 0.2, 1.0)
    once = review(spending="pocock", trials=dict(list(seen.trials.items())[:2]))
    single = once.add("T2", 0.2, 1.0)
    assert seen.looks[-1].alpha_spent == pytest.approx(single.alpha_spent)
    assert seen.looks[-1].boundary > single.boundary, "three looks have used the alpha that one would"


def test_h17_shrunken_information_cannot_be_judged_before_a_crossing(review):
    r = review()
    r.add("A", 0.4, 1.0)
    r.add("B", 0.3, 1.5)
    look = r.remove("A")
    assert (look.verdict, look.spends) == (CANNOT, False)
    assert look.alpha_spent == r.looks[1].alpha_spent


def test_h17_a_crossing_that_the_redrawn_boundary_supports_stays_a_crossing(review):
    r = review()
    r.add("small", 0.1, 0.0)
    r.add("B", 0.6, 4.5)
    look = r.remove("small")
    assert (look.verdict, look.spends) == (BENEFIT, False)
    assert look.adjusted_low > 0


def test_h17_information_that_grows_but_not_above_the_highest_fraction_spends_nothing(review):
    r = review()
    r.add("A", 0.3, 0.5)
    r.add("B", 0.4, 1.0)
    r.remove("B")
    look = r.add("C", 0.3, 1.0)
    assert (look.fraction, look.verdict) == (pytest.approx(0.6), CANNOT)
    assert r.add("D", 0.15, 1.0).verdict == "accruing"


def test_h17_redrawn_boundary_of_the_worked_example():
    # Computed apart from this code when the project was planned: 3877 people required; at 1000, 2000 and
    # 3000 the last boundary is 2.32; at 3300 with D2 0.5 the redrawn boundary of a curve with the same four
    # looks is 3.29 (per-tail convention). People stand for information.
    from treering.monitoring.redrawn import fresh_values

    plan = MonitoringPlan(effect=0.3)
    looks = np.array([1000.0, 2000.0, 3000.0, 3300.0])
    assert fresh_values(plan, list(looks[:3]), 3876.9)[-1] == pytest.approx(2.32, abs=0.006)
    assert fresh_values(plan, list(looks), 2 * 3876.9)[-1] == pytest.approx(3.29, abs=0.006)


def test_h22_a_quiet_week_is_no_look(review):
    r = review()
    r.add("A", 0.4, 1.0)
    with pytest.raises(AnalysisError, match="no look"):
        r.look()
    with pytest.raises(AnalysisError, match="no look"):
        r.look(version=7, date="2031-06-01")


def test_h22_what_is_new_does_not_hang_on_the_order_of_the_trials_or_the_last_digits():
    plan = MonitoringPlan(effect=0.3, better="higher")
    y, v = np.array([0.2, 0.3, 0.5]), np.array([0.04, 0.05, 0.03])
    data = {"trials": "ABC", "estimates": y, "variances": v}
    assert holds_new_data(plan, [], **data)
    assert not holds_new_data(plan, [], trials=[])
    look = next_look(plan, [], date="2031-01-01", version=1, **data)
    turned = {"trials": "CBA", "estimates": y[::-1] * (1 + 1e-12), "variances": v[::-1]}
    assert not holds_new_data(plan, [look], **turned)
    assert holds_new_data(plan, [look], trials="ABC", estimates=y + 0.001 * np.eye(3)[2], variances=v)
    assert holds_new_data(plan, [look], trials="ABD", estimates=y, variances=v)


def test_h22_a_look_stored_with_ten_digits_is_not_new_however_precise_its_estimate():
    plan = MonitoringPlan(effect=0.3, better="higher")
    data = {"trials": "AB", "estimates": [98.7654321987, 98.7654329876], "variances": [1e-6, 1e-6]}
    look = next_look(plan, [], date="2031-01-01", version=1, **data)
    stored = replace(look, estimate=float(f"{look.estimate:.9e}"))
    assert abs(stored.estimate - look.estimate) > 1e-8 * look.standard_error
    assert not holds_new_data(plan, [stored], **data)


def test_past_the_required_information_all_alpha_is_spent_once(review):
    r = review()
    r.add("A", 0.5, 1.0)
    last = r.add("B", 0.6, 1.5)
    later = r.add("C", 0.2, 5.0)
    assert (last.alpha_spent, last.verdict) == (pytest.approx(0.05), REACHED)
    assert last.adjusted_low < 0 < last.adjusted_high
    assert (later.boundary, later.spends, later.verdict) == (None, False, REACHED)
    assert (later.redrawn_boundary, later.adjusted_low) == (None, None)
    assert later.mixture_low > 0, "the anytime-valid interval goes on"


def test_past_the_required_information_a_crossing_is_held_against_the_redrawn_boundary(review):
    r = review()
    r.add("A", 0.5, 1.0)
    assert r.add("B", 0.6, 2.5).verdict == BENEFIT
    assert r.add("C", 0.2, 2.2).verdict == BENEFIT
    assert r.add("D", 0.2, 1.5).verdict == LOST
    assert r.add("E", 0.2, 3.0).verdict == LOST, "no alpha is left to cross again"


def test_a_removal_after_the_last_look_cannot_be_judged(review):
    r = review()
    r.add("A", 0.5, 1.0)
    r.add("B", 0.6, 1.5)
    assert r.remove("B").verdict == CANNOT


def test_a_crossing_to_the_other_side_says_that_the_first_is_gone(review):
    r = review()
    r.add("A", 0.5, 3.0)
    look = r.add("B", 0.5, -2.5)
    assert look.verdict == HARM
    assert "no longer supported" in look.remarks[0]


def test_h23_a_recomputation_after_a_defect_of_the_tool_is_judged_like_a_correction(review):
    # The same trials give other numbers: the earlier row stays, no alpha comes back, and a crossing that
    # the right numbers do not support is lost.
    r = review()
    wrong = r.add("A", 0.6, 2.8)
    r.trials["A"] = (0.55, 1.9)
    right = r.look()
    assert r.looks[0] == wrong
    assert (right.spends, right.alpha_spent, right.verdict) == (False, wrong.alpha_spent, LOST)


def test_a_sum_that_meets_the_required_information_up_to_rounding_has_met_it(review):
    r = review()
    r.add("A", 0.7, 1.0)
    look = r.add("B", 0.3 - 1e-12, 1.0)
    assert (look.fraction, look.alpha_spent, look.verdict) == (1.0, pytest.approx(0.05), REACHED)


def test_equal_estimates_have_no_plain_knapp_hartung_test():
    plan = MonitoringPlan(effect=0.3, better="higher", interval="knapp-hartung")
    data = {"trials": "AB", "estimates": [0.5, 0.5], "variances": [0.01, 0.01]}
    look = next_look(plan, [], date="2031-01-01", version=1, **data)
    assert (look.z, look.mixture_low, look.spends, look.verdict) == (None, None, False, CANNOT)
    assert json.dumps(look.to_dict(), allow_nan=False)


def test_no_usable_trial_cannot_be_judged(review):
    look = review().look()
    assert (look.estimate, look.z, look.information, look.verdict) == (None, None, 0.0, CANNOT)


def test_removing_every_trial_leaves_nothing_that_supports_a_crossing(review):
    r = review()
    r.add("A", 0.6, 3.0)
    assert r.remove("A").verdict == LOST


def test_one_trial_waits_for_a_second_when_the_plan_is_knapp_hartung():
    plan = MonitoringPlan(effect=0.3, better="higher")
    look = next_look(plan, [], date="2031-01-01", version=1, trials=["A"], estimates=[1.0], variances=[0.01])
    assert (look.z, look.spends, look.alpha_spent, look.verdict) == (None, False, 0.0, CANNOT)
    assert look.estimate == 1.0
    wald = MonitoringPlan(effect=0.3, better="higher", interval="wald")
    look = next_look(wald, [], date="2031-01-01", version=1, trials=["A"], estimates=[1.0], variances=[0.01])
    assert (look.z, look.spends) == (pytest.approx(10.0), True)


def test_diversity_re_estimated_stands_beside_and_rules_nothing():
    plan = MonitoringPlan(effect=0.3, better="higher", diversity=0.2)
    look = next_look(
        plan,
        [],
        date="2031-01-01",
        version=1,
        trials="ABC",
        estimates=[0.1, 0.9, -0.5],
        variances=[0.02, 0.03, 0.04],
    )
    base = plan.required_information * 0.8
    assert look.diversity_reestimated > 0.5
    assert look.required_reestimated == pytest.approx(base / (1 - look.diversity_reestimated))
    assert look.fraction == pytest.approx(look.information / plan.required_information)


def test_futility_is_non_binding_and_can_be_lost(review):
    r = review(futility=True, power=0.9)
    first = r.add("A", 0.6, 0.05)
    second = r.add("B", 0.2, 1.9)
    assert first.verdict == "futility boundary crossed"
    assert first.required_inflated > first.required
    assert second.verdict == LOST
    assert r.add("C", 0.2, 2.5).verdict == BENEFIT


def test_a_look_survives_plain_json(review):
    r = review()
    r.add("A", 0.5, 3.0)
    look = r.add("B", 0.1, 2.0)
    assert Look.from_dict(json.loads(json.dumps(look.to_dict(), allow_nan=False))) == look


def test_a_damaged_stored_look_is_refused(review):
    values = review().add("A", 0.5, 3.0).to_dict()
    del values["alpha_spent"]
    with pytest.raises(AnalysisError, match="fields of a look"):
        Look.from_dict(values)


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"date": "2030-12-31"}, "before one that has happened"),
        ({"date": "yesterday"}, "not a day"),
        ({"version": 0}, "before one that has happened"),
        ({"trials": ["A", "A"]}, "twice"),
        ({"estimates": [1.0]}, "differ in number"),
        ({"variances": [1.0, 0.0]}, "cannot be used"),
        ({"estimates": [1.0, float("nan")]}, "cannot be used"),
    ],
)
def test_bad_looks_are_refused(review, change, message):
    r = review()
    first = r.add("A", 0.5, 1.0)
    given = {
        "date": "2031-02-01",
        "version": 2,
        "trials": ["A", "B"],
        "estimates": [0.1, 0.2],
        "variances": [1.0, 1.0],
    }
    with pytest.raises(AnalysisError, match=message):
        next_look(r.plan, [first], **(given | change))
