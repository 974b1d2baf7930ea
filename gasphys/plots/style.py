"""What all figures share: one accent hue on white, hatches for gases, the caution line."""

from __future__ import annotations

import functools
import io
import os
from typing import Any

from gasphys.errors import GasphysError
from gasphys.quantities import CAUTION

__all__ = ["ACCENT", "HATCH", "INK", "caution_line", "new_figure", "save_figure"]

#: The one accent hue, and the ink.
ACCENT = "#7a3b69"
INK = "#1a1a1a"
PALE = "#efe4ec"

#: Hatch and fill of each gas; the word stands beside it.
HATCH = {
    "O2": ("", PALE),
    "N2": ("....", "white"),
    "He": ("////", "white"),
    "Ar": ("xxxx", "white"),
    "H2": ("\\\\\\\\", "white"),
    "Ne": ("++++", "white"),
    "CO2": ("oooo", "white"),
}

WORDS = {
    "O2": "oxygen",
    "N2": "nitrogen",
    "He": "helium",
    "Ar": "argon",
    "H2": "hydrogen",
    "Ne": "neon",
    "CO2": "carbon dioxide",
}


def new_figure(width: float = 8.0, height: float = 5.0) -> Any:
    """Return an empty figure without any global state.

    Parameters
    ----------
    width, height : float
        Size [inch].

    Returns
    -------
    matplotlib.figure.Figure
        The figure.

    Examples
    --------
    >>> float(new_figure().get_size_inches()[0])
    8.0
    """
    from matplotlib.figure import Figure

    figure: Any = Figure(figsize=(width, height), layout="constrained", facecolor="white")
    # A notebook shows a figure by itself only where pyplot keeps global state.
    figure._repr_png_ = functools.partial(_png, figure)
    return figure


def _png(figure: Any) -> bytes:
    with io.BytesIO() as file:
        figure.savefig(file, format="png", dpi=100)
        return file.getvalue()


def caution_line(figure: Any) -> None:
    """Write the caution under a figure.

    Parameters
    ----------
    figure : matplotlib.figure.Figure
        The figure.

    Examples
    --------
    >>> caution_line(new_figure())
    """
    import textwrap

    width = int(figure.get_size_inches()[0] * 17)
    figure.supxlabel("\n".join(textwrap.wrap(CAUTION, width)), fontsize=6.5, color=INK, x=0.01, ha="left")


def tidy(axes: Any) -> None:
    """Remove what carries no meaning from axes.

    Parameters
    ----------
    axes : matplotlib.axes.Axes
        The axes.

    Examples
    --------
    >>> tidy(new_figure().subplots())
    """
    for side in ("top", "right"):
        axes.spines[side].set_visible(False)
    axes.tick_params(labelsize=8, colors=INK)


def save_figure(figure: Any, path: str | os.PathLike[str]) -> None:
    """Write a figure to a file.

    Parameters
    ----------
    figure : matplotlib.figure.Figure
        The figure.
    path : path
        File; its ending chooses the format.

    Raises
    ------
    GasphysError
        If the format is not known.

    Examples
    --------
    >>> import pathlib, tempfile
    >>> file = pathlib.Path(tempfile.mkdtemp()) / "empty.png"
    >>> save_figure(new_figure(), file)
    >>> file.exists()
    True
    """
    try:
        figure.savefig(path, dpi=150)
    except ValueError as error:
        raise GasphysError(f"{path}: {error}") from None
