import numpy as np
import pytest

from unmix.errors import InputError
from unmix.solve.folds import make_plan


def check(plan, n):
    for folds in plan.rounds:
        tested = np.concatenate([test for _, test in folds])
        assert sorted(tested) == list(range(n))
        for train, test in folds:
            assert sorted([*train, *test]) == list(range(n))


@pytest.mark.parametrize(("way", "parts"), [("k-fold", 4), ("leave-one-out", 23), ("blocks", 4)])
def test_every_sample_is_tested_once(way, parts):
    plan = make_plan(23, way, folds=4)
    check(plan, 23)
    assert len(plan.rounds[0]) == parts
    if way != "leave-one-out":
        sizes = [test.size for _, test in plan.rounds[0]]
        assert max(sizes) - min(sizes) <= 1


def test_repeated_parts_differ_and_the_seed_repeats_them():
    plan = make_plan(30, "repeated", folds=5, repeats=3, seed=4)
    check(plan, 30)
    firsts = [tuple(round_[0][1]) for round_ in plan.rounds]
    assert len(set(firsts)) == 3
    again = make_plan(30, "repeated", folds=5, repeats=3, seed=4)
    assert [tuple(round_[0][1]) for round_ in again.rounds] == firsts
    assert "parted 3 times" in plan.words


@pytest.mark.parametrize("way", ["k-fold", "repeated", "leave-one-out"])
def test_groups_stay_together(way, rng):
    groups = rng.integers(0, 9, size=60)
    plan = make_plan(60, way, folds=4, groups=groups)
    check(plan, 60)
    for folds in plan.rounds:
        for train, test in folds:
            assert not set(groups[train]) & set(groups[test])


def test_groups_of_unequal_size_give_parts_of_like_size():
    groups = np.repeat(np.arange(8), [20, 3, 3, 2, 2, 20, 5, 5])
    sizes = [test.size for _, test in make_plan(60, folds=2, groups=groups).rounds[0]]
    assert sizes == [30, 30]


def test_blocks_follow_each_other():
    for _, test in make_plan(20, "blocks", folds=6).rounds[0]:
        assert (np.diff(test) == 1).all()


def test_more_folds_than_samples_leave_one_out():
    assert len(make_plan(6, folds=10).rounds[0]) == 6


@pytest.mark.parametrize(
    ("options", "words"),
    [
        ({"way": "k-folds"}, "did you mean 'k-fold'"),
        ({"folds": 1}, "folds is 1"),
        ({"way": "repeated", "repeats": 0}, "repeats is 0"),
        ({"way": "blocks", "groups": np.arange(10)}, "takes no groups"),
        ({"groups": np.zeros(10, dtype=int)}, "1 groups cannot be parted"),
        ({"way": [(np.arange(5), np.array([4, 5]))]}, "tests samples that it was trained on"),
        ({"way": [(np.arange(5), np.array([10]))]}, "reaches from 10 to 10"),
        ({"way": [(np.arange(5), np.array([0.5]))]}, "is not a list of indices"),
        ({"way": [(np.arange(5), np.array([6])), (np.arange(4), np.array([6]))]}, "sample 7 is tested 2 times"),
        ({"way": []}, "holds no fold"),
        ({"way": [3]}, "fold 1 is not a pair"),
    ],
)
def test_what_cannot_be_parted_is_refused(options, words):
    with pytest.raises(InputError, match=words):
        make_plan(10, **options)
