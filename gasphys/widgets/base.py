"""What every app shares: a sentence with blanks, a dataset, a picture, and a view built on demand."""

from __future__ import annotations

import abc
import io
import math
import os
import string
import time
import tomllib
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from functools import cache, cached_property
from importlib import resources
from pathlib import Path
from typing import Any, ClassVar

import numpy as np
import xarray as xr

from gasphys.errors import GasphysError, unknown_name
from gasphys.quantities import CAUTION, Quantity, quantity
from gasphys.units import convert, parse_quantity

__all__ = ["App", "Name", "Number", "shown", "start_values", "unit_words"]


@cache
def start_values() -> dict[str, Any]:
    """Return what apps begin with and the gases they offer.

    Returns
    -------
    dict
        The content of ``start_values.toml``.

    Examples
    --------
    >>> "oxygen" in start_values()["gases"]
    True
    """
    text = resources.files("gasphys.widgets").joinpath("start_values.toml").read_text(encoding="utf-8")
    return tomllib.loads(text)


def shown(value: float, digits: int = 4) -> str:
    """Return a number as a face shows it: significant digits, no exponent.

    Parameters
    ----------
    value : float
        The number.
    digits : int
        Significant digits.

    Returns
    -------
    str
        Decimal notation.

    Examples
    --------
    >>> shown(231.658), shown(0.79277), shown(5.2)
    ('231.7', '0.7928', '5.2')
    """
    return np.format_float_positional(value, precision=digits, fractional=False, trim="-")


def unit_words(unit: str) -> str:
    """Return a unit as a choice shows it.

    Parameters
    ----------
    unit : str
        A unit.

    Returns
    -------
    str
        The same, but a word for a plain number.

    Examples
    --------
    >>> unit_words("1"), unit_words("kPa")
    ('fraction', 'kPa')
    """
    return "fraction" if unit == "1" else unit


@dataclass(frozen=True)
class Number:
    """A blank of the sentence that holds a number.

    Parameters
    ----------
    quantity_name : str
        Quantity: its possible range is what the blank takes, its usual range what the slider spans.
    units : tuple of str
        Units to choose from, the one shown at first in front; none: the quantity's own.
    whole : bool
        Whether it counts something: a part of one is refused.

    Examples
    --------
    >>> Number("ambient_pressure", ("atm", "kPa")).read("2.4", "atm")
    243.18
    """

    quantity_name: str
    units: tuple[str, ...] = ()
    whole: bool = False

    @property
    def quantity(self) -> Quantity:
        """Its entry in the registry."""
        return quantity(self.quantity_name)

    def read(self, text: str, unit: str) -> float:
        """Return what was typed in the canonical unit.

        Parameters
        ----------
        text : str
            A number, or a number with a unit of its own.
        unit : str
            Unit meant where none is written.

        Returns
        -------
        float
            In the canonical unit.

        Raises
        ------
        GasphysError
            If it cannot be read or is not possible.

        Examples
        --------
        >>> round(Number("arterial_pco2").read("39 mmHg", "kPa"), 3)
        5.2
        """
        number, given = parse_quantity(text)
        value = float(self.quantity.from_unit(number, given or unit))
        if not self.quantity.possible[0] <= value <= self.quantity.possible[1]:
            raise self.quantity.range_error(value)
        if self.whole and value != round(value):
            raise GasphysError(f"{self.quantity_name} = {shown(value)} is not a whole number")
        return value

    def show(self, value: float, unit: str) -> str:
        """Return a canonical value as the blank shows it.

        Parameters
        ----------
        value : float
            In the canonical unit.
        unit : str
            Unit shown.

        Returns
        -------
        str
            The number alone.

        Examples
        --------
        >>> Number("ambient_pressure").show(243.18, "atm")
        '2.4'
        """
        return shown(float(convert(value, self.quantity.unit, unit)))

    def span(self, unit: str) -> tuple[float, float, float]:
        """Return lower end, upper end and step of the slider.

        Parameters
        ----------
        unit : str
            Unit shown.

        Returns
        -------
        tuple of float
            Usual range widened to whole steps, about fifty of them.

        Examples
        --------
        >>> Number("ambient_pressure").span("atm")
        (1.0, 6.0, 0.1)
        """
        low, high = (float(convert(end, self.quantity.unit, unit)) for end in self.quantity.usual)
        rough = (high - low) / 50.0
        power = 10.0 ** math.floor(math.log10(rough))
        step = min((1.0, 2.0, 5.0, 10.0), key=lambda f: abs(math.log(f * power / rough))) * power
        low = math.floor(low / step + 1e-9) * step
        high = math.ceil(high / step - 1e-9) * step
        return _tidy(low, step), _tidy(high, step), _tidy(step, step)

    def place(self, value: float, unit: str) -> float:
        """Return the place of the slider that is nearest to a value.

        Parameters
        ----------
        value : float
            In the canonical unit.
        unit : str
            Unit shown.

        Returns
        -------
        float
            A whole number of steps from the lower end, within the ends.

        Examples
        --------
        >>> Number("hemoglobin").place(12.9, "g/dL")
        13.0
        """
        low, high, step = self.span(unit)
        steps = round((float(convert(value, self.quantity.unit, unit)) - low) / step)
        return min(max(_tidy(low + steps * step, step), low), high)

    def at_place(self, place: float, unit: str) -> str:
        """Return the text a place of the slider stands for.

        Parameters
        ----------
        place : float
            Of the slider.
        unit : str
            Unit it counts in.

        Returns
        -------
        str
            As it would be typed.

        Examples
        --------
        >>> Number("hemoglobin").at_place(13.000000000000002, "g/dL")
        '13.0'
        """
        return repr(_tidy(place, self.span(unit)[2]))


def _tidy(value: float, step: float) -> float:
    """Return a value without what arithmetic left far below a step."""
    return round(value, max(9, 2 - math.floor(math.log10(step))))


@dataclass(frozen=True)
class Name:
    """A blank of the sentence that holds a name.

    Parameters
    ----------
    reads : callable
        Turns what was typed into the name, or raises a :class:`GasphysError`.
    offered : tuple of str
        Names to choose from; others may be typed.

    Examples
    --------
    >>> from gasphys.gas import Gas
    >>> Name(lambda text: str(Gas.parse(text)), ("air",)).read("EAN 48", "")
    'nitrox 48'
    """

    reads: Callable[[str], str]
    offered: tuple[str, ...]
    units: tuple[str, ...] = ()

    def read(self, text: str, unit: str) -> str:
        """Return the name meant by what was typed.

        Parameters
        ----------
        text : str
            What was typed.
        unit : str
            Not used.

        Returns
        -------
        str
            The name.

        Raises
        ------
        GasphysError
            If there is no such name.
        """
        return self.reads(text)

    def show(self, value: str, unit: str) -> str:
        """Return the name as the blank shows it.

        Parameters
        ----------
        value : str
            The name.
        unit : str
            Not used.

        Returns
        -------
        str
            The same.
        """
        return value


class App(abc.ABC):
    """One question as a sentence with blanks, a computed answer and a picture.

    A concrete app sets :attr:`sentence`, :attr:`blanks` and :attr:`name`, and writes
    :meth:`compute`, :meth:`draw`, :meth:`figure`, :meth:`answer` and :meth:`lines`.

    Parameters
    ----------
    **start
        Start value of every blank: a number in the canonical unit, or text as it would be typed.

    Attributes
    ----------
    params : dict
        Canonical value of every blank.
    units : dict
        Unit shown for every blank.
    timing : dict
        Milliseconds that the last picture took, by part.

    Raises
    ------
    GasphysError
        If a start value is not possible.
    UnknownNameError
        If there is no such blank.

    Examples
    --------
    >>> import gasphys as gp
    >>> app = gp.widgets.OxygenAtPressure(hemoglobin=12.9)
    >>> app.params["hemoglobin"]
    12.9
    """

    #: Sentence with the names of the blanks in braces.
    sentence: ClassVar[str]
    #: Blank by name.
    blanks: ClassVar[Mapping[str, Number | Name]]
    #: Name of exported files.
    name: ClassVar[str]
    #: Variable whose working can be shown, to the words for it.
    explained: ClassVar[Mapping[str, str]] = {}
    #: Dimension along which the CSV file has its lines; "" where there is only one.
    rows: ClassVar[str] = ""
    #: Size of the picture [inch].
    size: ClassVar[tuple[float, float]] = (7.4, 4.8)

    def __init__(self, **start: Any) -> None:
        for name in start:
            if name not in self.blanks:
                raise unknown_name(f"blank of {type(self).__name__}", name, self.blanks)
        self.units = {name: self.unit_choices(name)[0] for name in self.blanks}
        self.params = {name: self._start(name, start[name]) for name in self.blanks}
        self.timing: dict[str, float] = {}
        self._begin = (dict(self.params), dict(self.units))

    def _start(self, name: str, value: Any) -> Any:
        blank = self.blanks[name]
        if isinstance(blank, Name):
            return blank.read(str(value), "")
        if isinstance(value, str):
            return blank.read(value, blank.quantity.unit)
        low, high = blank.quantity.possible
        if not low <= value <= high:
            raise blank.quantity.range_error(float(value))
        return float(value)

    def unit_choices(self, name: str) -> tuple[str, ...]:
        """Return the units a blank may be shown in, the first one at the start.

        Parameters
        ----------
        name : str
            A blank.

        Returns
        -------
        tuple of str
            One at least; "" for a name.

        Examples
        --------
        >>> import gasphys as gp
        >>> gp.widgets.OxygenAtPressure().unit_choices("hemoglobin")
        ('g/dL',)
        """
        blank = self.blanks[name]
        return blank.units or ((blank.quantity.unit,) if isinstance(blank, Number) else ("",))

    def phrases(self) -> list[tuple[str, str, str]]:
        """Return the sentence in pieces: words, the blank after them, the punctuation after it.

        Returns
        -------
        list of tuple
            The last blank may be "".

        Examples
        --------
        >>> import gasphys as gp
        >>> gp.widgets.OxygenAtPressure().phrases()[0]
        ('A person with hemoglobin', 'hemoglobin', ',')
        """
        parts = [(words, name or "") for words, name, _, _ in string.Formatter().parse(self.sentence)]
        pieces = []
        for k, (words, name) in enumerate(parts):
            after = parts[k + 1][0] if k + 1 < len(parts) else ""
            words = words.lstrip(",.;:?") if k else words
            mark = after[: len(after) - len(after.lstrip(",.;:?"))] if name else ""
            pieces.append((words.strip(), name, mark))
        return [piece for piece in pieces if piece[0] or piece[1]]

    # -- what a concrete app writes ----------------------------------------------------------

    @abc.abstractmethod
    def compute(self) -> xr.Dataset:
        """Return the dataset of :attr:`params`.

        Returns
        -------
        Dataset
            With units, sources and the caution.

        Raises
        ------
        GasphysError
            If the values cannot stand together.
        """

    @abc.abstractmethod
    def draw(self, figure: Any, ds: xr.Dataset) -> None:
        """Draw the dataset; on a figure drawn before, move its artists.

        Parameters
        ----------
        figure : matplotlib.figure.Figure
            Empty at first.
        ds : Dataset
            As :meth:`compute` returns it.
        """

    @abc.abstractmethod
    def figure(self) -> Any:
        """Return the picture of :attr:`params` on a figure of its own, with the caution.

        Returns
        -------
        matplotlib.figure.Figure
            The figure.
        """

    @abc.abstractmethod
    def answer(self, ds: xr.Dataset) -> str:
        """Return the answer in one sentence.

        Parameters
        ----------
        ds : Dataset
            As :meth:`compute` returns it.

        Returns
        -------
        str
            With units.
        """

    @abc.abstractmethod
    def notes(self, ds: xr.Dataset) -> list[str]:
        """Return what speaks against the answer, and what it assumes.

        Parameters
        ----------
        ds : Dataset
            As :meth:`compute` returns it.

        Returns
        -------
        list of str
            One sentence each.
        """

    @abc.abstractmethod
    def explain(self, ds: xr.Dataset, name: str) -> str:
        """Return the working of one number of the answer.

        Parameters
        ----------
        ds : Dataset
            As :meth:`compute` returns it.
        name : str
            A key of :attr:`explained`.

        Returns
        -------
        str
            Equations, inputs, constants, sources.
        """

    @abc.abstractmethod
    def lines(self) -> str:
        """Return the Python lines that reproduce ``ds`` and ``figure``.

        Returns
        -------
        str
            To paste into a cell or a script.
        """

    # -- what every app can do ---------------------------------------------------------------

    def reset(self) -> None:
        """Go back to the start values and units.

        Examples
        --------
        >>> import gasphys as gp
        >>> app = gp.widgets.OxygenAtPressure()
        >>> app.params["gas"] = "air"
        >>> app.reset()
        >>> app.params["gas"]
        'oxygen'
        """
        self.params, self.units = dict(self._begin[0]), dict(self._begin[1])

    def png(self, figure: Any) -> bytes:
        """Return a figure as PNG, for a view.

        Parameters
        ----------
        figure : matplotlib.figure.Figure
            The figure.

        Returns
        -------
        bytes
            Twice as fine as the screen needs, so that it can be enlarged.

        Examples
        --------
        >>> import gasphys as gp
        >>> app = gp.widgets.OxygenAtPressure()
        >>> app.png(app.figure())[:4]
        b'\\x89PNG'
        """
        from matplotlib.backends.backend_agg import FigureCanvasAgg
        from PIL import Image

        # The canvas of a figure drawn before is used again: a new one costs a fifth of the drawing.
        canvas: Any = figure.canvas if isinstance(figure.canvas, FigureCanvasAgg) else FigureCanvasAgg(figure)
        figure.set_dpi(192)
        canvas.draw()
        full = Image.frombuffer("RGBA", canvas.get_width_height(), canvas.buffer_rgba(), "raw", "RGBA", 0, 1)
        with io.BytesIO() as file:
            # Few colors and the least compression: what a moving slider waits for.
            full.convert("P", palette=Image.Palette.ADAPTIVE, colors=64).save(file, "png", compress_level=1)
            return file.getvalue()

    def export(self, path: str | os.PathLike[str]) -> None:
        """Write the dataset to a file.

        Parameters
        ----------
        path : path
            Ending in ``.nc`` (netCDF) or ``.csv``.

        Raises
        ------
        GasphysError
            For another ending, or if the file cannot be written.

        Examples
        --------
        >>> import pathlib, tempfile
        >>> import gasphys as gp
        >>> file = pathlib.Path(tempfile.mkdtemp()) / "oxygen.csv"
        >>> gp.widgets.OxygenAtPressure().export(file)
        >>> file.read_text().splitlines()[0]
        '# oxygen from breathing gas to mixed venous blood'
        """
        path = Path(path)
        try:
            content = self.file(path.suffix)
            path.write_bytes(content)
        except OSError as error:
            raise GasphysError(f"{path}: {error.strerror}") from None

    def file(self, ending: str) -> bytes:
        """Return the dataset as the content of a file.

        Parameters
        ----------
        ending : str
            ``".nc"`` or ``".csv"``.

        Returns
        -------
        bytes
            netCDF 3, or CSV with the caution on top and the unit in each header.

        Raises
        ------
        GasphysError
            For another ending.

        Examples
        --------
        >>> import gasphys as gp
        >>> gp.widgets.OxygenAtPressure().file(".nc")[:3]
        b'CDF'
        """
        if ending not in (".nc", ".csv"):
            raise GasphysError(f"a dataset is written as .nc or .csv, not {ending!r}")
        ds = self.compute()
        if ending == ".nc":
            return bytes(ds.to_netcdf(engine="scipy"))
        table = self.table(ds)
        head = [ds.attrs["title"], *self.notes(ds), CAUTION]
        lines = [f"# {line}" for line in head]
        text: str = table.to_csv(index=False, lineterminator="\n")
        return ("\n".join(lines) + "\n" + text).encode()

    def table(self, ds: xr.Dataset) -> Any:
        """Return the dataset as a table.

        Parameters
        ----------
        ds : Dataset
            As :meth:`compute` returns it.

        Returns
        -------
        DataFrame
            A line for each place along :attr:`rows`, the unit in each header.

        Examples
        --------
        >>> import gasphys as gp
        >>> app = gp.widgets.OxygenAtPressure()
        >>> app.table(app.compute()).columns[0]
        'ambient_pressure [kPa]'
        """
        along = [n for n in ds.data_vars if len(ds[n].dims) == 1 and self.rows in ("", *ds[n].dims)]
        table = ds[along].to_dataframe().reset_index()
        table.columns = [
            f"{c} [{ds[c].attrs['units']}]" if "units" in ds[c].attrs else c for c in table.columns
        ]
        return table

    @cached_property
    def _shown(self) -> Any:
        from gasphys.widgets.view import View

        return View(self)

    @property
    def view(self) -> Any:
        """The ipywidgets box, built when it is first asked for.

        Examples
        --------
        >>> import gasphys as gp
        >>> len(gp.widgets.OxygenAtPressure().view.children) > 3
        True
        """
        return self._shown.box

    def _repr_mimebundle_(self, **more: Any) -> Any:
        return self.view._repr_mimebundle_(**more)

    def picture(self, figure: Any) -> tuple[xr.Dataset, bytes]:
        """Compute, draw and encode; remember how long each took.

        Parameters
        ----------
        figure : matplotlib.figure.Figure
            The view's figure.

        Returns
        -------
        tuple of Dataset and bytes
            The dataset and its picture as PNG.

        Examples
        --------
        >>> import gasphys as gp
        >>> from gasphys.plots.style import new_figure
        >>> app = gp.widgets.OxygenAtPressure()
        >>> ds, png = app.picture(new_figure())
        >>> sorted(app.timing)
        ['compute', 'draw']
        """
        start = time.perf_counter()
        ds = self.compute()
        middle = time.perf_counter()
        self.draw(figure, ds)
        png = self.png(figure)
        end = time.perf_counter()
        self.timing = {"compute": 1000.0 * (middle - start), "draw": 1000.0 * (end - middle)}
        return ds, png
