"""How values are cut into subgroups, and what each subgroup says."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from portfolio.statistics.subgroups import MINUTE, Series, Subgroups, form, summarise


def cut(
    time: list[int],
    *,
    label: list[int] | None = None,
    start: list[int] | None = None,
    size: list[int] | None = None,
    minutes: list[float] | None = None,
) -> list[list[list[int]]]:
    """Positions of the values of each subgroup of each characteristic."""
    start = [0, len(time)] if start is None else start
    count = len(start) - 1
    groups = form(
        np.array(time, dtype=np.int64),
        np.array([-1] * len(time) if label is None else label, dtype=np.int64),
        np.array(start, dtype=np.int64),
        np.array([0] * count if size is None else size, dtype=np.int64),
        np.array([np.nan] * count if minutes is None else minutes, dtype=np.float64),
    )
    members = [list(range(a, b)) for a, b in zip(groups.start[:-1].tolist(), groups.start[1:].tolist(), strict=True)]
    return [members[a:b] for a, b in zip(groups.of[:-1].tolist(), groups.of[1:].tolist(), strict=True)]


def test_a_new_label_begins_a_new_subgroup_and_a_label_may_come_back_later() -> None:
    assert cut([1, 2, 3, 4, 5], label=[7, 7, 8, 7, 7]) == [[[0, 1], [2], [3, 4]]]


def test_a_value_without_label_among_labelled_ones_stands_alone() -> None:
    assert cut([1, 2, 3, 4, 5], label=[3, 3, -1, -1, 3]) == [[[0, 1], [2], [3], [4]]]


def test_labels_of_the_source_go_before_every_declaration_and_before_equal_times() -> None:
    assert cut([1, 1, 1, 1], label=[0, 0, 0, 1], size=[2], minutes=[60.0]) == [[[0, 1, 2], [3]]]


def test_a_declared_number_of_minutes_is_a_slot_of_the_clock() -> None:
    time = [59 * MINUTE, 60 * MINUTE - 1, 60 * MINUTE, 119 * MINUTE, 300 * MINUTE]
    assert cut(time, minutes=[60.0]) == [[[0, 1], [2, 3], [4]]]


def test_a_slot_of_a_fraction_of_a_minute_starts_exactly_on_its_edge() -> None:
    edges = [k * 6_000_000 for k in range(1, 200)]  # 0.1 minutes, which no binary fraction holds
    assert cut(edges, minutes=[0.1]) == [[[k] for k in range(199)]]


def test_a_declared_number_of_minutes_goes_before_a_declared_size() -> None:
    assert cut([0, 1, 2, 3], minutes=[1.0], size=[2]) == [[[0, 1, 2, 3]]]


def test_a_declared_size_gives_blocks_of_which_the_last_may_be_smaller() -> None:
    assert cut([1, 2, 3, 4, 5, 6, 7], size=[3]) == [[[0, 1, 2], [3, 4, 5], [6]]]


def test_a_declared_size_of_one_keeps_values_apart_that_share_their_time() -> None:
    assert cut([1, 1, 2, 2], size=[1]) == [[[0], [1], [2], [3]]]


def test_values_with_one_time_stamp_belong_together_when_most_share_theirs() -> None:
    assert cut([1, 1, 2, 2, 3]) == [[[0, 1], [2, 3], [4]]]


def test_exactly_half_of_the_values_sharing_their_time_is_not_enough() -> None:
    assert cut([1, 1, 2, 3]) == [[[0], [1], [2], [3]]]


def test_each_characteristic_follows_its_own_rule_and_none_is_joined_with_its_neighbour() -> None:
    found = cut(
        [1, 1, 1, 1, 1, 1, 2, 3, 5, 5],
        label=[4, 4, 4, 4, -1, -1, -1, -1, -1, -1],
        start=[0, 2, 2, 4, 8, 10],
        size=[0, 0, 0, 2, 0],
    )
    assert found == [[[0, 1]], [], [[2, 3]], [[4, 5], [6, 7]], [[8, 9]]]


def test_a_time_shared_only_with_the_neighbour_characteristic_does_not_count_as_shared() -> None:
    assert cut([1, 1, 2, 3, 3], start=[0, 4, 5]) == [[[0], [1], [2], [3]], [[4]]]


def test_nothing_at_all_gives_no_subgroup() -> None:
    assert cut([], start=[0, 0, 0]) == [[], []]
    assert cut([], start=[0]) == []


@st.composite
def stretches(draw: st.DrawFn) -> dict[str, list]:  # type: ignore[type-arg]
    lengths = draw(st.lists(st.integers(0, 12), min_size=1, max_size=5))
    time, label = [], []
    for n in lengths:
        time += sorted(draw(st.lists(st.integers(0, 5), min_size=n, max_size=n)))
        label += (
            draw(st.lists(st.sampled_from([-1, 0, 1]), min_size=n, max_size=n)) if draw(st.booleans()) else [-1] * n
        )
    count = len(lengths)
    return {
        "time": [t * MINUTE for t in time],
        "label": label,
        "start": np.concatenate(([0], np.cumsum(lengths))).tolist(),
        "size": draw(st.lists(st.integers(0, 4), min_size=count, max_size=count)),
        "minutes": draw(st.lists(st.sampled_from([np.nan, 2.0, 3.0]), min_size=count, max_size=count)),
    }


@settings(max_examples=150, deadline=None, derandomize=True)
@given(stretches())
def test_a_characteristic_is_cut_the_same_whoever_its_neighbours_are(stretch: dict[str, list]) -> None:  # type: ignore[type-arg]
    together = cut(**stretch)
    for i, (a, b) in enumerate(zip(stretch["start"][:-1], stretch["start"][1:], strict=True)):
        alone = cut(
            stretch["time"][a:b],
            label=stretch["label"][a:b],
            size=[stretch["size"][i]],
            minutes=[stretch["minutes"][i]],
        )
        assert [[at - a for at in group] for group in together[i]] == alone[0]
        assert [at for group in alone[0] for at in group] == list(range(b - a))  # every value once, in order


def summary(values: list[float], sizes: list[int], of: list[int]) -> Series:
    start = np.concatenate(([0], np.cumsum(sizes)))
    return summarise(np.array(values), np.arange(len(values)) * 10, Subgroups(start, np.array(of)))


def test_each_subgroup_agrees_with_pandas() -> None:
    rng = np.random.default_rng(3)
    sizes = rng.integers(1, 7, 60)
    values = rng.normal(5, 2, sizes.sum())
    series = summary(values.tolist(), sizes.tolist(), [0, 20, 20, 60])
    frame = pd.Series(values).groupby(np.repeat(np.arange(60), sizes))
    assert series.size.tolist() == frame.size().tolist()
    assert series.mean == pytest.approx(frame.mean().to_numpy(), rel=1e-12)
    assert series.sd == pytest.approx(frame.std().to_numpy(), rel=1e-12, nan_ok=True)
    assert series.range == pytest.approx((frame.max() - frame.min()).where(frame.size() > 1).to_numpy(), nan_ok=True)
    assert series.first.tolist() == (10 * np.concatenate(([0], np.cumsum(sizes)[:-1]))).tolist()


def test_individuals_are_those_with_fewer_than_half_of_their_subgroups_of_two_or_more() -> None:
    series = summary([0.0] * 12, [1, 1, 2, 1, 2, 2, 2, 1], [0, 3, 5, 8, 8])
    assert series.individuals.tolist() == [True, False, False, False]
    assert series.median_size.tolist() == pytest.approx([1, 2, 2, np.nan], nan_ok=True)


def test_a_spread_of_digits_far_behind_the_point_is_not_lost() -> None:
    series = summary([1e9 + 0.001, 1e9 + 0.003], [2], [0, 1])
    assert series.sd[0] == pytest.approx(0.001 * np.sqrt(2), rel=1e-3)
