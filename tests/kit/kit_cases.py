"""A small campaign that the tests of kits share."""

from __future__ import annotations

from pathlib import Path

from rcbench.campaign import Campaign, load_campaign

CAMPAIGN = """\
[campaign]
title = "A small kit"
seed = 4

[device]
name = "Larch-4"
invented = true
layout = "line"
qubits = 4
physical = ["A1", "A2", "B1", "B2"]
one_qubit = "r+rz"

[device.two_qubit.cz]

[device.timings]
one_qubit_ns = 25
two_qubit_ns = 40
measure_ns = 500
{limits}
[[experiment]]
name = "sampling"
protocol = "direct-sampling"
depths = [0, 1, 3]
instances = 4
shots = 200

[[experiment]]
name = "echo"
protocol = "loschmidt-echo"
same_circuits_as = "sampling"
repeats = 2

[[experiment]]
name = "otoc"
protocol = "butterfly-echo"
same_circuits_as = "sampling"
instances = 3
sites = {{ butterfly = [3, 2], probe = [0, 1] }}

[[experiment]]
name = "control"
protocol = "direct-sampling"
control_for = "sampling"
family = "dimers"
depths = [1, 3]
instances = 2

[[experiment]]
name = "states"
signatures = ["renyi2_entropy"]
depths = [3]
instances = 2
"""


def small_campaign(folder: Path, limits: str = "") -> Campaign:
    """The small campaign, from a file; limits: lines of [device.limits]."""
    path = folder / "campaign.toml"
    path.write_text(CAMPAIGN.format(limits=f"\n[device.limits]\n{limits}\n" if limits else ""))
    return load_campaign(path)
