"""Kits: the folder of circuits and the roster that a device team gets, written from a campaign and read back.

build      plan all circuits of a campaign, then write them lazily
order      which circuits share a batch, and the order in which they run
roster     one row a circuit and repeat
storage    circuits as files, or packed in archives where they are very many
handover   the note for those who run it
folder     a kit read back, checked against its hashes
"""

from rcbench.kit.build import build_kit, finish_kit
from rcbench.kit.folder import CAMPAIGN, Kit, circuit_file, read_kit
from rcbench.kit.order import arrange
from rcbench.kit.planning import Plan, plan_kit
from rcbench.kit.roster import RosterRow, circuit_facts, duration_ns, read_roster, write_roster
from rcbench.kit.storage import FOLDER

__all__ = [
    "CAMPAIGN",
    "FOLDER",
    "Kit",
    "Plan",
    "RosterRow",
    "arrange",
    "build_kit",
    "circuit_facts",
    "circuit_file",
    "duration_ns",
    "finish_kit",
    "plan_kit",
    "read_kit",
    "read_roster",
    "write_roster",
]
