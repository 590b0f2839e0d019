import time

import numpy as np
import pyarrow as pa
import pyarrow.csv as pc
import pyarrow.parquet as pq
import pytest
from shot_cases import Row, make_kit, random_bits

from rcbench.shots.reader import read_shots

CIRCUITS, SHOTS, N_BITS = 100, 10_000, 20


def million_shots():
    bits = random_bits(11, CIRCUITS * SHOTS, N_BITS) + np.uint8(48)
    strings = pa.array(bits.view(f"S{N_BITS}").ravel().tolist(), pa.string())
    ids = pa.array(np.repeat([f"line-sample-i{c:03d}-d012" for c in range(CIRCUITS)], SHOTS).tolist())
    return pa.table({"circuit_id": ids, "bitstring": strings})


def plain_csv(path):
    kinds = {"circuit_id": pa.string(), "bitstring": pa.string()}
    reader = pc.open_csv(path, convert_options=pc.ConvertOptions(column_types=kinds))
    return sum(batch.num_rows for batch in reader)


def plain_parquet(path):
    return sum(batch.num_rows for batch in pq.ParquetFile(path).iter_batches())


@pytest.mark.benchmark
@pytest.mark.parametrize(
    ("name", "write", "plain"), [("s.csv", pc.write_csv, plain_csv), ("s.parquet", pq.write_table, plain_parquet)]
)
def test_reading_a_million_shots_takes_a_few_times_what_loading_the_columns_takes(tmp_path, name, write, plain, capsys):
    """Processor time of all threads; the limit is loose, the printed ratio is what to look at."""
    write(million_shots(), tmp_path / name)
    kit = make_kit(
        *(Row(circuit_id=f"line-sample-i{c:03d}-d012", measured_qubits=tuple(range(20))) for c in range(CIRCUITS))
    )
    start = time.process_time()
    assert plain(tmp_path / name) == CIRCUITS * SHOTS
    loaded = time.process_time()
    shots = read_shots(tmp_path / name, kit, bit_order="q0-first")
    done = time.process_time()
    assert sum(outcomes.shots for outcomes in shots.outcomes.values()) == CIRCUITS * SHOTS
    with capsys.disabled():
        print(f"\n{name}: {done - loaded:.2f} s, plain reader {loaded - start:.2f} s")
    assert done - loaded < 20 * (loaded - start)
