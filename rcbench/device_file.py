"""The [device] table of a campaign file: read into a Device, and written back with every default filled in."""

from __future__ import annotations

from collections.abc import Mapping
from itertools import combinations
from typing import Any

from rcbench.device import (
    LAYOUTS,
    NATIVE_ONE_QUBIT,
    NATIVE_TWO_QUBIT,
    RATE_CONDITIONS,
    RATE_KINDS,
    Device,
    ErrorBudget,
    Limits,
    NativeGate,
    Pair,
    Rate,
    Times,
    Timings,
)
from rcbench.errors import InputError, suggest
from rcbench.tomlfile import Section

MAX_QUBITS = 10_000
_RATES = ("one_qubit", "two_qubit", "readout_0to1", "readout_1to0")
_TIMINGS = ("one_qubit", "two_qubit", "measure", "reset", "overhead", "job")
_N_PARAMETERS = {"fsim": 2, "zz": 1}


def coupler_name(pair: Pair) -> str:
    """A coupler as files name it: ``3-4``."""
    return f"{pair[0]}-{pair[1]}"


def read_device(section: Section) -> Device | None:
    """The device of a [device] table; None where its errors (kept in the section) leave nothing to build."""
    name = section.text("name")
    layout = section.choice("layout", LAYOUTS)
    rows, columns = section.whole("rows", 0, low=1), section.whole("columns", 0, low=1)
    if layout == "grid" and not (rows and columns):
        section.error("rows", (rows, columns), "rows and columns, each 1 or more, for a grid")
        layout = None
    default = rows * columns if layout == "grid" else ...
    n_qubits = section.whole("qubits", default, low=1, high=MAX_QUBITS)
    if layout == "grid" and n_qubits is not None and n_qubits != rows * columns:
        section.error("qubits", n_qubits, f"rows x columns = {rows * columns}")
    given = section.raw("edges")
    if name is None or layout is None or n_qubits is None:
        return None
    broken = _qubits(section, "broken_qubits", n_qubits)
    edges = _edges(section, layout, n_qubits, rows, columns, given)
    broken_couplers = _pairs(section, "broken_couplers", n_qubits, section.raw("broken_couplers", []), known=edges)
    physical = section.texts("physical", tuple(str(qubit) for qubit in range(n_qubits)))
    if len(physical) != n_qubits or len(set(physical)) != n_qubits:
        section.error("physical", physical, f"{n_qubits} different labels, one a qubit")
    couplers = tuple(
        pair for pair in edges if pair not in broken_couplers and pair[0] not in broken and pair[1] not in broken
    )
    before = len(section.errors)
    facts: dict[str, Any] = {
        "name": name,
        "n_qubits": n_qubits,
        "layout": layout,
        "couplers": couplers,
        "rows": rows,
        "columns": columns,
        "broken_qubits": broken,
        "broken_couplers": broken_couplers,
        "physical": physical,
        "patches": _patches(section, n_qubits, broken),
        "one_qubit": section.choice("one_qubit", NATIVE_ONE_QUBIT, "u"),
        "two_qubit": _natives(section, edges),
        "timings": _timings(section),
        "limits": _limits(section, n_qubits, edges),
        "errors": _errors(section, n_qubits, edges),
        "invented": section.flag("invented", False),
    }
    section.close()
    return Device(**facts) if len(section.errors) == before else None


def _qubits(section: Section, key: str, n_qubits: int) -> tuple[int, ...]:
    found = section.wholes(key, ())
    for qubit in found:
        if not 0 <= qubit < n_qubits:
            section.error(key, qubit, f"qubits of the device, 0 to {n_qubits - 1}")
            return ()
    return tuple(sorted(set(found)))


def _pairs(
    section: Section, key: str, n_qubits: int, given: Any, known: tuple[Pair, ...] | None = None
) -> tuple[Pair, ...]:
    """Couplers given as [a, b] or "a-b"; each must be two different qubits, and one of the known couplers."""
    out = []
    if not isinstance(given, list):
        section.error(key, given, 'a list of couplers, each [a, b] or "a-b"')
        return ()
    allowed = set(known) if known is not None else None
    for item in given:
        pair = _pair(item)
        if pair is None or not 0 <= pair[0] < pair[1] < n_qubits:
            section.error(key, item, f'a coupler [a, b] or "a-b" of two different qubits from 0 to {n_qubits - 1}')
        elif allowed is not None and pair not in allowed:
            section.error(key, item, "a coupler of the device")
        else:
            out.append(pair)
    return tuple(dict.fromkeys(out))


def _pair(item: Any) -> Pair | None:
    """[a, b] or "a-b" as a rising pair; None where it is neither."""
    if isinstance(item, str):
        parts = item.split("-")
        if len(parts) != 2 or not all(part.strip().isdecimal() and len(part) < 9 for part in parts):
            return None
        item = [int(part) for part in parts]
    if not isinstance(item, list) or len(item) != 2 or any(type(part) is not int for part in item):
        return None
    return (min(item), max(item))


def _edges(section: Section, layout: str, n: int, rows: int, columns: int, given: Any) -> tuple[Pair, ...]:
    if given is not None and layout != "edges":
        section.error("edges", given, f"no edges with layout {layout!r}, only with layout 'edges'")
    if layout == "line":
        return tuple((qubit, qubit + 1) for qubit in range(n - 1))
    if layout == "ring":
        if n < 3:
            section.error("qubits", n, "3 or more for a ring")
            return ()
        return (*((qubit, qubit + 1) for qubit in range(n - 1)), (0, n - 1))
    if layout == "grid":
        right = [(q, q + 1) for q in range(n) if (q + 1) % columns]
        down = [(q, q + columns) for q in range(n - columns)]
        return tuple(sorted(right + down))
    if layout == "all-to-all":
        return tuple(combinations(range(n), 2))
    if given is None:
        section.error("edges", "nothing", "the couplers of layout 'edges', as [[0, 1], [1, 2]]")
        return ()
    return tuple(sorted(_pairs(section, "edges", n, given)))


def _patches(section: Section, n_qubits: int, broken: tuple[int, ...]) -> dict[str, tuple[int, ...]]:
    table = section.section("patches")
    out: dict[str, tuple[int, ...]] = {}
    if table is None:
        return out
    for name in table.data:
        qubits = table.wholes(name, ())
        wrong = [qubit for qubit in qubits if not 0 <= qubit < n_qubits or qubit in broken]
        if wrong or len(set(qubits)) != len(qubits) or not qubits:
            table.error(name, wrong or qubits, f"different working qubits from 0 to {n_qubits - 1}")
        else:
            out[name] = qubits
    return out


def _natives(section: Section, edges: tuple[Pair, ...]) -> tuple[NativeGate, ...]:
    table = section.section("two_qubit")
    out: list[NativeGate] = []
    if table is None:
        return ()
    for name in table.data:
        if name not in NATIVE_TWO_QUBIT:
            table.error(name, name, suggest(name, NATIVE_TWO_QUBIT))
            continue
        gate = table.section(name)
        if gate is None:
            continue
        count = _N_PARAMETERS.get(name, 0)
        parameters = _numbers(gate, "parameters", gate.raw("parameters", []), count if name == "fsim" else None)
        if name == "zz" and len(parameters) > 1:
            gate.error("parameters", list(parameters), "one angle, or none where the device offers any angle")
        if count == 0 and parameters:
            gate.error("parameters", list(parameters), f"no parameters for {name}")
        calibrated: dict[Pair, tuple[float, ...]] = {}
        by_coupler = gate.section("by_coupler")
        if by_coupler is not None:
            for key in by_coupler.data:
                pair = _pair(key)
                if pair is None or pair not in edges:
                    by_coupler.error(key, key, 'a coupler of the device as "a-b"')
                    continue
                calibrated[pair] = _numbers(by_coupler, key, by_coupler.raw(key), count)
        negative = gate.flag("negative", False)
        gate.close()
        out.append(NativeGate(name=name, parameters=parameters, by_coupler=calibrated, negative=negative))
    return tuple(out)


def _numbers(section: Section, key: str, value: Any, count: int | None) -> tuple[float, ...]:
    good = isinstance(value, list) and all(
        isinstance(item, int | float) and not isinstance(item, bool) and abs(item) < 1e6 for item in value
    )
    if not good or (count is not None and len(value) != count):
        section.error(key, value, f"a list of {'' if count is None else f'{count} '}angles in radians")
        return ()
    return tuple(float(item) for item in value)


def _timings(section: Section) -> Timings:
    table = section.section("timings")
    if table is None:
        return Timings()
    default = Timings()
    values = {name: table.number(f"{name}_ns", getattr(default, name), low=0.0) for name in _TIMINGS}
    table.close()
    return Timings(**values)


def _limits(section: Section, n_qubits: int, edges: tuple[Pair, ...]) -> Limits:
    table = section.section("limits")
    if table is None:
        return Limits()
    values: dict[str, Any] = {
        key: table.whole(key, None, low=1) for key in ("shots_per_circuit", "circuits_per_job", "parallel_gates")
    }
    sets = table.raw("exclusive", [])
    if not isinstance(sets, list):
        table.error("exclusive", sets, 'a list of lists of couplers, as [["0-1", "2-3"]]')
        sets = []
    values["exclusive"] = tuple(_pairs(table, "exclusive", n_qubits, item, known=edges) for item in sets)
    table.close()
    return Limits(**values)


def _errors(section: Section, n_qubits: int, edges: tuple[Pair, ...]) -> ErrorBudget | None:
    table = section.section("errors")
    if table is None:
        return None
    facts: dict[str, Any] = {name: _rate(table, name, n_qubits, edges) for name in _RATES}
    idle = table.section("idle")
    facts["idle"] = _idle(idle, n_qubits) if idle is not None else None
    table.close()
    return ErrorBudget(**facts)


def _rate(table: Section, name: str, n_qubits: int, edges: tuple[Pair, ...]) -> Rate | None:
    """One rate; a readout rate is a probability, so that it has no kind of its own."""
    part = table.section(name)
    if part is None:
        return None
    places: dict[tuple[int, ...], float] = {}
    key = "by_coupler" if name == "two_qubit" else "by_qubit"
    listed = part.section(key)
    if listed is not None:
        for label in listed.data:
            value = listed.number(label, None, low=0.0)
            place = _pair(label) if name == "two_qubit" else (int(label),) if label.isdecimal() else None
            known = place in edges if name == "two_qubit" else place is not None and place[0] < n_qubits
            if not known or place is None:
                listed.error(label, label, 'a coupler of the device as "a-b"' if name == "two_qubit" else "a qubit")
            elif value is not None:
                places[place] = value
    readout = name.startswith("readout")
    default = part.number("rate", 0.0 if places else ..., low=0.0)
    facts = {
        "values": places,
        "kind": "pauli" if readout else part.choice("kind", RATE_KINDS),
        "measured": part.choice("measured", RATE_CONDITIONS, "not stated"),
        "uncertainty": part.number("uncertainty", 0.0, low=0.0),
        "date": str(part.raw("date", "")),
    }
    part.close()
    if default is None or facts["kind"] is None:
        return None
    try:
        return Rate(default=default, **facts)
    except InputError as error:
        part.catch(error)
        return None


def _idle(part: Section, n_qubits: int) -> Times | None:
    t1, t2 = part.number("t1_us", low=1e-6), part.number("t2_us", low=1e-6)
    listed: dict[str, dict[int, float]] = {}
    for key in ("t1_by_qubit", "t2_by_qubit"):
        values: dict[int, float] = {}
        table = part.section(key)
        for label in table.data if table is not None else ():
            assert table is not None
            value = table.number(label, None, low=1e-6)
            if not label.isdecimal() or not int(label) < n_qubits:
                table.error(label, label, f"a qubit, 0 to {n_qubits - 1}")
            elif value is not None:
                values[int(label)] = value
        listed[key] = values
    uncertainty, date = part.number("uncertainty", 0.0, low=0.0), str(part.raw("date", ""))
    part.close()
    if t1 is None or t2 is None:
        return None
    times = Times(
        t1=t1,
        t2=t2,
        t1_values=listed["t1_by_qubit"],
        t2_values=listed["t2_by_qubit"],
        uncertainty=uncertainty,
        date=date,
    )
    for qubit in range(n_qubits):
        one, two = times.at(qubit)
        if two > 2 * one:
            part.error("t2_us", two, f"at most 2 T1 = {2 * one:g} (qubit {qubit})")
            return None
    return times


def device_table(device: Device) -> dict[str, Any]:
    """The device as the table that `read_device` reads, every default filled in."""
    table: dict[str, Any] = {
        "name": device.name,
        "invented": device.invented,
        "layout": device.layout,
        "qubits": device.n_qubits,
        "physical": list(device.physical),
        "one_qubit": device.one_qubit,
        "broken_qubits": list(device.broken_qubits),
        "broken_couplers": [list(pair) for pair in device.broken_couplers],
    }
    if device.layout == "grid":
        table |= {"rows": device.rows, "columns": device.columns}
    if device.layout == "edges":
        table["edges"] = [list(pair) for pair in device.couplers] + table["broken_couplers"]
    table["two_qubit"] = {gate.name: _native_table(gate) for gate in device.two_qubit}
    table["patches"] = {name: list(qubits) for name, qubits in device.patches.items()}
    table["timings"] = {f"{name}_ns": getattr(device.timings, name) for name in _TIMINGS}
    limits = device.limits
    stated = {
        "shots_per_circuit": limits.shots_per_circuit,
        "circuits_per_job": limits.circuits_per_job,
        "parallel_gates": limits.parallel_gates,
    }
    table["limits"] = {key: value for key, value in stated.items() if value is not None} | {
        "exclusive": [[coupler_name(pair) for pair in group] for group in limits.exclusive]
    }
    if device.errors is not None:
        table["errors"] = _errors_table(device.errors)
    return table


def _native_table(gate: NativeGate) -> dict[str, Any]:
    table: dict[str, Any] = {"negative": gate.negative}
    if gate.name in _N_PARAMETERS:
        table["parameters"] = list(gate.parameters)
        table["by_coupler"] = {coupler_name(pair): list(values) for pair, values in gate.by_coupler.items()}
    return table


def _errors_table(errors: ErrorBudget) -> dict[str, Any]:
    table: dict[str, Any] = {}
    for name in _RATES:
        rate: Rate | None = getattr(errors, name)
        if rate is None:
            continue
        places: Mapping[str, float] = {"-".join(str(part) for part in place): v for place, v in rate.values.items()}
        table[name] = {
            "rate": rate.default,
            "measured": rate.measured,
            "uncertainty": rate.uncertainty,
            "date": rate.date,
            "by_coupler" if name == "two_qubit" else "by_qubit": dict(places),
        }
        if not name.startswith("readout"):
            table[name]["kind"] = rate.kind
    if errors.idle is not None:
        idle = errors.idle
        table["idle"] = {
            "t1_us": idle.t1,
            "t2_us": idle.t2,
            "t1_by_qubit": {str(qubit): value for qubit, value in idle.t1_values.items()},
            "t2_by_qubit": {str(qubit): value for qubit, value in idle.t2_values.items()},
            "uncertainty": idle.uncertainty,
            "date": idle.date,
        }
    return table
