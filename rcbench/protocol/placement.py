"""Registers on the experiment's qubits, and whether the device's couplers host them. Nothing is ever routed."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from itertools import pairwise

from rcbench.campaign import Experiment
from rcbench.circuits.families import CONTROLS
from rcbench.device import Device, Pair
from rcbench.errors import InputError, raise_all, suggest
from rcbench.protocol.language import Measure, Perturb, Prepare, Protocol, Register, Role
from rcbench.regions import write_regions


@dataclass(frozen=True, slots=True)
class Placement:
    """Where a protocol runs. registers, sites: experiment qubits by name, in order."""

    registers: Mapping[str, tuple[int, ...]]
    sites: Mapping[str, tuple[int, ...]]


def place(protocol: Protocol, experiment: Experiment, device: Device) -> Placement:
    """Give each register its qubits and check that the couplers host it.

    Raises:
        InputError: what does not fit: missing or misplaced sites, too few qubits, shares that do not come out even,
            couplers that are lacking (all at once, named by device qubits).
    """
    errors: list[InputError] = []
    where = f"experiment {experiment.name!r} with protocol {protocol.name!r}: "
    for name in experiment.sites:
        if name not in protocol.sites:
            allowed = suggest(name, protocol.sites) if protocol.sites else "no sites: the protocol takes none"
            errors.append(InputError(f"sites.{name}", list(experiment.sites[name]), allowed, where))
    for name, wanted in protocol.sites.items():
        if wanted.default is None and not experiment.sites.get(name):
            errors.append(InputError(f"sites.{name}", "nothing", "a list of the experiment's qubits", where))
    raise_all(errors)
    registers = _take(protocol, experiment, where)
    for register in protocol.registers.values():
        if register.join:
            registers[register.name] = tuple(qubit for part in register.join for qubit in registers[part])
    sites = {name: _sites(protocol, experiment, registers, name, where) for name in protocol.sites}
    for register in sorted(protocol.registers.values(), key=lambda register: bool(register.same_as)):
        if register.part_of:
            registers[register.name] = _part(protocol, registers, sites, register, where)
    _check_circuits(protocol, registers, where)
    lacking = [
        InputError(f"registers.{register.name}", found, allowed, where)
        for register in protocol.registers.values()
        for found, allowed in _lacking(register, protocol.circuit_register, registers, experiment, device)
    ]
    raise_all(lacking)
    placement = Placement(registers, sites)
    for role in protocol.roles:
        _check_couplings_of(role, placement, experiment, device, where)
    return placement


def _take(protocol: Protocol, experiment: Experiment, where: str) -> dict[str, tuple[int, ...]]:
    """The registers that take qubits of their own: those at sites first, then the others in the order of the file."""
    takers = [register for register in protocol.registers.values() if register.take is not None]
    free = list(range(experiment.n_qubits))
    chosen: dict[str, tuple[int, ...]] = {}
    for register in takers:
        if isinstance(register.take, str) and register.take.startswith("sites."):
            wanted = _listed(protocol, experiment, register.take.removeprefix("sites."))
            chosen[register.name] = wanted
            if any(qubit not in free for qubit in wanted):
                raise InputError(register.take, list(wanted), "qubits that no other register takes", where)
            free = [qubit for qubit in free if qubit not in wanted]
    sized = sum(register.take for register in takers if isinstance(register.take, int))
    shares = [register for register in takers if register.take in ("share", "all")]
    rest = [register for register in takers if register.take == "rest"]
    left = len(free) - sized
    if left < len(shares) + len(rest) or (shares and not rest and left % len(shares)):
        wanted_words = f"{sized} qubits" if sized else ""
        if shares:
            wanted_words += f"{' and ' if sized else ''}{len(shares)} equal shares"
        raise InputError("qubits", experiment.n_qubits, f"qubits that come out even: {wanted_words}", where)
    if len(rest) > 1 or (shares and rest):
        raise InputError("take", "rest", "one register that takes the rest, and none that takes a share", where)
    share = left // len(shares) if shares else 0
    for register in takers:
        if register.name not in chosen:
            size = register.take if isinstance(register.take, int) else left if register.take == "rest" else share
            chosen[register.name], free = tuple(free[:size]), free[size:]
    return {register.name: chosen[register.name] for register in takers}


def _listed(protocol: Protocol, experiment: Experiment, name: str) -> tuple[int, ...]:
    default = protocol.sites[name].default
    return experiment.sites.get(name) or (default if isinstance(default, tuple) else ())


def _sites(
    protocol: Protocol, experiment: Experiment, registers: Mapping[str, tuple[int, ...]], name: str, where: str
) -> tuple[int, ...]:
    inside = registers[protocol.sites[name].register]
    given = experiment.sites.get(name)
    if not given and protocol.sites[name].default == "all":
        return inside
    sites = given or _listed(protocol, experiment, name)
    outside = [site for site in sites if site not in inside]
    if outside or len(set(sites)) != len(sites):
        allowed = f"different qubits of register {protocol.sites[name].register!r}: {write_regions(inside)}"
        raise InputError(f"sites.{name}", outside or list(sites), allowed, where)
    return sites


def _part(
    protocol: Protocol,
    registers: Mapping[str, tuple[int, ...]],
    sites: Mapping[str, tuple[int, ...]],
    register: Register,
    where: str,
) -> tuple[int, ...]:
    if register.sites:
        return sites[register.sites]
    model = protocol.registers[register.same_as]
    places = [registers[model.part_of].index(qubit) for qubit in registers[model.name]]
    whole = registers[register.part_of]
    if max(places) >= len(whole):
        raise InputError(
            f"registers.{register.name}", len(whole), f"a register of {max(places) + 1} qubits or more", where
        )
    return tuple(whole[index] for index in places)


def _check_circuits(protocol: Protocol, registers: Mapping[str, tuple[int, ...]], where: str) -> None:
    """All registers that host the circuit have the same number of qubits."""
    hosts = [register.name for register in protocol.registers.values() if register.hosts_circuit]
    for name in hosts[1:]:
        if len(registers[name]) != len(registers[hosts[0]]):
            allowed = f"{len(registers[hosts[0]])} qubits, as {hosts[0]!r} has: the same circuit runs on both"
            raise InputError(f"registers.{name}", len(registers[name]), allowed, where)


def _lacking(
    register: Register,
    first: Register | None,
    registers: Mapping[str, tuple[int, ...]],
    experiment: Experiment,
    device: Device,
) -> Iterable[tuple[str, str]]:
    """(what was found, what is needed) for each coupling of a register that the device does not have."""
    device_qubits = {name: [experiment.qubits[label] for label in labels] for name, labels in registers.items()}
    own = device_qubits[register.name]
    for coupling in register.coupling:
        kind, other = coupling.split()[0], coupling.split()[-1]
        if kind == "circuit":
            assert first is not None
            yield from _circuit_lacks(own, device_qubits[first.name], experiment, device)
            continue
        theirs = device_qubits[other]
        if kind == "pairwise" and len(own) != len(theirs):
            yield f"{len(own)} qubits", f"{len(theirs)}, as {other!r} has: {coupling}"
            continue
        pairs = zip(own, theirs, strict=True) if kind == "pairwise" else ((a, b) for a in own for b in theirs)
        missing = lacking_couplers(pairs, device)
        if missing:
            yield f"no couplers {missing}", f"{coupling}: a device with these couplers, or other qubits"


def _circuit_lacks(
    own: Sequence[int], first: Sequence[int], experiment: Experiment, device: Device
) -> Iterable[tuple[str, str]]:
    """Brickwork needs a connected register; a further register needs the couplers of the first one."""
    if experiment.circuits.family == "product" or experiment.depths[-1] == 0:
        return
    if own != first:
        at = dict(zip(first, own, strict=True))
        missing = lacking_couplers([(at[a], at[b]) for a, b in device.couplers if a in at and b in at], device)
        if missing:
            yield (
                f"no couplers {missing}",
                "the couplers that correspond to those of the first register with the circuit",
            )
        return
    pieces = _pieces(own, set(device.couplers))
    if len(pieces) > 1 and experiment.circuits.family not in CONTROLS:
        parts = " and ".join(write_regions(piece) for piece in pieces)
        joins = ", ".join(f"{max(a)}-{min(b)}" for a, b in pairwise(pieces))
        yield f"no couplers between {parts}", f"qubits that are all connected: couplers such as {joins} are lacking"


def lacking_couplers(pairs: Iterable[Pair], device: Device) -> str:
    """Those of the couplers (by device qubits) that the device has not, as ``3-4, 5-6``; empty where it has all."""
    couplers = set(device.couplers)
    ordered = [(min(pair), max(pair)) for pair in pairs]
    return ", ".join(f"{a}-{b}" for a, b in dict.fromkeys(ordered) if (a, b) not in couplers)


def _pieces(qubits: Sequence[int], couplers: set[Pair]) -> list[list[int]]:
    """The connected parts of some device qubits, each rising."""
    left, pieces = set(qubits), []
    neighbours: dict[int, list[int]] = {qubit: [] for qubit in qubits}
    for a, b in couplers:
        if a in neighbours and b in neighbours:
            neighbours[a].append(b)
            neighbours[b].append(a)
    while left:
        piece, queue = set(), [min(left)]
        while queue:
            qubit = queue.pop()
            if qubit not in piece:
                piece.add(qubit)
                queue += neighbours[qubit]
        left -= piece
        pieces.append(sorted(piece))
    return pieces


def _check_couplings_of(role: Role, placement: Placement, experiment: Experiment, device: Device, where: str) -> None:
    """Bell pairs and controlled Paulis of a role need couplers too; nothing is measured twice."""
    pairs: list[Pair] = []
    measured: list[int] = []
    for step in role.steps:
        if isinstance(step, Prepare | Measure) and step.bell_with:
            own, theirs = placement.registers[step.registers[0]], placement.registers[step.bell_with]
            if len(own) != len(theirs):
                raise InputError(
                    "bell_with", len(theirs), f"as many qubits as {step.registers[0]!r} has, {len(own)}", where
                )
            pairs += zip(own, theirs, strict=True)
        if isinstance(step, Measure):
            for name in (*step.registers, *((step.bell_with,) if step.bell_with else ())):
                measured += placement.registers[name]
        if isinstance(step, Perturb) and step.controlled_by:
            control = placement.registers[step.controlled_by]
            if len(control) != 1:
                raise InputError(
                    "controlled_by", len(control), f"a register of one qubit: {step.controlled_by!r}", where
                )
            pairs += [(control[0], site) for site in _all_sites(step.at, role, placement)]
    if len(set(measured)) != len(measured):
        raise InputError(f"role {role.name!r}", "a qubit measured twice", "each qubit measured once", where)
    missing = lacking_couplers([(experiment.qubits[a], experiment.qubits[b]) for a, b in pairs if a != b], device)
    if missing or any(a == b for a, b in pairs):
        found = f"no couplers {missing}" if missing else "a qubit coupled to itself"
        raise InputError(
            f"role {role.name!r}", found, "a device with the couplers of its Bell pairs and controls", where
        )


def _all_sites(at: str, role: Role, placement: Placement) -> tuple[int, ...]:
    """Every site that a step may act on, over all values of a loop."""
    if at.startswith("$"):
        values = next(loop.values for loop in role.for_each if loop.name == at[1:])
        if isinstance(values, str):
            return placement.sites[values.removeprefix("sites.")] if values != "settings" else ()
        return tuple(value for value in values if isinstance(value, int))
    return placement.sites[at.removeprefix("sites.")] if at.startswith("sites.") else placement.registers[at]
