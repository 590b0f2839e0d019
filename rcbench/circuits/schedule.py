"""Which couplers run in which layer: brickwork layers of a device, their control with fixed partners, and native slots.

A layer is a set of couplers that share no qubit. The layers of a device repeat its patterns in turn, and every coupler
among the experiment's qubits is in exactly one pattern:

    line         two parities, the first one holds the coupler of the lowest label: (0, 1), (2, 3), ... then (1, 2), ...
    ring         the same round the ring; the closing coupler of an odd ring is a third pattern of its own
    grid         four patterns: each qubit meets its right, lower, left and upper neighbour (neighbouring qubits in the
                 opposite order), so that all patterns hold about as many couplers
    edges        the colours of a proper edge colouring; as many as the largest degree where the graph is bipartite
    all-to-all   no pattern: a fresh random perfect matching in each layer

Patterns that would be empty are left out. All pairs (a, b), a < b, are in the experiment's labels: places in `qubits`.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from functools import lru_cache
from itertools import pairwise

from rcbench.device import Device, Limits, Pair
from rcbench.errors import InputError
from rcbench.randomness import Draw
from rcbench.regions import write_regions

Layer = tuple[Pair, ...]
_TRIES = 1000  # random matchings drawn before an all-to-all device with broken couplers is given up


def couplers_among(device: Device, qubits: Sequence[int]) -> Layer:
    """The working couplers inside some qubits of the device, in the experiment's labels, in rising order.

    Raises:
        InputError: a qubit that is repeated, broken or not on the device.
    """
    working = set(device.working_qubits)
    place: dict[int, int] = {}
    for label, qubit in enumerate(qubits):
        if qubit not in working:
            raise InputError(
                "qubits", qubit, f"working qubits of {device.name}: {write_regions(device.working_qubits)}"
            )
        if qubit in place:
            raise InputError("qubits", tuple(qubits), f"each qubit once ({qubit} is repeated)")
        place[qubit] = label
    inside = [(place[a], place[b]) for a, b in device.couplers if a in place and b in place]
    return tuple(sorted((min(pair), max(pair)) for pair in inside))


def layers(device: Device, qubits: Sequence[int], depth: int, draw: Draw) -> list[Layer]:
    """The first `depth` logical two-qubit layers.

    Args:
        device: whose layout and couplers are used.
        qubits: device qubits in the order of the experiment's labels.
        depth: number of layers.
        draw: random words for the matchings of an all-to-all device; used by no other layout. The layers of a smaller
            depth are the first ones of a larger depth.
    Returns:
        `depth` layers of pairs in the experiment's labels; all empty for a single qubit.
    Raises:
        InputError: a qubit that is repeated or not working; several qubits with no coupler among them.
    """
    couplers = couplers_among(device, qubits)
    if not couplers:
        if len(qubits) > 1:
            raise InputError(
                "couplers", f"none among qubits {write_regions(qubits)}", f"qubits of {device.name} that are coupled"
            )
        return [()] * depth
    if device.layout == "all-to-all":
        return [_random_matching(len(qubits), couplers, draw) for _ in range(depth)]
    patterns = _patterns(device.layout, device.columns, couplers, tuple(qubits))
    return [patterns[index % len(patterns)] for index in range(depth)]


def patterns(device: Device, qubits: Sequence[int]) -> tuple[Layer, ...]:
    """The layers that repeat, every coupler in exactly one of them; none where no qubits are coupled.

    Raises:
        InputError: a qubit that is repeated or not working; an all-to-all device, whose layers are drawn afresh.
    """
    if device.layout == "all-to-all":
        raise InputError("layout", device.layout, "line, ring, grid or edges, where the same layers repeat")
    couplers = couplers_among(device, qubits)
    return _patterns(device.layout, device.columns, couplers, tuple(qubits)) if couplers else ()


def dimer_layers(device: Device, qubits: Sequence[int], depth: int, draw: Draw) -> list[Layer]:
    """Layers with as many gates as those of `layers`, but with one fixed partner a qubit: equal loss, no spreading.

    The partners are a maximum matching of the couplers, the lexicographically first one. No layer of `layers` has more
    gates than that matching, so the counts agree layer by layer. Where a layer has fewer, the pairs left out rotate.
    A layer takes as many native slots as its model wherever some turn of the pairs allows it (with couplers that must
    not run together it may not; the nearest number of slots is taken then). Qubits left without a partner stay idle.

    Args and errors are those of `layers`; pass a draw of the same key, so that the counts come from the same layers.
    """
    model = layers(device, qubits, depth, draw)
    pairs = _maximum_matching(couplers_among(device, qubits), len(qubits))
    out: list[Layer] = []
    start = 0
    for layer in model:
        turns = [
            _turn(pairs, start + shift, len(layer)) for shift in range(len(pairs) if device.limits.exclusive else 1)
        ]
        wanted = len(native_slots(layer, device, qubits)) if len(turns) > 1 else 0
        chosen = min(turns, key=lambda turn: abs(len(native_slots(turn, device, qubits)) - wanted)) if turns else ()
        out.append(chosen)
        start += len(layer)
    return out


def native_slots(pairs: Iterable[Pair], device: Device, qubits: Sequence[int]) -> list[Layer]:
    """One logical layer as the slots that the device can run, one after another.

    Each pair goes into the first slot that has room (`limits.parallel_gates`) and holds no coupler that must not run
    together with it (`limits.exclusive`: at most one coupler of each set at a time).

    Args:
        pairs: pairs that share no qubit, in the experiment's labels.
        device: whose limits are respected.
        qubits: device qubits in the order of the experiment's labels.
    """
    layer = tuple(pairs)
    limits = device.limits
    room = limits.parallel_gates or len(layer)
    if not limits.exclusive and len(layer) <= room:
        return [layer] if layer else []
    slots: list[list[Pair]] = []
    busy: list[set[int]] = []
    for pair in layer:
        groups = _exclusive_sets(limits, (qubits[pair[0]], qubits[pair[1]]))
        for slot, taken in zip(slots, busy, strict=True):
            if len(slot) < room and not taken & groups:
                break
        else:
            slot, taken = [], set()
            slots.append(slot)
            busy.append(taken)
        slot.append(pair)
        taken |= groups
    return [tuple(slot) for slot in slots]


def _exclusive_sets(limits: Limits, coupler: Pair) -> set[int]:
    """Which of the sets of couplers that must not run together hold this coupler of the device."""
    either = {coupler, coupler[::-1]}
    return {index for index, group in enumerate(limits.exclusive) if either & set(group)}


def _turn(pairs: Layer, start: int, count: int) -> Layer:
    """`count` of the pairs, from place `start` on and round."""
    return tuple(sorted(pairs[(start + index) % len(pairs)] for index in range(count)))


@lru_cache(maxsize=64)
def _patterns(layout: str, columns: int, couplers: Layer, qubits: tuple[int, ...]) -> tuple[Layer, ...]:
    if layout == "grid":
        colours = {pair: _grid_pattern(qubits[pair[0]], qubits[pair[1]], columns) for pair in couplers}
    elif layout in ("line", "ring"):
        colours = _parities(couplers)
    else:
        colours = edge_colouring(couplers)
    groups = [
        tuple(pair for pair in couplers if colours[pair] == colour) for colour in range(max(colours.values()) + 1)
    ]
    return tuple(group for group in groups if group)


def _grid_pattern(one: int, two: int, columns: int) -> int:
    """Right of an even site 0, below it 1, left of it 2, above it 3; even: row + column is even."""
    (row, column), (row_2, column_2) = sorted((divmod(one, columns), divmod(two, columns)))
    across = row == row_2
    if (row_2 - row, column_2 - column) not in ((0, 1), (1, 0)):
        raise InputError("couplers", (one, two), "couplers of a grid join neighbours in a row or a column")
    odd = (row + column) % 2
    return (2 if odd else 0) + (0 if across else 1)


def _parities(couplers: Layer) -> dict[Pair, int]:
    """The parity of each coupler along its chain; 2 for the closing coupler of an odd ring."""
    neighbours = _neighbours(couplers)
    colours: dict[Pair, int] = {}
    seen: set[int] = set()
    for lowest in sorted(neighbours):
        if lowest in seen:
            continue
        part = _component(lowest, neighbours)
        seen |= part
        if any(len(neighbours[qubit]) > 2 for qubit in part):
            raise InputError("couplers", couplers, "couplers of a line or ring join no qubit to more than two others")
        chain = _walk(min((q for q in part if len(neighbours[q]) == 1), default=lowest), neighbours)
        bonds = [(min(a, b), max(a, b)) for a, b in pairwise(chain)]
        first = bonds.index(min(bonds)) % 2  # the parity of the lowest label comes first
        found = {bond: (index + first) % 2 for index, bond in enumerate(bonds)}
        if chain[0] == chain[-1] and len(bonds) % 2:
            found[bonds[-1]] = 2
        colours |= found
    return colours


def _neighbours(couplers: Iterable[Pair]) -> dict[int, list[int]]:
    """The neighbours of each qubit that has some, in rising order."""
    out: dict[int, list[int]] = {}
    for a, b in sorted(couplers):
        out.setdefault(a, []).append(b)
        out.setdefault(b, []).append(a)
    return {qubit: sorted(others) for qubit, others in out.items()}


def _component(start: int, neighbours: dict[int, list[int]]) -> set[int]:
    """All qubits that can be reached from one."""
    found, rest = {start}, [start]
    while rest:
        for other in neighbours[rest.pop()]:
            if other not in found:
                found.add(other)
                rest.append(other)
    return found


def _walk(start: int, neighbours: dict[int, list[int]]) -> list[int]:
    """The qubits of a chain from one end on; of a ring from any qubit by its lowest neighbour, back to itself."""
    chain = [start, neighbours[start][0]]
    while True:
        onward = [other for other in neighbours[chain[-1]] if other != chain[-2]]
        if not onward:
            return chain
        chain.append(onward[0])
        if onward[0] == start:
            return chain


def edge_colouring(couplers: Layer) -> dict[Pair, int]:
    """A proper edge colouring: couplers that share a qubit get different colours, numbered from 0.

    Couplers are coloured in rising order; where no colour is free at both ends, two colours are exchanged along the
    alternating chain from one end. With bipartite graphs that needs no more colours than the largest degree (the proof
    of Koenig's theorem, Math. Ann. 77, 453 (1916)), where colouring the line graph greedily can need more; and the
    result depends on no library's version, so circuits stay the same.
    """
    at: dict[int, dict[int, int]] = {}  # qubit -> colour -> the other end
    n_colours = max((len(others) for others in _neighbours(couplers).values()), default=0)
    for a, b in couplers:
        ends = at.setdefault(a, {}), at.setdefault(b, {})
        free = [[colour for colour in range(n_colours) if colour not in end] for end in ends]
        both = [colour for colour in free[0] if colour in free[1]]
        choices = (one for one in free[0] for two in free[1] if _exchange(at, b, one, two, avoid=a))
        colour = both[0] if both else next(choices, n_colours)
        n_colours = max(n_colours, colour + 1)
        at[a][colour], at[b][colour] = b, a
    return {(a, b): colour for a in at for colour, b in at[a].items() if a < b}


def _exchange(at: dict[int, dict[int, int]], start: int, one: int, two: int, avoid: int) -> bool:
    """Exchange two colours along the chain that leaves `start` with colour `one`; false where it ends at `avoid`."""
    chain, colour = [start], one
    while colour in at[chain[-1]]:
        chain.append(at[chain[-1]][colour])
        colour = two if colour == one else one
    if chain[-1] == avoid:
        return False
    for qubit in chain:
        ends = at[qubit].pop(one, None), at[qubit].pop(two, None)
        at[qubit] |= {colour: end for colour, end in zip((two, one), ends, strict=True) if end is not None}
    return True


@lru_cache(maxsize=64)
def _maximum_matching(couplers: Layer, n_qubits: int) -> Layer:
    """The lexicographically first of the maximum matchings."""
    greedy: list[Pair] = []
    for pair in couplers:
        if not any(set(pair) & set(other) for other in greedy):
            greedy.append(pair)
    if len(greedy) == n_qubits // 2:
        return tuple(greedy)
    import networkx

    graph = networkx.Graph()
    # falling powers of two: no two matchings weigh the same, so the answer is the library's no choice of its own
    graph.add_weighted_edges_from((a, b, 2 ** (len(couplers) - rank)) for rank, (a, b) in enumerate(couplers))
    found = networkx.max_weight_matching(graph, maxcardinality=True)
    return tuple(sorted((min(pair), max(pair)) for pair in found))


def _random_matching(n_qubits: int, couplers: Layer, draw: Draw) -> Layer:
    """A random matching of all qubits (all but one of an odd number), uniform over those that avoid broken couplers."""
    allowed = set(couplers)
    for _ in range(_TRIES):
        order = draw.permutation(n_qubits).tolist()
        pairs = [(min(a, b), max(a, b)) for a, b in zip(order[0::2], order[1::2], strict=False)]
        if allowed.issuperset(pairs):
            return tuple(sorted(pairs))
    raise InputError(
        "broken_couplers",
        f"{n_qubits * (n_qubits - 1) // 2 - len(couplers)} broken of {n_qubits * (n_qubits - 1) // 2}",
        "so few that random perfect matchings avoid them; else give the couplers as layout edges",
    )
