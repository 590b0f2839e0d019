"""The device as stated: median and worst of every rate, with its kind, condition and date."""

from __future__ import annotations

from collections.abc import Callable
from statistics import median

from rcbench.device import Device, Rate, Times
from rcbench.report.printed import MISSING, number
from rcbench.report.source import NOT_STATED, Source
from rcbench.report.table import Row, Table, table


def device_table(source: Source) -> Table:
    """One row a stated rate over the working qubits or couplers; T1 and T2 with their shortest."""
    device, errors = source.campaign.device, source.campaign.device.errors
    qubits: list[tuple[int, ...]] = [(qubit,) for qubit in device.working_qubits]
    couplers: list[tuple[int, ...]] = list(device.couplers)
    rows: list[Row] = []
    if errors is not None:
        for name, rate, places in (
            ("one-qubit gate error", errors.one_qubit, qubits),
            ("two-qubit gate error", errors.two_qubit, couplers),
            ("readout p(1|0)", errors.readout_0to1, qubits),
            ("readout p(0|1)", errors.readout_1to0, qubits),
        ):
            rows.append(_rate(source, name, rate, places))
        rows += _times(source, errors.idle, device)
    columns = "quantity, median>, worst>, worst at, kind, measured, relative u>, date"
    return table("device", "Stated error budget", columns, rows)


def _rate(source: Source, name: str, rate: Rate | None, places: list[tuple[int, ...]]) -> Row:
    if rate is None or not places:
        return Row(cells=(name, MISSING, MISSING, MISSING, NOT_STATED, NOT_STATED, MISSING, NOT_STATED))
    values = {place: rate.at(*place) for place in places}
    worst = max(values, key=lambda place: values[place])
    # a probability of a wrong outcome has no kind; gate errors are stated in several
    kind = "probability" if name.startswith("readout") else rate.kind.replace("-", " ")
    return Row(
        cells=(
            name,
            number(median(values.values())),
            number(values[worst]),
            "all alike" if len(set(values.values())) == 1 else "–".join(source.qubit_name(qubit) for qubit in worst),
            kind,
            rate.measured,
            number(rate.uncertainty, 2) if rate.uncertainty else NOT_STATED,
            rate.date or NOT_STATED,
        )
    )


def _times(source: Source, times: Times | None, device: Device) -> list[Row]:
    rows = []
    picks: tuple[tuple[str, Callable[[Times, int], float]], ...] = (
        ("T1 / µs", lambda stated, qubit: stated.at(qubit)[0]),
        ("T2 / µs", lambda stated, qubit: stated.at(qubit)[1]),
    )
    for name, pick in picks:
        if times is None or not device.working_qubits:
            rows.append(Row(cells=(name, MISSING, MISSING, MISSING, NOT_STATED, NOT_STATED, MISSING, NOT_STATED)))
            continue
        values = {qubit: pick(times, qubit) for qubit in device.working_qubits}
        worst = min(values, key=lambda qubit: values[qubit])
        rows.append(
            Row(
                cells=(
                    name,
                    number(median(values.values())),
                    number(values[worst]),
                    "all alike" if len(set(values.values())) == 1 else source.qubit_name(worst),
                    "decay time",
                    NOT_STATED,
                    number(times.uncertainty, 2) if times.uncertainty else NOT_STATED,
                    times.date or NOT_STATED,
                )
            )
        )
    return rows


def device_facts(source: Source) -> list[tuple[str, str]]:
    """Layout, durations and limits in pairs of name and value."""
    device = source.campaign.device
    times, limits = device.timings, device.limits
    size = f" {device.rows} x {device.columns}" if device.layout == "grid" else ""
    broken = [source.qubit_name(qubit) for qubit in device.broken_qubits]
    broken += ["–".join(source.qubit_name(qubit) for qubit in pair) for pair in device.broken_couplers]
    parts = [
        f"{words} {value}"
        for words, value in (
            ("shots a circuit", limits.shots_per_circuit),
            ("circuits a job", limits.circuits_per_job),
            ("gates at once", limits.parallel_gates),
            ("sets of couplers that must not run together", len(limits.exclusive) or None),
        )
        if value is not None
    ]
    return [
        ("Layout", f"{device.layout}{size}, {device.n_qubits} qubits, {len(device.couplers)} working couplers"),
        ("Broken", ", ".join(broken) or "none"),
        (
            "Durations",
            f"one-qubit {times.one_qubit:g} ns, two-qubit {times.two_qubit:g} ns, measurement {times.measure:g} ns",
        ),
        ("Limits", "; ".join(parts) or "none stated"),
    ]
