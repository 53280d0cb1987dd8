"""TOML with line numbers."""

import pytest

from massfingerprint.errors import MissingFileError, TableError
from massfingerprint.files.toml import read_toml

TEXT = """# comment
title = "t"
[mass]
file = "a.csv"
"quoted key" = 1
[[windows]]
name = "one"
[[windows]]   # second
name = "two"
start = 2003-01-01
[regions]
builtin = [
    "a",
]
after = 1
"""


def test_lines_of_keys_tables_and_arrays_of_tables(tmp_path):
    path = tmp_path / "s.toml"
    path.write_text(TEXT, encoding="utf-8-sig")
    found = read_toml(path)
    assert found.content["windows"][1]["name"] == "two"
    assert [found.line("title"), found.line("mass"), found.line("mass", "file")] == [2, 3, 4]
    assert found.line("mass", "quoted key") == 5
    assert [found.line("windows", 0, "name"), found.line("windows", 1), found.line("windows", 1, "start")] == [7, 8, 10]
    assert found.line("regions", "after") == 15
    assert found.line("mass", "not there") == 3
    assert found.line("nowhere") == 1
    assert found.raw == path.read_bytes()


@pytest.mark.parametrize(
    ("content", "words"),
    [
        (b"title = \n", "not valid TOML: .*line 1"),
        (b'title = "a"\ntitle = "b"\n', "not valid TOML"),
        (b"\xff\xfe", "not UTF-8 text"),
    ],
)
def test_what_is_not_toml_is_refused(tmp_path, content, words):
    (tmp_path / "s.toml").write_bytes(content)
    with pytest.raises(TableError, match=words):
        read_toml(tmp_path / "s.toml")


def test_a_missing_file(tmp_path):
    with pytest.raises(MissingFileError, match="no such file"):
        read_toml(tmp_path / "s.toml")
