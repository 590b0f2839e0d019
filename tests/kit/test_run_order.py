"""The run order: batches keep what belongs together, respect the limits, and repeat anchors and calibration."""

from __future__ import annotations

from collections import Counter, defaultdict
from dataclasses import replace

import pytest
from kit_cases import small_campaign

from rcbench.device import Limits
from rcbench.errors import InputError
from rcbench.kit import plan_kit
from rcbench.kit.order import Entry, arrange
from rcbench.protocol.expansion import Slot
from rcbench.protocol.language import Measure, Role


def with_capacity(campaign, capacity):
    return replace(campaign, device=replace(campaign.device, limits=Limits(circuits_per_job=capacity)))


def batches_of(plan):
    found = defaultdict(list)
    for run in plan.runs:
        found[run.batch].append(run)
    return found


def test_without_a_limit_there_is_one_batch_and_nothing_is_repeated(tmp_path):
    plan = plan_kit(small_campaign(tmp_path))
    assert {run.batch for run in plan.runs} == {0}
    assert not any(run.anchor for run in plan.runs)
    assert len({plan.circuit_id(run) for run in plan.runs}) == len(plan.runs) == 67


@pytest.mark.parametrize("capacity", [30, 40, 67, 500])
def test_an_instance_with_its_roles_depths_and_controls_stays_in_one_batch(tmp_path, capacity):
    plan = plan_kit(with_capacity(small_campaign(tmp_path), capacity))
    assert max(Counter(run.batch for run in plan.runs).values()) <= capacity
    where = defaultdict(set)
    for run in plan.runs:
        if not run.anchor:
            where[run.slot.instance, run.repeat].add(run.batch)
    assert all(len(found) == 1 for found in where.values())
    assert len({plan.circuit_id(run) for run in plan.runs}) == len(plan.runs)


def test_each_batch_holds_the_anchors_once_and_at_most_a_tenth_of_it(tmp_path):
    plan = plan_kit(with_capacity(small_campaign(tmp_path), 30))
    batches = batches_of(plan)
    assert len(batches) > 2
    for runs in batches.values():
        anchors = [run for run in runs if (run.slot.instance, run.slot.depth, run.slot.number) == (0, 0, 0)]
        by_experiment = Counter(
            run.experiment for run in anchors if run.slot.role.name in ("sample", "echo", "reference")
        )
        assert set(by_experiment) >= {0, 1, 2}
        assert sum(run.anchor for run in runs) <= 3
    anchor_repeats = sorted(run.repeat for run in plan.runs if run.experiment == 1 and run.anchor)
    assert anchor_repeats == list(range(2, 2 + len(batches) - 1))  # after the two repeats that the campaign asks for
    assert all((run.repeat >= (2 if run.experiment == 1 else 1)) == run.anchor for run in plan.runs)


def test_small_batches_have_no_anchors_and_cut_an_instance_between_depths(tmp_path):
    plan = plan_kit(with_capacity(small_campaign(tmp_path), 8))
    batches = batches_of(plan)
    assert all(len(runs) <= 8 for runs in batches.values())
    assert not any(run.anchor for run in plan.runs)
    where = defaultdict(set)
    for run in plan.runs:
        where[run.slot.instance, run.repeat, run.slot.depth].add(run.batch)
    assert all(len(found) == 1 for found in where.values())  # at most six runs of an instance share a depth


def test_the_order_is_random_but_the_campaign_fixes_it(tmp_path):
    campaign = small_campaign(tmp_path)
    one, two = plan_kit(campaign), plan_kit(campaign)
    names = [one.circuit_id(run) for run in one.runs]
    assert names == [two.circuit_id(run) for run in two.runs]
    assert names != sorted(names)
    other = plan_kit(replace(campaign, seed=campaign.seed + 1))
    assert names != [other.circuit_id(run) for run in other.runs]


def test_circuits_for_every_batch_are_in_every_batch_under_names_of_their_own(tmp_path):
    campaign = with_capacity(small_campaign(tmp_path), 10)
    measure = (Measure(("system",)),)
    calibration = Role(name="calibration", steps=measure, every_batch=True)
    sample = Role(name="sample", steps=measure)
    entries = [Entry(0, Slot(calibration, 0, 0, number, {"state": number}), 0) for number in (0, 1)]
    entries += [Entry(0, Slot(sample, instance, 1, 0, {}), 0) for instance in range(20)]
    arranged = arrange(entries, campaign)
    found = defaultdict(list)
    for entry in arranged:
        found[entry.batch].append(entry)
    assert len(found) == 3
    for number, members in found.items():
        assert len(members) <= 10
        repeats = [entry.repeat for entry in members if entry.slot.role.every_batch]
        assert repeats == [number, number]
    with pytest.raises(InputError, match=r"limits.circuits_per_job: found 2; allowed: more than the 2 circuits"):
        arrange(entries, with_capacity(campaign, 2))
