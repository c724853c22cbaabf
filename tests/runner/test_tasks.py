import dataclasses
import random

import pytest

from safecheck.runner.manifest import describe
from safecheck.runner.tasks import TASK_FRAMES, Task, plan_tasks
from tests.runner.studies import ASSIGNMENT, KEY, instance, manifest_of, study, tasks_of


def plan(share_percent: float, seed: int = 1, key: bytes = KEY) -> tuple[Task, ...]:
    instances = study()
    return plan_tasks(
        instances, {}, manifest_of(instances), key, assignment=ASSIGNMENT, share_percent=share_percent, seed=seed
    )


def full(tasks: tuple[Task, ...]) -> set[tuple[str, int]]:
    return {(each.instance.input, each.number) for task in tasks for each in task.frames if each.full_controls}


def test_every_frame_stands_in_one_task_and_no_more() -> None:
    instances = study()
    found = [(each.instance.input, each.number) for task in tasks_of(instances) for each in task.frames]
    expected = {(each.input, number) for each in instances for number in range(1, each.frames + 1)}
    assert len(found) == len(expected) == 50
    assert set(found) == expected


@pytest.mark.parametrize("seed", range(5))
def test_tasks_do_not_depend_on_the_order_of_inputs_or_on_where_they_lie(seed: int) -> None:
    moved = [dataclasses.replace(each, source=instance("x", folder="elsewhere").source) for each in study()]
    random.Random(seed).shuffle(moved)
    names = [task.name for task in tasks_of(moved)]
    assert names == [task.name for task in tasks_of(study())]


def test_rows_follow_series_then_instance_number_then_frame() -> None:
    instances = [instance(f"{n}", number=n) for n in (10, 2, 1)] + [instance("m", frames=3, series="R-0")]
    found = [(each.instance.instance_number, each.number) for task in tasks_of(instances) for each in task.frames]
    assert found == [(1, 1), (1, 2), (1, 3), (1, 1), (2, 1), (10, 1)]


def test_a_task_holds_frames_of_one_series_and_not_too_many() -> None:
    instances = [instance("long", frames=3000, series="R-a"), instance("b", series="R-b")]
    tasks = tasks_of(instances)
    assert max(len(task.frames) for task in tasks) == TASK_FRAMES
    assert all(len({each.instance.series for each in task.frames}) == 1 for task in tasks)


def test_large_frames_stand_alone_and_small_runs_are_cut_fine() -> None:
    large = [instance(f"{n}", number=n, size=(2500, 2000)) for n in range(40)]
    assert {len(task.frames) for task in tasks_of(large)} == {1}
    assert len(tasks_of([instance("cine", frames=300)])) >= 64


@pytest.mark.parametrize(
    "change",
    [
        pytest.param({"plan_hash": "q" * 64}, id="plan"),
        pytest.param({"versions": {"safecheck": "0.2"}}, id="version"),
    ],
)
def test_another_run_gives_its_tasks_other_names(change: dict[str, object]) -> None:
    instances = study()
    others = plan_tasks(
        instances, {}, manifest_of(instances, **change), KEY, assignment=ASSIGNMENT, share_percent=5.0, seed=1
    )
    assert not {task.name for task in others} & {task.name for task in tasks_of(instances)}


def test_names_depend_on_the_key_the_assignment_and_the_delivered_copies() -> None:
    instances = [instance("a")]
    names = {task.name for task in tasks_of(instances)}
    pairs = {"F-a": instance("returned")}
    names |= {
        task.name
        for task in plan_tasks(
            instances, pairs, manifest_of(instances), KEY, assignment=ASSIGNMENT, share_percent=5.0, seed=1
        )
    }
    names |= {
        task.name
        for task in plan_tasks(
            instances, {}, manifest_of(instances), bytes(32), assignment=ASSIGNMENT, share_percent=5.0, seed=1
        )
    }
    fewer = dataclasses.replace(ASSIGNMENT, candidates=ASSIGNMENT.candidates[:1])
    manifest = describe(instances, {}, fewer, plan_hash="p" * 64, key=KEY, key_id="K-1", versions={"safecheck": "0.1"})
    names |= {
        task.name for task in plan_tasks(instances, {}, manifest, KEY, assignment=ASSIGNMENT, share_percent=5.0, seed=1)
    }
    assert len(names) == 4


@pytest.mark.parametrize(
    ("share_percent", "expected"),
    [
        # Strata of the study: 20 MR, 10 CT and 20 US frames; the share of each rounded up, and at least one.
        pytest.param(0.0, 3, id="none asked, one each"),
        pytest.param(5.0, 3, id="5 percent"),
        pytest.param(10.0, 5, id="10 percent"),
        pytest.param(11.0, 8, id="rounded up"),
        pytest.param(100.0, 50, id="all"),
    ],
)
def test_full_controls_fall_on_the_share_of_each_stratum(share_percent: float, expected: int) -> None:
    assert len(full(plan(share_percent))) == expected


def test_another_seed_or_key_chooses_other_frames_and_a_larger_share_keeps_those_chosen() -> None:
    assert full(plan(20.0, seed=2)) != full(plan(20.0))
    assert full(plan(20.0, key=bytes(32))) != full(plan(20.0))
    assert full(plan(20.0)) < full(plan(50.0))


def test_an_input_handed_in_twice_is_refused() -> None:
    with pytest.raises(ValueError, match="share an input pseudonym"):
        tasks_of([instance("a"), instance("a", series="R-2")])
