"""How long building takes, in processor time, so that other work on the machine does not count."""

from __future__ import annotations

import time

import pytest

from rcbench.campaign import load_campaign
from rcbench.kit import build_kit

CAMPAIGN = """
[campaign]
title = "speed"
seed = 1

[device]
name = "invented"
invented = true
layout = "line"
qubits = 12
one_qubit = "r+rz"

[device.two_qubit.cz]

[[experiment]]
name = "sampling"
protocol = "direct-sampling"
two_qubit = "{two_qubit}"
depths = [20]
instances = 100
"""


@pytest.mark.benchmark
@pytest.mark.parametrize("two_qubit", ["cz", "haar"])
def test_two_thousand_circuits_of_12_qubits_and_depth_20_take_under_a_minute(two_qubit, tmp_path):
    """100 circuits in under 3 s of one core."""
    path = tmp_path / "campaign.toml"
    path.write_text(CAMPAIGN.format(two_qubit=two_qubit))
    campaign = load_campaign(path)
    start = time.process_time()
    assert len(build_kit(campaign, tmp_path / "kit").rows) == 100
    assert time.process_time() - start < 3
