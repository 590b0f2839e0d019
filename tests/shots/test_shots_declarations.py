import pytest
from shot_cases import Row, make_kit, strings_of, write

from rcbench.errors import InputError
from rcbench.shots.declarations import EXECUTION_KEYS, read_execution
from rcbench.shots.reader import read_shots

KIT = make_kit(Row(circuit_id="a", measured_qubits=(0, 1, 2)))


def read(folder, declared=None, content="a,001\n", **how):
    if declared is not None:
        write(folder / "shots.toml", declared)
    return read_shots(write(folder / "s.csv", "circuit_id,bitstring\n" + content), KIT, **how)


def bits_of(shots):
    return strings_of(shots.outcomes["a", 0].bits())


def test_the_bit_order_must_be_stated_and_the_message_says_how(tmp_path):
    with pytest.raises(InputError, match=r"bit_order: found 'nothing'.*q0-first.*shots\.toml.*--bit-order"):
        read(tmp_path)
    with pytest.raises(InputError, match=r"shots\.toml:1: bit_order: found 'nothing'.*q0-last"):
        read(tmp_path, 'lost = "x"')


@pytest.mark.parametrize(("order", "bits"), [("q0-first", "001"), ("q0-last", "100")])
def test_the_bit_order_may_come_from_the_file_or_the_argument(tmp_path, order, bits):
    assert bits_of(read(tmp_path, bit_order=order)) == [bits]
    stated = read(tmp_path, f'bit_order = "{order}"')
    assert bits_of(stated) == [bits]
    assert stated.bit_order == order
    assert bits_of(read(tmp_path, f'bit_order = "{order}"', bit_order=order)) == [bits]


def test_the_argument_against_the_file_is_refused(tmp_path):
    with pytest.raises(InputError, match=r"shots\.toml:2: bit_order: found 'q0-last'; allowed: q0-first"):
        read(tmp_path, '# ours\nbit_order = "q0-first"', bit_order="q0-last")


def test_a_register_map_names_the_bit_of_each_character(tmp_path):
    shots = read(tmp_path, "bits = [2, -1, 0, 1]", "a,1x01\n".replace("x", "0"))
    assert bits_of(shots) == ["011"]  # characters 1, 0, 0, 1 are bits 2, none, 0, 1
    assert shots.bit_order == "register map"


@pytest.mark.parametrize(
    ("declared", "message"),
    [
        ('bit_order = "q0"', r"shots\.toml:1: bit_order: found 'q0'; allowed: q0-first, q0-last"),
        ('order = "q0-first"', r"shots\.toml:1: order: .*bit_order"),
        ('bit_order = "q0-first"\nbits = [0, 1, 2]', r"shots\.toml:2: bits: .*either bits or a bit order"),
        ("bits = [0, 0, 1]", r"shots\.toml:1: bits: found \[0, 0, 1\]; allowed: a list"),
        ("bits = [0, 1]", r"shots\.toml: bits: found \[0, 1\]; allowed: .*circuits of this kit have 3 bits"),
        ('bit_order = "q0-first"\nlost = "10"', r"shots\.toml:2: lost: found '10'; allowed: single printable"),
        ('bit_order = "q0-first"\nlost = ["1"]', r"shots\.toml:2: lost: found '1'"),
        ('bit_order = "q0-first"\nseparator = "1"', r"shots\.toml:2: separator: found '1'"),
        ('bit_order = "q0-first"\n[repeat]\n"t.csv" = 1', r"shots\.toml.*t\.csv.*a file beside"),
        ('bit_order = "q0-first"\n[repeat]\n"s.csv" = -1', r"shots\.toml:3: s\.csv: found -1; allowed: a whole number"),
        ("bit_order = q0", r"shots\.toml:1: syntax"),
    ],
)
def test_a_wrong_declaration_is_refused_with_its_line(tmp_path, declared, message):
    with pytest.raises(InputError, match=message):
        read(tmp_path, declared)


def test_shots_with_lost_or_leaked_qubits_are_set_aside_and_counted(tmp_path):
    shots = read(tmp_path, 'bit_order = "q0-first"\nlost = "x"\nleaked = ["2"]', "a,0x1\na,021\na,x2x\na,001\n")
    assert bits_of(shots) == ["001"]
    assert shots.discards == {("a", 0): 3}
    with pytest.raises(InputError, match=r"s\.csv:2: bitstring: found '0y1'; .*0 and 1 \(or x, 2 for a lost"):
        read(tmp_path, content="a,0y1\n")


def test_a_separator_between_registers_is_taken_out(tmp_path):
    assert bits_of(read(tmp_path, 'bit_order = "q0-first"\nseparator = " "', "a, 0 01 \na,001\n")) == ["001"]


def test_nothing_stated_about_the_execution_is_said_so(tmp_path):
    execution = read_execution(tmp_path)
    assert set(execution.facts().values()) == {"not stated"}
    assert set(execution.not_stated()) == set(EXECUTION_KEYS) - {"notes"}


def test_facts_about_the_execution_are_read(tmp_path):
    text = 'started = 2026-03-04T09:00:00Z\nended = "2026-03-04T11:00:00+01:00"\ntwirling = false\n'
    write(tmp_path / "execution.toml", text + 'physical_qubits = ["A0", "A1"]\ncompiler = { name = "none", level = 0 }')
    execution = read_execution(tmp_path)
    assert execution.started == "2026-03-04T09:00:00Z"
    assert execution.twirling == "no"
    assert execution.physical_qubits == "A0 A1"
    assert execution.compiler == "name=none, level=0"
    assert "software" in execution.not_stated()


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("twirl = true", r"execution\.toml:1: twirl: found True; allowed: .*did you mean 'twirling'"),
        ('started = "Tuesday"', r"execution\.toml:1: started: found 'Tuesday'; allowed: a date and time"),
        ("started = 2026-03-04T09:00:00Z\nended = 2026-03-04T08:00:00Z", r"execution\.toml:2: ended: .*after started"),
    ],
)
def test_a_wrong_fact_is_refused_with_its_line(tmp_path, text, message):
    write(tmp_path / "execution.toml", text)
    with pytest.raises(InputError, match=message):
        read_execution(tmp_path)
