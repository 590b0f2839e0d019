"""All runs of a kit, planned before a circuit is written: cheap, and whole."""

from __future__ import annotations

from dataclasses import dataclass

from rcbench.campaign import Campaign
from rcbench.errors import InputError, raise_all
from rcbench.kit.order import Entry, arrange
from rcbench.protocol import circuit_id, load_protocol
from rcbench.protocol.expansion import Expander


@dataclass(frozen=True, slots=True)
class Plan:
    """All runs of a kit before a circuit is written. runs: in run order; ids: their circuit_id."""

    campaign: Campaign
    expanders: tuple[Expander | None, ...]
    runs: tuple[Entry, ...]

    def circuit_id(self, run: Entry) -> str:
        """The name of a run's circuit."""
        return circuit_id(self.campaign.experiments[run.experiment], run.slot, run.repeat)


def plan_kit(campaign: Campaign, missing: frozenset[str] | None = None) -> Plan:
    """Every run of a kit in its order, with no circuit written; `missing` keeps those of these circuit ids only."""
    _check_limits(campaign)
    expanders: list[Expander | None] = []
    entries: list[Entry] = []
    for number, experiment in enumerate(campaign.experiments):
        if experiment.protocol is None:
            expanders.append(None)
            continue
        expander = Expander(load_protocol(experiment.protocol), experiment, campaign)
        expanders.append(expander)
        for instance in range(experiment.instances):
            for slot in expander.slots(instance):
                entries += [Entry(number, slot, repeat) for repeat in range(experiment.repeats)]
    if not entries:
        raise InputError("experiment", "none with a protocol", "one or more experiments that measure something")
    plan = Plan(campaign, tuple(expanders), tuple(arrange(entries, campaign)))
    if missing is not None:
        kept = [run for run in plan.runs if plan.circuit_id(run) in missing]
        if not kept:
            raise InputError("missing", "nothing that this campaign has", "circuit ids of the campaign's kit")
        plan = Plan(campaign, plan.expanders, tuple(arrange(kept, campaign, whole=False)))
    _check_names(plan)
    return plan


def _check_limits(campaign: Campaign) -> None:
    most = campaign.device.limits.shots_per_circuit
    raise_all(
        [
            InputError(
                "shots",
                experiment.shots,
                f"at most {most}, limits.shots_per_circuit of {campaign.device.name}; `repeats` runs a circuit again",
                f"experiment {experiment.name!r}: ",
            )
            for experiment in campaign.experiments
            if most is not None and experiment.protocol is not None and experiment.shots > most
        ]
    )


def _check_names(plan: Plan) -> None:
    """No two runs may share a name, also where a file system does not tell capitals."""
    seen: set[str] = set()
    for run in plan.runs:
        name = plan.circuit_id(run)
        if name.lower() in seen:
            raise InputError("circuit_id", name, "names of experiments and roles that give each circuit another name")
        seen.add(name.lower())
