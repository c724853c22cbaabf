import dataclasses
import heapq
import random

import pytest

from safecheck.codecs.registry import reversible_names
from safecheck.evaluation import Assignment
from safecheck.runner.progress import Pace, weight_of
from tests.runner.studies import ASSIGNMENT, instance, tasks_of


def test_work_is_samples_times_treatments() -> None:
    # Computed from the stated definition: 16 x 16 samples, two candidates, the pipe's control; the only frame of its
    # stratum carries the four full controls as well.
    task = tasks_of([instance("a")])[0]
    # Of the one codec: repeat and over-compressed; each reversible codec; planted.
    controls = 2 + len(reversible_names()) + 1
    assert weight_of(task, ASSIGNMENT) == 256 * (2 + 1 + controls)
    plain = dataclasses.replace(task.frames[0], full_controls=False)
    assert weight_of(dataclasses.replace(task, frames=(plain,)), ASSIGNMENT) == 256 * 3
    delivered = dataclasses.replace(plain, delivered=instance("b"))
    assert weight_of(dataclasses.replace(task, frames=(delivered, plain)), ASSIGNMENT) == 256 * (4 + 3)
    assert weight_of(dataclasses.replace(task, frames=(plain,)), Assignment(ASSIGNMENT.candidates[:1])) == 256 * 2


def test_nothing_is_said_until_a_few_tasks_are_done_and_nothing_remains_at_the_end() -> None:
    pace = Pace(workers=2)
    for _ in range(10):
        pace.expect("CT", 10.0)
    for _ in range(4):
        pace.finish("CT", 10.0, 1.0)
        assert pace.remaining_s is None
    pace.finish("CT", 10.0, 1.0)
    # Computed from the stated definition: 5 tasks of 1 s left, of the two at work half is done, two at once.
    assert pace.remaining_s == pytest.approx((5 - 1) / 2)
    for _ in range(5):
        pace.finish("CT", 10.0, 1.0)
    assert pace.remaining_s == 0.0


def test_a_kind_not_met_yet_is_expected_to_go_at_the_pace_of_the_others() -> None:
    pace = Pace(workers=1)
    for kind in ("CT", "CT", "CT", "CT", "MR", "MR", "MR"):
        pace.expect(kind, 1.0)
    for _ in range(4):
        pace.finish("CT", 1.0, 2.0)
    assert pace.remaining_s == pytest.approx(3 * 2.0 - 1.0)


def simulate(seed: int, workers: int) -> float:
    """Time said to remain after a tenth of a mixed study, over the time that did remain.

    Kinds of images whose time per work differs by a factor of five, in tasks of very different size, in random order;
    the first task of each worker takes two seconds more, for libraries to load.
    """
    chance = random.Random(seed)
    kinds = [("CT", 4.0, 1.0, 300), ("CR", 20.0, 0.4, 60), ("US", 1.0, 2.0, 200)]
    works = [
        (kind, weight, weight * cost * chance.uniform(0.8, 1.25))
        for kind, weight, cost, number in kinds
        for _ in range(number)
    ]
    chance.shuffle(works)
    pace = Pace(workers)
    for kind, weight, _ in works:
        pace.expect(kind, weight)
    now_s = said_s = said_at_s = 0.0
    running = [(took_s + 2, kind, weight, took_s + 2) for kind, weight, took_s in works[:workers]]
    heapq.heapify(running)
    waiting = iter(works[workers:])
    while running:
        now_s, kind, weight, took_s = heapq.heappop(running)
        pace.finish(kind, weight, took_s)
        if pace.finished == len(works) // 10:
            said_s, said_at_s = pace.remaining_s or 0.0, now_s
        if following := next(waiting, None):
            kind, weight, took_s = following
            heapq.heappush(running, (now_s + took_s, kind, weight, took_s))
    return said_s / (now_s - said_at_s)


@pytest.mark.parametrize("workers", [1, 2, 8])
def test_after_a_tenth_of_a_mixed_study_the_time_said_is_within_a_fifth(workers: int) -> None:
    ratios = [simulate(seed, workers) for seed in range(40)]
    assert min(ratios) > 0.8
    assert max(ratios) < 1.2
