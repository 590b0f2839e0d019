"""Circuits: rows of arrays, and everything that makes, compiles, turns around, writes and reads them.

circuit, gates      a circuit as rows of (layer, gate kind, qubits, parameters), and the table of gate kinds
families            what an experiment draws: brickworks, controls, and models with a structure of their own
schedule            which couplers a layer uses, and which gates of it may run together
ensembles, cliffords, frames    random one-qubit layers, random two-qubit gates, random Pauli frames
native, compile, kak            any unitary written in a device's native gates
transform, inverses             inverse, conjugate and transpose in the same native gates
export, qasm, cirq_import       OpenQASM and Cirq's JSON, out and in
"""
