"""Include files in place, comments out, and the way back to file and line."""

from __future__ import annotations

import os

import pytest
from qasm_cases import HEAD2, rows

from rcbench.circuits.qasm import read_circuit_file, read_program, read_qasm
from rcbench.circuits.qasm_source import read_source
from rcbench.errors import InputError

MAIN = 'OPENQASM 2.0;\ninclude "native.inc";\nqreg q[2];\nRZ(0.1) q[0];\nENT q[0],q[1];\n'


def test_an_include_that_includes_another_is_put_in_place_and_the_text_stands_alone(tmp_path):
    (tmp_path / "native.inc").write_text('include "base/low.inc";\ngate ENT a,b { CX a,b; }  // entangler\n')
    (tmp_path / "base").mkdir()
    (tmp_path / "base" / "low.inc").write_text("gate RZ(angle) a { U(0,0,angle) a; }")  # no line end
    program = read_program(MAIN, name="a.qasm", include_dirs=[tmp_path])
    assert [path.name for path in program.files] == ["native.inc", "low.inc"]
    assert "// entangler" in program.text
    assert 'include "native.inc"' not in program.text
    again = read_program(program.text, name="kit.qasm")
    assert again.text == program.text
    assert rows(program.text) == [("rz", (0,), (0.1,)), ("cx", (0, 1), ())]


def test_an_include_is_looked_for_beside_the_file_that_includes_it_first(tmp_path):
    (tmp_path / "circuits").mkdir()
    (tmp_path / "shared").mkdir()
    (tmp_path / "shared" / "native.inc").write_text("gate RZ(t) a { x a; }")
    (tmp_path / "circuits" / "native.inc").write_text("gate RZ(t) a { U(0,0,t) a; }\ngate ENT a,b { CX a,b; }")
    path = tmp_path / "circuits" / "a.qasm"
    path.write_text(MAIN)
    circuit = read_circuit_file(path)
    assert circuit.row_parameters(0) == (0.1,)
    with pytest.raises(InputError, match=r"native.inc:1: "):
        read_program(MAIN, name="a.qasm", include_dirs=[tmp_path / "shared"])


def test_a_standard_file_in_an_include_folder_takes_the_place_of_ours(tmp_path):
    (tmp_path / "qelib1.inc").write_text("gate h a { U(pi,0,pi) a; }\n")
    text = f"{HEAD2}qreg q[1];\nh q[0];\n"
    program = read_program(text, name="a.qasm", include_dirs=[tmp_path])
    assert rows(program.text) == [("x", (0,), ())]
    assert rows(text) == [("h", (0,), ())]


def test_a_missing_include_is_named_with_the_gates_that_nothing_defines():
    head = 'OPENQASM 2.0;\n\ninclude "qelib1.inc";\ninclude "native.inc";\nqreg q[2];\n'
    text = head + "h q[0];\nRZ(0.1) q[0];\nENT q[0],q[1];\nRZ(2) q[1];\n"
    with pytest.raises(InputError) as caught:
        read_qasm(text, name="a.qasm")
    assert str(caught.value) == (
        "a.qasm:4: include: found 'native.inc'; allowed: a file beside the program or in a folder given by --include; "
        "nowhere defined: RZ, ENT"
    )


def test_a_missing_include_is_an_error_even_where_nothing_of_it_is_used():
    with pytest.raises(InputError, match=r"a.qasm:2: include: found 'x.inc'; .*no gate of it is used"):
        read_qasm('OPENQASM 2.0;\ninclude "x.inc";\nqreg q[1];\nU(0,0,0) q[0];\n', name="a.qasm")


def test_an_error_inside_an_include_file_names_that_file_and_line(tmp_path):
    (tmp_path / "native.inc").write_text(
        "gate RZ(angle) a { U(0,0,angle) a; }\n\ngate ENT a,b {\n  CX a,b;\n  foo b;\n}\n"
    )
    with pytest.raises(InputError, match=r"^native.inc:5: gate: found 'foo'"):
        read_program(MAIN, name="a.qasm", include_dirs=[tmp_path])


def test_lines_after_an_include_and_many_comments_are_still_counted_right(tmp_path):
    (tmp_path / "native.inc").write_text("gate RZ(angle) a { U(0,0,angle) a; }\n" * 1 + "\n" * 30)
    head = '// one\nOPENQASM 2.0; /* two\nthree */ include "native.inc"; // four\nqreg q[1];\n'
    text = head + "/* x; */ RZ(1) q[0]; foo q[0];"
    with pytest.raises(InputError, match=r"^a.qasm:5: gate: found 'foo'"):
        read_program(text, name="a.qasm", include_dirs=[tmp_path])


def test_comments_hide_statements_and_includes_and_strings_hide_comment_signs(tmp_path):
    (tmp_path / "a//b.inc").parent.mkdir()
    (tmp_path / "a" / "b.inc").write_text("gate g a { U(pi,0,pi) a; }")
    head = 'OPENQASM 2.0;\n// include "no.inc";\n/* include "no.inc"; x q[9]; */\ninclude "a//b.inc";\n'
    text = head + "qreg q[1];\ng q[0]; // x q[0];\n"
    program = read_program(text, name="a.qasm", include_dirs=[tmp_path])
    assert rows(program.text) == [("x", (0,), ())]


@pytest.mark.parametrize("line_end", ["\n", "\r\n"])
def test_either_line_end_a_byte_order_mark_and_one_long_line_read_alike(line_end):
    text = f"\ufeff{HEAD2}qreg q[1];\nx q[0];\n".replace("\n", line_end)
    assert rows(text) == rows(text.replace(line_end, " ")) == [("x", (0,), ())]


def test_includes_in_a_circle_are_refused_where_the_circle_closes(tmp_path):
    (tmp_path / "a.inc").write_text('include "b.inc";\n')
    (tmp_path / "b.inc").write_text('\ninclude "a.inc";\n')
    with pytest.raises(
        InputError, match=r"^b.inc:2: include: found 'a.inc'; allowed: a file that does not include itself"
    ):
        read_program('include "a.inc";\nqubit q;\n', name="m.qasm", include_dirs=[tmp_path])


def test_includes_that_multiply_are_refused(tmp_path):
    for level in range(12):
        (tmp_path / f"{level}.inc").write_text(f'include "{level + 1}.inc";\n' * 2)
    (tmp_path / "12.inc").write_text("\n")
    with pytest.raises(InputError, match="at most 1000 includes"):
        read_program('include "0.inc";\nqubit q;\n', name="m.qasm", include_dirs=[tmp_path])


def test_an_include_may_climb_within_its_folders_and_not_out_of_them(tmp_path):
    (tmp_path / "lib" / "deep").mkdir(parents=True)
    (tmp_path / "secret.inc").write_text("gate g a { U(0,0,0) a; }")
    (tmp_path / "lib" / "top.inc").write_text("gate g a { U(pi,0,pi) a; }")
    (tmp_path / "lib" / "deep" / "in.inc").write_text('include "../top.inc";')
    text = 'OPENQASM 2.0;\ninclude "{}";\nqreg q[1];\ng q[0];\n'
    assert read_program(text.format("deep/in.inc"), name="a.qasm", include_dirs=[tmp_path / "lib"])
    for name in ("../secret.inc", str(tmp_path / "secret.inc")):
        with pytest.raises(InputError, match=r"a.qasm:2: include: .* inside the program's own folder"):
            read_program(text.format(name), name="a.qasm", include_dirs=[tmp_path / "lib"])
    os.symlink(tmp_path / "secret.inc", tmp_path / "lib" / "link.inc")
    with pytest.raises(InputError, match="inside the program's own folder"):
        read_program(text.format("link.inc"), name="a.qasm", include_dirs=[tmp_path / "lib"])


def test_an_include_that_is_no_text_is_refused_with_the_place_that_asks_for_it(tmp_path):
    (tmp_path / "native.inc").write_bytes(b"\xff\xfe\x00g")
    with pytest.raises(InputError, match=r"^a.qasm:2: include: .*UTF-8"):
        read_program(MAIN, name="a.qasm", include_dirs=[tmp_path])


def test_a_comment_left_open_is_refused_with_its_line():
    with pytest.raises(InputError, match=r"^a.qasm:4: comment: "):
        read_qasm(f"{HEAD2}qreg q[1];\n/* x q[0];\n", name="a.qasm")


def test_pragmas_and_annotations_are_left_out():
    text = "OPENQASM 3.0;\npragma vendor.mode fast\n#pragma x\n@note something;here\nqubit q;\nU(pi,0,pi) q;\n"
    assert len(rows(text)) == 1


def test_code_and_text_of_a_source_have_the_same_length_and_places(tmp_path):
    (tmp_path / "native.inc").write_text("gate RZ(angle) a { U(0,0,angle) a; } // c\n")
    source = read_source(MAIN + "/* c\n */ x q;", "a.qasm", [tmp_path])
    assert len(source.code) == len(source.text)
    assert source.place(source.code.index("gate RZ")) == "native.inc:1: "
    assert source.place(source.code.index("x q")) == "a.qasm:7: "
