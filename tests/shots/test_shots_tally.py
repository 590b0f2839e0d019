from collections import Counter

import numpy as np
import pytest
from shot_cases import random_bits, strings_of

from rcbench.shots import tally as module
from rcbench.shots.decode import pack_words
from rcbench.shots.tally import Tally


@pytest.mark.parametrize("max_bits", [5, 12, 40, 41, 64, 65, 130])
@pytest.mark.parametrize("counted", [False, True])
@pytest.mark.parametrize("rows_at_once", [1, 50, 10**6])
def test_batches_in_any_order_add_up_as_a_counter_does(monkeypatch, max_bits, counted, rows_at_once):
    monkeypatch.setattr(module, "ROWS_AT_ONCE", rows_at_once)
    rng = np.random.default_rng(5)
    widths = [max_bits, min(3, max_bits), max_bits, 1]
    tally, expected = Tally(max_bits), Counter()
    parts = [tally, Tally(max_bits)]
    for batch in range(12):
        run = int(rng.integers(0, 4))
        if run == 2:
            continue  # a run that never comes
        bits = random_bits(100 + batch, 40, widths[run])
        bits[:, 3:] &= batch % 2 == 0  # some batches hold few different outcomes
        counts = rng.integers(1, 2**40, 40) if counted or batch % 3 == 0 else None
        parts[batch % 2].add(np.full(40, run), pack_words(bits + np.uint8(48)), counts)
        for text, count in zip(strings_of(bits), [1] * 40 if counts is None else counts.tolist(), strict=True):
            expected[run, text] += count
    parts[0].extend(parts[1])
    found = {}
    numbers = []
    for run, outcomes in tally.outcomes(widths):
        numbers.append(run)
        assert np.array_equal(outcomes.packed, np.unique(outcomes.packed, axis=0))
        found |= {(run, t): c for t, c in zip(strings_of(outcomes.bits()), outcomes.counts.tolist(), strict=True)}
    assert numbers == [0, 1, 3]
    assert found == expected
