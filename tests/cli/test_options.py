"""What commands share: small files that cannot be read, each with its message; lines and tables."""

from __future__ import annotations

from pathlib import Path

import pytest

from identify.cli.options import MAX_TEXT_BYTES, read_text, say, say_table
from identify.errors import InputError, UsageError


def test_a_byte_order_mark_is_no_text(tmp_path: Path) -> None:
    path = tmp_path / "leiter ä 梯.txt"
    path.write_bytes(b"\xef\xbb\xbfC10 8.00\n")
    assert read_text(path, "ladder") == "C10 8.00\n"


def test_each_kind_of_unreadable_file_has_its_message(tmp_path: Path) -> None:
    (tmp_path / "binary.txt").write_bytes(b"\xff\xfe\x00")
    (tmp_path / "big.txt").write_bytes(b"1" * (MAX_TEXT_BYTES + 1))
    (tmp_path / "file").write_bytes(b"")
    for name, found in (
        ("missing.txt", "no file"),
        (".", "a folder"),
        ("binary.txt", "bytes that are no UTF-8 text"),
        ("big.txt", "more than 16 MB"),
        ("file/below.txt", "a file where a folder should be"),
    ):
        path = tmp_path / name
        with pytest.raises(InputError) as error:
            read_text(path, "ladder")
        assert str(error.value) == f"ladder in {path}: found {found}, expected a readable text file."


def test_the_kind_of_error_is_the_callers(tmp_path: Path) -> None:
    with pytest.raises(UsageError):
        read_text(tmp_path / "missing", "settings", UsageError)


def test_printed_lines_spell_out_controls_and_keep_their_margin(capsys: pytest.CaptureFixture[str]) -> None:
    say("  name \x1b[31mred\n")
    assert capsys.readouterr().out == "  name ⟨1B⟩[31mred\n"


def test_table_columns_are_as_wide_as_their_longest_cell(capsys: pytest.CaptureFixture[str]) -> None:
    say_table(("a", "b"), [("long cell", "1"), ("x", "22")])
    assert capsys.readouterr().out == "  a          b\n  long cell  1\n  x          22\n"
