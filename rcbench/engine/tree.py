"""Many circuits at once: circuits that begin with the same rows share the evolution of that beginning.

The circuits form a tree. A node is a stretch of layers that no circuit leaves or enters in the middle; nested depths
lie on one path and cost one sweep, the roles of an echo part where their rows part. The walk is depth first, and only
the states at branch points of the current path are kept.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field

import numpy as np

from rcbench.arrays import ComplexArray, IntArray
from rcbench.circuits.circuit import Circuit
from rcbench.circuits.gates import N_PARAMETERS
from rcbench.engine import memory
from rcbench.engine.blocks import Plan, aligned, apply_plan
from rcbench.engine.program import check_order
from rcbench.engine.state import compile_circuit, zero_state
from rcbench.engine.threads import Pool
from rcbench.engine.work import Work, or_current


@dataclass(slots=True, eq=False)
class Node:
    """Gates start to stop of circuit `source`, then the circuits that end here, then the branches.

    stretch: which of the nodes of that circuit this is.
    """

    source: int
    start: int
    stop: int
    stretch: int = 0
    ends: list[int] = field(default_factory=list)
    states: int = 1  # states alive at once in a depth-first walk from here
    branches: dict[bytes, Node] = field(default_factory=dict)


def layer_keys(circuit: Circuit) -> tuple[IntArray, list[bytes]]:
    """Where each layer of gates ends among the circuit's gates, and what tells it from other layers."""
    rows = np.flatnonzero(circuit.gate_rows)
    if not len(rows):
        return np.zeros(0, dtype=np.int64), []
    layer, kind = circuit.layer[rows], circuit.kind[rows]
    stops = np.append(np.flatnonzero(np.diff(layer)) + 1, len(rows))
    count = N_PARAMETERS[kind]
    ends = np.cumsum(count)
    columns = np.repeat(circuit.first[rows] - (ends - count), count) + np.arange(ends[-1])
    gates = np.ascontiguousarray(np.column_stack([kind, circuit.qubits[rows]]), dtype=np.int32)
    parameters = circuit.parameters[columns]
    keys, start = [], 0
    for stop in stops.tolist():
        first = ends[start] - count[start]
        keys.append(gates[start:stop].tobytes() + parameters[first : ends[stop - 1]].tobytes())
        start = stop
    return stops, keys


def build_tree(circuits: Sequence[Circuit]) -> Node:
    """The tree of circuits of one register size; runs of layers without a branch or an end are one node."""
    root = Node(-1, 0, 0)
    layers = [layer_keys(circuit) for circuit in circuits]
    # the deepest first: a path of nested depths then belongs to one circuit, and is compiled at once
    for index in sorted(range(len(circuits)), key=lambda index: -len(layers[index][1])):
        stops, keys = layers[index]
        node, start = root, 0
        for stop, key in zip(stops.tolist(), keys, strict=True):
            if key not in node.branches:
                node.branches[key] = Node(index, start, stop)
            node, start = node.branches[key], stop
        node.ends.append(index)
    _join(root)
    _count_states(root)
    return root


def _join(root: Node) -> None:
    """Make one node of each chain of nodes."""
    waiting = [root]
    while waiting:
        node = waiting.pop()
        for key, child in node.branches.items():
            while not child.ends and len(child.branches) == 1:
                (below,) = child.branches.values()
                child = Node(below.source, child.start, below.stop, ends=below.ends, branches=below.branches)
            node.branches[key] = child
            waiting.append(child)


def _count_states(root: Node) -> None:
    """Fill in `Node.states`; put the branch that needs most first: it is walked last, in its parent's memory."""
    order, waiting = [], [root]
    while waiting:
        node = waiting.pop()
        order.append(node)
        waiting += node.branches.values()
    for node in reversed(order):
        node.branches = dict(sorted(node.branches.items(), key=lambda item: -item[1].states))
        needs = [child.states for child in node.branches.values()]
        node.states = max([1, *needs[:1], *(1 + need for need in needs[1:])])


def walk(
    circuits: Sequence[Circuit],
    *,
    dtype: str = "complex64",
    memory_limit: int | None = None,
    threads: int | None = None,
    work: Work | None = None,
) -> Iterator[tuple[int, ComplexArray]]:
    """The final state of every circuit, shared beginnings evolved once.

    Args:
        circuits: any mixture of sizes; measurements and barriers are ignored.
        dtype: "complex64" or "complex128".
        memory_limit: bytes that may be taken; the free memory where None.
        threads: cores to use; all that this process may use where None.
        work: what is done is added to it; to the one that collects where None.
    Yields:
        (index of the circuit, (2**n,) state), in no particular order. The array is reused after the next step and must
        not be written to.
    Raises:
        InputError: a reset or a gate after the qubit's measurement, or too little memory.
    """
    for circuit in circuits:
        check_order(circuit)
    work = or_current(work)
    with Pool(threads) as pool:
        for n_qubits in sorted({circuit.n_qubits for circuit in circuits}):
            members = [index for index, circuit in enumerate(circuits) if circuit.n_qubits == n_qubits]
            root = build_tree([circuits[index] for index in members])
            needed = memory.bytes_needed(n_qubits, dtype, states=root.states)
            memory.require(needed, memory_limit, f"{root.states} states of {n_qubits} qubits")
            work.holds(needed)
            work.circuits += len(members)
            for index, state in _walk(root, [circuits[index] for index in members], dtype, pool, work):
                yield members[index], state


def _walk(
    root: Node, circuits: list[Circuit], dtype: str, pool: Pool, work: Work
) -> Iterator[tuple[int, ComplexArray]]:
    cuts = _cuts(root)
    plans: dict[int, Plan] = {}
    left = {source: len(bounds) - 1 for source, bounds in cuts.items()}
    waiting = [(root, zero_state(circuits[0].n_qubits, dtype), False)]
    while waiting:
        node, state, others_wait = waiting.pop()
        if others_wait:
            state, original = aligned(len(state), state.dtype), state
            state[:] = original
        source = node.source
        if source >= 0:
            with work.timed():
                if source not in plans:
                    plans[source] = compile_circuit(circuits[source], dtype, cuts[source])
                plan = plans[source]
                begin, end = plan.stretch[node.stretch : node.stretch + 2].tolist()
                apply_plan(state, plan, pool, begin, end)
            work.amplitudes += float(len(state) * (plan.start[end] - plan.start[begin]))
            left[source] -= 1
            if not left[source]:
                del plans[source]
        for index in node.ends:
            yield index, state
        # the first branch is taken up last and needs no copy
        waiting += [(child, state, place > 0) for place, child in enumerate(node.branches.values())]


def _cuts(root: Node) -> dict[int, list[int]]:
    """Where the nodes of each circuit begin, and the end; numbers the nodes. They follow each other without a gap."""
    cuts: dict[int, list[int]] = {}
    waiting = [root]
    while waiting:
        node = waiting.pop()
        waiting += node.branches.values()
        if node.source >= 0:
            bounds = cuts.setdefault(node.source, [node.start])
            node.stretch = len(bounds) - 1
            bounds.append(node.stop)
    return cuts
