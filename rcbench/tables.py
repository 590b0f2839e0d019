"""The columns of every table that rcbench writes or reads, and how they are written: each decision once."""

from __future__ import annotations

ROSTER = (
    "circuit_id", "experiment", "protocol", "role", "family", "gates", "n_qubits", "measured_qubits",
    "physical_qubits", "patch", "depth", "instance", "setting", "repeat", "shots", "run_order", "batch",
    "target", "params", "two_qubit_gates", "native_layers", "duration_ns", "sha256",
)  # fmt: skip
PREDICTIONS = (
    "experiment", "protocol", "signature", "axis", "unit", "region", "n_qubits", "depth", "instance",
    "circuit_id", "model", "value", "std_error", "u_model", "method",
)  # fmt: skip
ESTIMATES = (
    "experiment", "protocol", "signature", "axis", "unit", "region", "n_qubits", "depth", "instance",
    "circuit_id", "repeat", "value", "std_error", "shots",
)  # fmt: skip
COMPARISON = (
    "experiment", "protocol", "signature", "axis", "unit", "region", "n_qubits", "depth",
    "instances_planned", "instances_returned", "instances", "shots", "ideal", "noise_model", "null_value",
    "control_value", "measured", "std_error", "ci_low", "ci_high", "interval_kind", "difference",
    "diff_ci_low", "diff_ci_high", "u_stat", "u_syst", "u_combined", "dof", "z_ideal", "z_noise", "margin",
    "direction", "finding", "note",
)  # fmt: skip
FINDINGS = ("agrees", "departs", "undecided", "not-tested")
