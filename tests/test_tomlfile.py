import pytest

from rcbench.errors import InputError
from rcbench.tomlfile import Section, read_toml

TEXT = """\
title = "a"

[device]
name = "d"
[device.errors]
one = { rate = 1 }

[[experiment]]
name = "first"
note = '''
depths = 3
'''
depths = [1]

[[experiment]]
name = "second"
[experiment.margins]
otoc = 0.1
"""


def read(text=TEXT):
    from pathlib import Path

    return read_toml(Path("c.toml"), text)


@pytest.mark.parametrize(
    ("keys", "line"),
    [
        (("title",), 1),
        (("device",), 3),
        (("device", "name"), 4),
        (("device", "errors", "one"), 6),
        (("device", "errors", "one", "rate"), 6),
        (("experiment", 0, "name"), 9),
        (("experiment", 0, "depths"), 13),
        (("experiment", 1), 15),
        (("experiment", 1, "margins", "otoc"), 18),
        (("experiment", 1, "absent"), 15),
        (("absent",), 1),
    ],
)
def test_each_key_knows_its_line(keys, line):
    assert read().line(*keys) == line


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("a = 1\nb = \n", r"^c.toml:2: syntax: found 'b ='"),
        ("a = 1\na = 2\n", r"c.toml:2: syntax"),
        ("[x\n", r"c.toml:1: syntax"),
    ],
)
def test_a_syntax_error_gives_its_line(text, message):
    with pytest.raises(InputError, match=message):
        read(text)


def test_a_section_collects_every_error_and_names_what_is_allowed():
    errors: list[InputError] = []
    file = read("shots = 0\ndepths = [1, 'x']\nnested = 1\nfamilly = 'x'\nrate = nan\n")
    section = Section(file, (), file.data, errors)
    assert section.whole("shots", low=1) is None
    assert section.wholes("depths") is None
    assert section.flag("nested") is None
    assert section.number("rate") is None
    assert section.choice("family", ["brickwork"], "brickwork") == "brickwork"
    assert section.text("name") is None
    section.close()
    assert [str(error).split(": allowed")[0] for error in errors] == [
        "c.toml:1: shots: found 0; allowed: a whole number from 1 to 9007199254740992",
        "c.toml:2: depths: found 'x'; allowed: whole numbers only",
        "c.toml:3: nested: found 1; allowed: true or false",
        "c.toml:5: rate: found nan; allowed: a finite number",
        "c.toml:1: name: found 'nothing'; allowed: a text in quotes",
        "c.toml:4: familly: found 'x'; allowed: depths, family, name, nested, rate, shots (did you mean 'family'?)",
    ]
