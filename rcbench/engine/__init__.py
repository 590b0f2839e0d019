"""Evolution of states through the rows of circuits, and the distributions that follow.

    state.py         one circuit to its final state
    tree.py          many circuits at once; what they share from the start is evolved once
    predict.py       circuits to distributions over measured bits: ideal, and under the stated error model
    distribution.py  what a prediction is
    noise.py         the stated rates as Pauli errors, idle errors and readout flips
    trajectories.py  sampled error patterns and the mixture they make
    program.py       rows fused into few operators, the form that the kernels take
    blocks.py        programs cut into sweeps of cache-sized blocks
    kernels.py       compiled loops over vectors of amplitudes (lanes.py); reference.py is the slow and obvious twin
    memory.py, threads.py, compiled.py   what the machine gives

Call `tree.walk` for states of several circuits, `state.final_state` for one, `predict.distributions` for probabilities.
"""
