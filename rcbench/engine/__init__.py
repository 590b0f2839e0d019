"""Evolution of states through the rows of circuits, and the distributions that follow.

For callers:

    state.py         one circuit to its final state
    tree.py          many circuits at once; what they share from the start is evolved once
    predict.py       circuits to distributions over measured bits: ideal, and under the stated error model
    local.py         averages of single qubits, each from its own light cone; registers of any size
    distribution.py  what a prediction is; parts.py: what it is where one distribution of all bits would not fit
    noise.py         the stated rates as Pauli errors, idle errors and readout flips
    forecast.py      what simulations will cost; work.py: what they did cost

Inside, from rows to numbers:

    program.py       rows fused into few operators; turns.py: quarter turns split so that additions do
    operators.py     the cheapest exact kernel of each operator
    blocks.py        operators cut into sweeps over cache-sized blocks
    kernels.py       compiled loops over registers of amplitudes (lanes.py); reference.py is the slow and obvious twin
    cones.py         gates that cancel or that nothing measured depends on, taken out
    register.py      distributions from the states of a whole register
    trajectories.py  sampled error patterns; mixture.py: their runs added up; readout.py: measured bits and flips
    memory.py, threads.py, compiled.py   what the machine gives

Call `tree.walk` for states of several circuits, `state.final_state` for one, `predict.distributions` for probabilities.
"""
