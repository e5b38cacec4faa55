"""Linear programmes in whole steps, against every combination; how steps are counted."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from solver.linear import Polytope, Steps, Stopwatch, Whole, solve

STEP = np.array([0.1, 0.25, 0.0, 0.3])


def test_whole_steps_are_counted_in_spite_of_rounding() -> None:
    steps = Steps(STEP, np.zeros(4))
    x = np.array([3 * 0.1, 0.5, 0.777, 0.59])
    assert steps.floor(x) == pytest.approx([0.3, 0.5, 0.777, 0.3])
    assert steps.ceil(x) == pytest.approx([0.3, 0.5, 0.777, 0.6])
    assert steps.nearest(x) == pytest.approx([0.3, 0.5, 0.777, 0.6])
    assert not steps.kept_by(x)
    assert steps.kept_by(steps.nearest(x))


def test_the_least_amount_is_part_of_the_steps() -> None:
    steps = Steps(STEP, np.array([0.0, 0.5, 0.2, 0.0]))
    assert steps.kept_by(np.array([0.1, 0.5, 0.2, 0.0]))
    assert steps.kept_by(np.array([0.1, 0.0, 0.0, 0.3]))
    assert not steps.kept_by(np.array([0.1, 0.25, 0.2, 0.0]))
    assert not steps.kept_by(np.array([0.1, 0.5, 0.1, 0.0]))


def problem(k: int) -> tuple[Polytope, np.ndarray]:
    """Seeded case k: four stocks in steps, two rows, a total that may vary, whole-number rules in some; its costs."""
    rng = np.random.default_rng([12, k])
    step = rng.choice([0.02, 0.05, 0.15], 4)
    rows = rng.uniform(-1.0, 1.0, (2, 4))
    rows[:, 0] -= 0.4
    whole = Whole(np.array([True, True, True, False]), int(rng.integers(1, 3)),
                  np.where(rng.random(4) < 0.5, 0.12, 0.0)) if rng.random() < 0.6 else None
    steps = Steps(step, np.where(rng.random(4) < 0.4, 0.3, 0.0))
    task = Polytope(rows[:1], np.zeros(1), np.zeros(4), rng.uniform(0.3, 1.0, 4), whole=whole, steps=steps,
                    slack=float(rng.choice([0.0, 0.005, 0.03])))
    room = [float(rng.choice([-0.05, 0.0, 0.1]))]
    return task.with_rows([rows[1]], hold=0.0, room=room), rng.uniform(1.0, 3.0, 4)


def every(task: Polytope) -> np.ndarray:
    """All x that a problem in steps allows, shape (k, n)."""
    assert task.steps is not None
    axes = [np.arange(0.0, np.floor(hi / d + 1e-9) + 1.0) * d for hi, d in zip(task.hi, task.steps.step, strict=True)]
    x = np.stack([g.ravel() for g in np.meshgrid(*axes, indexing="ij")], 1)
    total = x.sum(1)
    kept = (np.abs(total - 1.0) <= task.slack + 1e-12) & np.all(x @ task.rows.T <= task.limits + 1e-12, axis=1)
    kept &= np.all((x <= 0.0) | (x >= task.steps.least - 1e-12), axis=1)
    if task.whole is not None:
        kept &= (x[:, task.whole.counted] > 0.0).sum(1) <= (task.whole.most or 9)
        share = x / np.maximum(total, 1e-12)[:, None]
        kept &= np.all((x <= 0.0) | (share >= task.whole.least - 1e-12) | ~task.whole.counted, axis=1)
    return x[kept]


@pytest.mark.parametrize("k", range(60))
def test_as_low_as_the_lowest_of_every_combination(k: int) -> None:
    task, c = problem(k)
    solved, all_of_them = solve(task, c, Stopwatch(60.0)), every(task)
    if not len(all_of_them):
        assert solved.status == "infeasible"
        return
    least = float((all_of_them @ c).min())
    assert solved.status == "optimal"
    assert solved.x is not None
    assert solved.value == pytest.approx(least, abs=2e-6)  # HiGHS proves to 1e-6 of a cost of about 4
    assert solved.bound <= least + 1e-9
    assert float(np.abs(all_of_them - solved.x).max(1).min()) < 1e-9  # it is one of them


def test_the_cases_try_what_they_should() -> None:
    cases = [problem(k)[0] for k in range(60)]
    found = [len(every(task)) for task in cases]
    assert 5 <= found.count(0) <= 40
    assert {task.slack for task in cases} == {0.0, 0.005, 0.03}
    assert any(task.whole is not None and n for task, n in zip(cases, found, strict=True))


def test_room_belongs_to_the_row_as_it_was_given() -> None:
    plain = Polytope(np.zeros((1, 2)), np.full(1, 1e-10), np.zeros(2), np.ones(2))
    task = plain.with_rows([np.array([4.0, -2.0])], hold=0.0, room=[0.4]).held(1e-7)
    assert task.limits == pytest.approx([-1e-7, 0.1])
    solved = solve(task, np.array([-1.0, 0.0]), Stopwatch(10.0))
    assert solved.x == pytest.approx([0.4, 0.6])  # 4·0.4 − 2·0.6 = 0.4
    assert solved.bound <= -0.4 + 1e-9


def test_a_stock_of_any_amount_fills_up_between_steps() -> None:
    task = Polytope(np.zeros((0, 2)), np.zeros(0), np.zeros(2), np.ones(2),
                    steps=Steps(np.array([0.3, 0.0]), np.array([0.0, 0.15])))
    solved = solve(task, np.array([1.0, 2.0]), Stopwatch(10.0))
    assert solved.x == pytest.approx([0.6, 0.4])  # 0.9 would leave 0.1, less than the least amount


def test_a_trial_answers_and_never_claims_that_time_ran_out() -> None:
    for k in range(10):
        task, c = problem(k)
        full, trial = solve(task, c, Stopwatch(60.0)), solve(replace(task, trial=True), c, Stopwatch(60.0))
        assert trial.status in ("optimal", "infeasible")
        if trial.x is not None:
            assert trial.value >= full.value - 2e-6


def test_a_stock_whose_tank_holds_less_than_the_least_share_does_not_pass_for_a_known_answer() -> None:
    # Of the cheapest there is 20 % and 30 % is the least: raised to that it would cost 0.7 and shut out the third.
    shares = Polytope(np.zeros((0, 3)), np.zeros(0), np.zeros(3), np.array([0.2, 0.8, 1.0]),
                      whole=Whole(np.ones(3, dtype=np.bool_), None, np.full(3, 0.3)))
    solved = solve(shares, np.array([0.0, 1.0, 1.05]), Stopwatch(5.0))
    assert solved.status == "optimal"
    assert solved.x == pytest.approx([0.0, 0.7, 0.3])
