"""References: each cited once by a key, in ``sources.toml``."""

from __future__ import annotations

import functools
import tomllib
from importlib import resources

from gasphys.errors import unknown_name

__all__ = ["cite", "sources"]


@functools.cache
def sources() -> dict[str, str]:
    """Return every reference by key.

    Returns
    -------
    dict of str
        Key to citation text.

    Examples
    --------
    >>> "severinghaus_1979" in sources()
    True
    """
    text = resources.files("gasphys").joinpath("sources.toml").read_text(encoding="utf-8")
    return {key: str(value) for key, value in tomllib.loads(text).items()}


def cite(key: str) -> str:
    """Return the citation of a key.

    Parameters
    ----------
    key : str
        A key of ``sources.toml``.

    Returns
    -------
    str
        Authors, year, title or place.

    Raises
    ------
    UnknownNameError
        If there is no such key.

    Examples
    --------
    >>> cite("severinghaus_1979").startswith("Severinghaus")
    True
    """
    try:
        return sources()[key]
    except KeyError:
        raise unknown_name("source", key, sources()) from None
