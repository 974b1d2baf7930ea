"""Where an entry of a TOML file stands: written by hand, so each place can be counted."""

from __future__ import annotations

import pytest

from gasphys.errors import InputFileError
from gasphys.toml_files import parse_toml, read_text

TEXT = """\
code = "P-09"
stock = 1

[bank]
  stock = 3
notes = { stock = 9 }

[[line]]
stock = 4

[[line]] # the second
pressure = 200
"stock" = 5
[line.valve]
turns = 2
[last]
stock = 6
"""


@pytest.mark.parametrize(
    ("key", "table", "number", "place"),
    [
        ("stock", "", 0, (2, 1)),
        ("stock", "bank", 0, (5, 3)),
        ("stock", "line", 0, (9, 1)),
        ("stock", "line", 1, (13, 2)),
        ("turns", "line", 1, (15, 1)),
        ("stock", "last", 0, (17, 1)),
        ("stock", None, 0, (2, 1)),
        ("turns", None, 0, (15, 1)),
        ("pressure", "line", 0, (8, 1)),  # not there: its table
        ("", "last", 0, (16, 1)),
        ("bank", None, 0, (4, 2)),
        ("nothing", "", 0, (None, None)),
        ("stock", "line", 2, (2, 1)),  # no third table: wherever it stands first
    ],
)
def test_place(key, table, number, place):
    error = parse_toml(TEXT, "f.toml").error("m", "r", key=key, table=table, number=number)
    assert (error.line, error.column) == place


@pytest.mark.parametrize(
    ("text", "line", "column"),
    [("a = 1\nb = = 2\n", 2, 5), ("a = 1\na = 2\n", 2, 6), ("a = [1,\n2", 2, 1)],
)
def test_not_toml(text, line, column):
    with pytest.raises(InputFileError, match=r"^f\.toml, line .*Remedy: write it") as caught:
        parse_toml(text, "f.toml", "write it")
    assert (caught.value.line, caught.value.column) == (line, column)


@pytest.mark.parametrize(
    ("content", "message"), [(b"\xff\xfe=", "not UTF-8"), (None, "No such file")], ids=["bytes", "missing"]
)
def test_unreadable(tmp_path, content, message):
    path = tmp_path / "f.toml"
    if content is not None:
        path.write_bytes(content)
    with pytest.raises(InputFileError, match=message):
        read_text(path)


def test_byte_order_mark(tmp_path):
    path = tmp_path / "f.toml"
    path.write_bytes(b"\xef\xbb\xbfa = 1")
    assert read_text(path) == "a = 1"
