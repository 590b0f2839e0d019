"""What the README shows is what the program takes."""

import re
from pathlib import Path

from rcbench.campaign import load_campaign
from rcbench.cli import cli
from rcbench.plan import PLAN, plan, plan_text

TEXT = (Path(__file__).resolve().parents[1] / "README.md").read_text()


def test_the_campaign_of_the_readme_loads_and_can_be_planned(tmp_path):
    path = tmp_path / "campaign.toml"
    path.write_text(re.search(r"```toml\n(.*?)```", TEXT, re.S).group(1))
    campaign = load_campaign(path)
    assert [experiment.name for experiment in campaign.experiments] == ["sampling", "butterfly", "dimers"]
    table = plan(campaign)
    assert tuple(table.columns) == PLAN
    assert "in all:" in plan_text(table)


def test_every_command_of_the_readme_exists():
    named = set(re.findall(r"rcbench ([a-z]+)", TEXT)) - {"is", "writes"}
    assert named <= set(cli.commands)
