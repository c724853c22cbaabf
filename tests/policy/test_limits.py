"""Limits: three words, counted by study and patient; a looser limit never turns within into outside."""

from __future__ import annotations

import datetime
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from safecheck.documents import from_mapping
from safecheck.errors import DocumentError
from safecheck.measures.catalogue import IMAGE_UNIT, MEASURES
from safecheck.policy.limits import Evidence, check_limits, judge, measure_of, scope_in_words
from safecheck.policy.plan import LimitPlan, Plan
from safecheck.wording import OutcomeWord


def limit(**keys: Any) -> LimitPlan:
    """A limit on RMSE in content, changed as asked."""
    known = {
        "name": "RMSE",
        "measure": "rmse_content",
        "unit": "HU",
        "declared_by": "medical physicist",
        "declared_on": "2026-01-01",
    }
    return from_mapping(LimitPlan, known | keys)


def evidence(values: list[float], studies: str, patients: str) -> Evidence:
    return Evidence(np.array(values), np.array(list(patients)), np.array(list(studies)))


def test_a_study_is_outside_if_any_of_its_values_is() -> None:
    outcome = judge(limit(at_most=5), MEASURES["rmse_content"], evidence([1, 6, 2, 5], "aabb", "ppqq"))
    assert outcome.word is OutcomeWord.OUTSIDE
    assert (outcome.studies, outcome.studies_within) == (2, 1)
    assert (outcome.patients, outcome.patients_within) == (2, 1)
    assert (outcome.values, outcome.values_outside, outcome.worst) == (4, 1, 1)


def test_two_studies_of_one_patient_count_as_one_patient() -> None:
    outcome = judge(limit(at_most=5), MEASURES["rmse_content"], evidence([1, 2], "ab", "pp"))
    assert outcome.word is OutcomeWord.WITHIN
    assert (outcome.studies, outcome.patients) == (2, 1)


def test_a_value_on_the_bound_is_within() -> None:
    assert judge(limit(at_most=5), MEASURES["rmse_content"], evidence([5], "a", "p")).word is OutcomeWord.WITHIN
    floor = limit(measure="ssim", unit="1", at_least=0.9)
    assert judge(floor, MEASURES["ssim"], evidence([0.9], "a", "p")).word is OutcomeWord.WITHIN
    assert judge(floor, MEASURES["ssim"], evidence([0.89], "a", "p")).word is OutcomeWord.OUTSIDE


def test_bias_is_held_by_its_size() -> None:
    outcome = judge(limit(measure="bias_content", at_most=1), MEASURES["bias_content"], evidence([0.5, -3], "ab", "pq"))
    assert outcome.word is OutcomeWord.OUTSIDE
    assert outcome.worst == 1


def test_nothing_to_hold_is_not_evaluated_with_a_reason() -> None:
    none = judge(limit(at_most=5), MEASURES["rmse_content"], evidence([], "", ""))
    assert none.word is OutcomeWord.NOT_EVALUATED
    assert none.reason == "no value in the limit's unit and scope"
    missing = judge(limit(at_most=5), MEASURES["rmse_content"], evidence([float("nan")], "a", "p"))
    assert missing.word is OutcomeWord.NOT_EVALUATED
    assert missing.values_missing == 1


def test_values_that_are_missing_beside_others_are_said() -> None:
    outcome = judge(limit(at_most=5), MEASURES["rmse_content"], evidence([1, float("nan")], "ab", "pq"))
    assert outcome.word is OutcomeWord.WITHIN
    assert outcome.reason == "1 values could not be computed"


@given(
    values=st.lists(st.floats(0, 100, allow_nan=False), min_size=1, max_size=20),
    bound=st.floats(0, 100),
    more=st.floats(0, 50),
)
def test_a_looser_limit_never_turns_within_into_outside(values: list[float], bound: float, more: float) -> None:
    held = evidence(values, "a" * len(values), "p" * len(values))
    tight = judge(limit(at_most=bound), MEASURES["rmse_content"], held)
    loose = judge(limit(at_most=bound + more), MEASURES["rmse_content"], held)
    assert not (tight.word is OutcomeWord.WITHIN and loose.word is OutcomeWord.OUTSIDE)
    assert loose.values_outside <= tight.values_outside


def plan(*limits: LimitPlan) -> Plan:
    return from_mapping(
        Plan,
        {
            "version": 1,
            "change": {
                "title": "t",
                "declared_by": "r",
                "declared_on": datetime.date(2026, 1, 1),
                "compressed_copy": "c",
                "compressed_when": "w",
            },
            "sample": {"drawn": "chosen"},
            "candidates": [{"codec": "jpeg2000", "ratio": 10}],
        },
    ).model_copy(update={"limits": limits})


@pytest.mark.parametrize(
    ("keys", "message"),
    [
        (
            {"measure": "rmse", "at_most": 1},
            r"^limits\[0\]\.measure: no measure is named 'rmse'; expected one of .*rmse",
        ),
        ({"measure": "ssim", "unit": "HU", "at_least": 0.9}, r"^limits\[0\]\.unit: ssim is in '1', found 'HU'"),
        ({"measure": "ssim", "unit": "1", "at_most": 0.9}, r"^limits\[0\]\.at_most: ssim is worse when lower"),
        ({"at_most": -3}, r"^limits\[0\]\.at_most: rmse_content is held by its size"),
        ({"at_least": 1}, r"^limits\[0\]\.at_least: rmse_content is worse when higher"),
        ({"measure": "rmse_over_noise", "unit": "times", "at_most": 1}, r"^limits\[0\]\.measure: no limit can rest on"),
        ({"at_most": 1, "region": "liver"}, r"^limits\[0\]\.region: rmse_content is no measure of a region"),
        ({"at_most": 1, "window": "brain"}, r"^limits\[0\]\.window: rmse_content is no measure at a window"),
    ],
    ids=["measure", "unit", "side of ssim", "below zero", "side of rmse", "alone", "region", "window"],
)
def test_a_limit_that_makes_no_sense_is_named_by_its_path(keys: dict[str, Any], message: str) -> None:
    with pytest.raises(DocumentError, match=message):
        check_limits(plan(limit(**keys)))


def test_every_measure_that_may_carry_a_limit_can_be_declared() -> None:
    for measure in MEASURES.values():
        if measure.limitable:
            side = "at_least" if measure.worse == "lower" else "at_most"
            unit = "HU" if measure.unit == IMAGE_UNIT else measure.unit
            one = limit(measure=measure.name, unit=unit, **{side: 1.0})
            check_limits(plan(one))
            assert measure_of(one) is measure


def test_the_scope_is_said_in_words() -> None:
    scoped = limit(measure="region_rmse", at_most=1, region_role="target", modality="CT", body_part="HEAD")
    assert scope_in_words(scoped) == "every frame, regions of role target, CT, HEAD"
