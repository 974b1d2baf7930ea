"""Read a TOML file that a user wrote, so that every complaint names its line and column."""

from __future__ import annotations

import os
import re
import tomllib
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from gasphys.errors import InputFileError

__all__ = ["TomlFile", "parse_toml", "read_text", "read_toml"]

_HEADER = re.compile(r"\s*(\[\[?)\s*([\w.\"' -]+?)\s*\]\]?\s*(?:#.*)?$")


@dataclass(frozen=True)
class TomlFile:
    """The data of a TOML file, and where each entry stands.

    Parameters
    ----------
    path : str
        Name of the file, for errors.
    text : str
        What it says.
    data : dict
        The same as tables and values.
    """

    path: str
    text: str = field(repr=False)
    data: dict[str, Any] = field(repr=False)

    def error(
        self, message: str, remedy: str, *, key: str = "", table: str | None = None, number: int = 0
    ) -> InputFileError:
        """Return the error for one entry, with the line and column where it stands.

        Parameters
        ----------
        message, remedy : str
            What is wrong, and what to write.
        key : str
            The entry; "" for its table as a whole.
        table : str or None
            Name of the table the entry is in; "" for the top of the file, None where it may stand
            anywhere.
        number : int
            Which of several tables of one name, counted from zero.

        Returns
        -------
        InputFileError
            Without line where the entry is not found.

        Examples
        --------
        >>> file = parse_toml("[oxygen]\\nstock = 3\\n", "bank.toml")
        >>> print(file.error("too little", "order more", key="stock", table="oxygen"))
        bank.toml, line 2, column 1: too little. Remedy: order more
        """
        line, column = self._place(key, table, number)
        return InputFileError(message, path=self.path, line=line, column=column, remedy=remedy)

    def _place(self, key: str, table: str | None, number: int) -> tuple[int | None, int | None]:
        lines = self.text.splitlines()
        headers = [(n, m[2]) for n, text in enumerate(lines) if (m := _HEADER.match(text))]
        first, last, header = 0, len(lines), None
        if table == "":
            last = headers[0][0] if headers else last
        elif table is not None:
            own = [n for n, name in headers if name == table]
            if number < len(own):
                header = first = own[number]
                # A table ends where one that is not its own sub-table begins.
                after = [n for n, name in headers if n > header and not name.startswith(f"{table}.")]
                last = after[0] if after else last
        if key:
            pattern = re.compile(rf"(?:^|[\s.{{\[,])[\"']?({re.escape(key)})[\"']?\s*(?:=|\])")
            for n in range(first, last):
                if found := pattern.search(lines[n]):
                    return n + 1, found.start(1) + 1
        return (None, None) if header is None else (header + 1, 1)


def read_text(path: str | os.PathLike[str]) -> str:
    """Return the text of a UTF-8 file.

    Parameters
    ----------
    path : path
        The file.

    Returns
    -------
    str
        Its text, without a byte-order mark.

    Raises
    ------
    InputFileError
        If it cannot be read or is not UTF-8.

    Examples
    --------
    >>> try:
    ...     read_text("no_such_file.toml")
    ... except InputFileError as error:
    ...     print(error)
    no_such_file.toml: No such file or directory. Remedy: check the file's name
    """
    try:
        return Path(path).read_text(encoding="utf-8-sig")
    except UnicodeDecodeError:
        raise InputFileError("not UTF-8 text", path=path, remedy="save the file as UTF-8") from None
    except (OSError, ValueError) as error:  # ValueError: a NUL in the name
        reason = getattr(error, "strerror", None) or "cannot be read"
        raise InputFileError(reason, path=path, remedy="check the file's name") from None


def parse_toml(
    text: str, path: str | os.PathLike[str], remedy: str = "correct what TOML does not allow"
) -> TomlFile:
    """Return the data of a TOML text.

    Parameters
    ----------
    text : str
        The text.
    path : path
        Name of the file, for errors.
    remedy : str
        What to write, for a text that is not TOML.

    Returns
    -------
    TomlFile
        Data and places.

    Raises
    ------
    InputFileError
        With line and column, if it is not TOML.

    Examples
    --------
    >>> parse_toml("volume = 18", "chamber.toml").data
    {'volume': 18}
    """
    try:
        return TomlFile(os.fspath(path), text, tomllib.loads(text))
    except tomllib.TOMLDecodeError as error:
        match = re.search(r"\(at line (\d+), column (\d+)\)", str(error))
        lines = text.splitlines()
        line, column = (int(match[1]), int(match[2])) if match else (max(len(lines), 1), 1)
        message = re.sub(r" \(at .*\)$", "", str(error))
        raise InputFileError(message, path=path, line=line, column=column, remedy=remedy) from None


def read_toml(path: str | os.PathLike[str], remedy: str = "correct what TOML does not allow") -> TomlFile:
    """Read a TOML file.

    Parameters
    ----------
    path : path
        The file, UTF-8.
    remedy : str
        What to write, for a text that is not TOML.

    Returns
    -------
    TomlFile
        Data and places.

    Raises
    ------
    InputFileError
        With file, and with line and column where it is not TOML.

    Examples
    --------
    >>> import pathlib, tempfile
    >>> file = pathlib.Path(tempfile.mkdtemp()) / "chamber.toml"
    >>> _ = file.write_text("volume = 18\\n")
    >>> read_toml(file).data["volume"]
    18
    """
    return parse_toml(read_text(path), path, remedy)
