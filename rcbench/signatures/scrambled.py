"""The value of each signature for Haar-random states and unitaries of the same size, in outside units."""

from __future__ import annotations

from math import log

from rcbench.reference import frame_potentials, haar, porter_thomas
from rcbench.regions import read_regions, read_setting
from rcbench.signatures import STATE_FRAME_KEYS, UNITARY_FRAME_KEYS
from rcbench.signatures.distinguishability import haar_total_variation

METHOD = "Haar-random, closed form"


def haar_value(key: str, region: str, n_qubits: int) -> float | None:
    """Mean over Haar-random states or unitaries, None where there is no closed form here.

    Args:
        key: of the registry. region: label of the row. n_qubits: of the experiment.
    Raises:
        InputError: a label that cannot be read.
    """
    dimension = 2**n_qubits
    if key in UNITARY_FRAME_KEYS:
        return float(frame_potentials.unitary(int(key[-1]), dimension))
    if key in STATE_FRAME_KEYS:
        return frame_potentials.state(int(key[-1]), dimension)
    if key in ("otoc", "otoc_infinite_temperature"):
        return haar.otoc(n_qubits)
    if (key.startswith("operator_") and "tmi" not in key) or key == "right_end_density":
        return _of_operator(key, region, n_qubits)
    if region and "=" not in region:
        return _of_regions(key, [len(part) for part in read_regions(region)], n_qubits)
    whole: dict[str, float] = {
        "collision_probability": porter_thomas.collision_probability(dimension),
        "xeb_linear": porter_thomas.linear_xeb(dimension),
        "output_entropy": porter_thomas.entropy(dimension) / log(2),
        "output_moment_k3": porter_thomas.moment(3, dimension),
        "output_moment_k4": porter_thomas.moment(4, dimension),
        "twin_overlap": 0.0,
    }
    return whole.get(key)


def _of_operator(key: str, region: str, n: int) -> float | None:
    strings = 4.0**n
    parts = read_setting(region)
    if key == "operator_size":
        return haar.operator_size(n)
    if key == "operator_size_distribution":
        return float(haar.operator_size_distribution(n)[int(parts["size"])])
    if key == "operator_support":
        return 0.75 * strings / (strings - 1)
    if key == "right_end_density":
        return 3 * 4.0 ** int(parts["site"]) / (strings - 1)
    return None


def _of_regions(key: str, sizes: list[int], n: int) -> float | None:
    bits = 1 / log(2)
    if key == "purity":
        return haar.purity(sizes[0], n)
    if key == "renyi2_entropy":
        return bits * haar.renyi2_entropy(sizes[0], n)
    if key == "vonneumann_entropy":
        return bits * haar.vonneumann_entropy(sizes[0], n)
    if key.startswith("mutual_information"):
        entropy = haar.renyi2_entropy if "renyi2" in key else haar.vonneumann_entropy
        a, b = sizes
        return bits * (entropy(a, n) + entropy(b, n) - entropy(a + b, n))
    if key in ("tmi_renyi2", "tmi_vonneumann"):
        three = haar.tmi_renyi2 if key == "tmi_renyi2" else haar.tmi_vonneumann
        return bits * three(sizes[0], sizes[1], sizes[2], n)
    if key == "operator_tmi_renyi2":
        return bits * haar.operator_tmi_renyi2(sizes[0], sizes[1], n)
    if key == "operator_tmi_vonneumann" and n >= 6 and sizes == [n // 2, n // 2] and n % 2 == 0:
        return bits * haar.operator_tmi_halves(n)  # other cuts have no closed form that holds at small sizes
    if key == "local_distinguishability":
        return haar_total_variation(sizes[0], n)
    return None
