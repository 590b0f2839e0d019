"""Protocols: what is run and measured, as data. A protocol file becomes typed objects, and those become circuits.

language    the typed objects: registers, draws, roles, steps
reading     from a TOML file to these objects; its docstring is the reference of the language
checks      what a file must fulfil as a whole
placement   registers on the experiment's qubits, and the couplers they need
writing     the steps of one role as the rows of one circuit
expansion   all circuits of an experiment, lazily
"""

from rcbench.protocol.expansion import PlannedCircuit, circuit_id, expand, plan
from rcbench.protocol.language import Protocol, Role
from rcbench.protocol.placement import Placement, place
from rcbench.protocol.reading import load_protocol, protocol_path, protocol_text, read_protocol, shipped_protocols

__all__ = [
    "Placement",
    "PlannedCircuit",
    "Protocol",
    "Role",
    "circuit_id",
    "expand",
    "load_protocol",
    "place",
    "plan",
    "protocol_path",
    "protocol_text",
    "read_protocol",
    "shipped_protocols",
]
